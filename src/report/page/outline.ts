import type { Cooldown } from "./cooldown.js";
import type { Frame } from "./frames.js";
import type { Rect } from "./view.js";

const kept = new WeakMap<Frame, Map<number, Path2D>>();

/** The outline of a tracked domain in a frame, in pixels of the frame (corner of the first pixel at 0, 0); null where it is not there. */
export function outlineOf(frame: Frame, domain: number): Path2D | null {
  const { domains, rows, cols } = frame;
  if (domains === null) return null;
  let own = kept.get(frame);
  if (own === undefined) kept.set(frame, (own = new Map()));
  const known = own.get(domain);
  if (known !== undefined) return known;
  const code = domain + 1;
  const path = new Path2D();
  let found = false;
  for (let i = 0, k = 0; i < rows; i++) {
    for (let j = 0; j < cols; j++, k++) {
      if (domains[k] !== code) continue;
      found = true;
      if (i === 0 || domains[k - cols] !== code) edge(path, j, i, j + 1, i);
      if (i === rows - 1 || domains[k + cols] !== code) edge(path, j, i + 1, j + 1, i + 1);
      if (j === 0 || domains[k - 1] !== code) edge(path, j, i, j, i + 1);
      if (j === cols - 1 || domains[k + 1] !== code) edge(path, j + 1, i, j + 1, i + 1);
    }
  }
  if (!found) return null;
  own.set(domain, path);
  return path;
}

function edge(path: Path2D, x0: number, y0: number, x1: number, y1: number): void {
  path.moveTo(x0, y0);
  path.lineTo(x1, y1);
}

/** The smallest rectangle of pixel centres that holds a domain, nm of the frame without drift; null where it is not there. */
export function domainBox(cooldown: Cooldown, frame: Frame, domain: number): Rect | null {
  const { domains, rows, cols } = frame;
  if (domains === null) return null;
  let [left, top, right, bottom] = [cols, rows, -1, -1];
  for (let i = 0, k = 0; i < rows; i++)
    for (let j = 0; j < cols; j++, k++) {
      if (domains[k] !== domain + 1) continue;
      left = Math.min(left, j);
      right = Math.max(right, j);
      top = Math.min(top, i);
      bottom = Math.max(bottom, i);
    }
  if (right < 0) return null;
  const { pixelXNm, pixelYNm } = cooldown.info;
  return { x0Nm: left * pixelXNm, y0Nm: top * pixelYNm, x1Nm: right * pixelXNm, y1Nm: bottom * pixelYNm };
}
