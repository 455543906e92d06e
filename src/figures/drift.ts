import { countOf } from "../model/text.js";
import type { Figure, FigureOptions } from "./figure.js";
import { legend } from "./legend.js";
import { barPath, lyingBarPath, marker, stroke } from "./marks.js";
import { axes, bottomRoom, clipped, leftRoom, ticksOf, zeroLine, type Panel } from "./panel.js";
import { must, num, word, type Cell, type Row } from "./rows.js";
import { extent, linear, niceTicks, tickLabels } from "./scale.js";
import { element, label, polyline } from "./svg.js";
import { seriesMarks, unfold, unfoldedTicks } from "./unfold.js";

export interface DriftInput {
  /** Rows of the table `temperature` of one cooldown. */
  readonly frames: readonly Row[];
  /** Measured pairs: `reference`, `moving`, `x_nm`, `y_nm`, `sd_x_nm`, `sd_y_nm`, `used`. */
  readonly pairs: readonly Row[];
}

/** Two-sided 95 % of a normal. */
const Z95 = 1.959963984540054;

/** Where the frames lie: the track in the plane, both axes along the run, and what each measured pair leaves over. */
export function driftFigure(input: DriftInput, o: FigureOptions): Figure {
  const s = o.style;
  const placed = input.frames.filter((r) => num(r, "drift_x_nm") !== null && num(r, "drift_y_nm") !== null);
  const at = new Map(placed.map((r) => [must(r, "frame"), r]));
  const rows: Cell[][] = placed.map((r) => [
    "frame",
    num(r, "frame"),
    null,
    num(r, "temperature_K"),
    num(r, "drift_x_nm"),
    num(r, "drift_y_nm"),
    num(r, "drift_sd_nm"),
    null,
    1,
  ]);
  const left = leftRoom(["−000"], "y", s) + 2;
  const width = o.widthPt - left - 4;

  const track = trackPanel(placed, left, 4, width, o);
  const run = unfold(input.frames);
  const x = linear(-0.02 * run.length, 1.02 * run.length, left, left + width);
  const keyTop = track.bottom + 3;
  const top2 = keyTop + 2.6 * s.textPt + 3;
  const height2 = width * 0.34;
  const [v0, v1] = extent(
    placed.flatMap((r) => {
      const sd = Z95 * (num(r, "drift_sd_nm") ?? 0);
      return [
        must(r, "drift_x_nm") - sd,
        must(r, "drift_x_nm") + sd,
        must(r, "drift_y_nm") - sd,
        must(r, "drift_y_nm") + sd,
      ];
    }),
    0.08,
  );
  const axesPanel: Panel = { left, top: top2, width, height: height2, x, y: linear(v0, v1, top2 + height2, top2) };
  const along: string[] = [zeroLine(axesPanel, 0, s)];
  for (const [k, column] of (["drift_x_nm", "drift_y_nm"] as const).entries()) {
    const colour = s.series[k];
    const xs = placed.map((r) => x(run.at.get(must(r, "frame")) ?? 0));
    const ys = placed.map((r) => axesPanel.y(must(r, column)));
    along.push(
      polyline(xs, ys, { stroke: colour, "stroke-width": 0.7, "stroke-dasharray": k === 1 ? "3 1.6" : undefined }),
    );
    placed.forEach((r, n) => {
      const half = Z95 * (num(r, "drift_sd_nm") ?? 0);
      const v = must(r, column);
      along.push(
        element("path", { d: barPath(xs[n], axesPanel.y(v - half), axesPanel.y(v + half), 1), ...stroke(colour, 0.7) }),
      );
      along.push(
        marker(xs[n], ys[n], {
          shape: k === 0 ? "circle" : "square",
          size: 3.2,
          fill: k === 0 ? colour : s.background,
          stroke: colour,
          strokeWidth: 0.7,
        }),
      );
    });
  }

  const residuals = input.pairs.flatMap((p) => {
    const a = at.get(must(p, "reference"));
    const b = at.get(must(p, "moving"));
    if (a === undefined || b === undefined) return [];
    const rx = must(p, "x_nm") - (must(b, "drift_x_nm") - must(a, "drift_x_nm"));
    const ry = must(p, "y_nm") - (must(b, "drift_y_nm") - must(a, "drift_y_nm"));
    return [{ p, rx, ry, used: num(p, "used") === 1 }];
  });
  for (const r of residuals)
    rows.push([
      "pair",
      num(r.p, "reference"),
      num(r.p, "moving"),
      null,
      r.rx,
      r.ry,
      num(r.p, "sd_x_nm"),
      num(r.p, "sd_y_nm"),
      r.used ? 1 : 0,
    ]);
  const restTop = top2 + height2 + 5;
  const height3 = width * 0.26;
  const [r0, r1] = extent(
    residuals.filter((r) => r.used).flatMap((r) => [r.rx, r.ry, -r.rx, -r.ry]),
    0.1,
  );
  const rest: Panel = { left, top: restTop, width, height: height3, x, y: linear(r0, r1, restTop + height3, restTop) };
  const below: string[] = [zeroLine(rest, 0, s)];
  let outside = 0;
  for (const r of residuals) {
    // a pair stands at the later of its two frames
    const px = x(run.at.get(Math.max(must(r.p, "moving"), must(r.p, "reference"))) ?? 0);
    for (const [k, v] of [r.rx, r.ry].entries()) {
      if (v < r0 || v > r1) outside++;
      below.push(
        marker(px + (k === 0 ? -1 : 1), rest.y(v), {
          shape: r.used ? (k === 0 ? "circle" : "square") : "cross",
          size: 2.2,
          fill: r.used && k === 0 ? s.series[k] : "none",
          stroke: s.series[k],
          strokeWidth: 0.5,
        }),
      );
    }
  }
  const ticks = unfoldedTicks(run, width / 26);
  const yTicks = niceTicks(v0, v1, 4);
  const cooldown = word(input.frames[0] ?? {}, "cooldown");
  const key = legend(
    ["along x", "along y"].map((text, k) => ({
      text,
      sign: (sx: number, sy: number): string =>
        marker(sx, sy, {
          shape: k === 0 ? "circle" : "square",
          size: 3.4,
          fill: k === 0 ? s.series[0] : s.background,
          stroke: s.series[k],
          strokeWidth: 0.8,
        }),
    })),
    left,
    keyTop,
    width,
    s,
  );
  return {
    widthPt: o.widthPt,
    heightPt: restTop + height3 + bottomRoom("T", s) + 3,
    style: s,
    title: `Drift of ${cooldown}`,
    notes: [
      "Top: places of the frames in the cooldown's coordinates; bars: 95 % intervals; first and last frame are named.",
      "Middle: the same along the run. Bottom: measured shift of each pair of frames minus that of their places.",
      ...(placed.length < input.frames.length
        ? [`Not placed: ${countOf(input.frames.length - placed.length, "frame")}.`]
        : []),
      ...(residuals.some((r) => !r.used) ? ["Crosses: pairs that disagree with the others and placed no frame."] : []),
      ...(outside > 0 ? [`Of such pairs ${countOf(outside, "residual")} outside the axis.`] : []),
    ],
    body: [
      track.svg,
      seriesMarks(run, x, top2, height2, s),
      axes(axesPanel, { title: "", ...ticks, labelled: false }, { title: "Drift (nm)", ticks: yTicks }, s),
      clipped(axesPanel, "drift-along", ...along),
      key.svg,
      seriesMarks(run, x, restTop, height3, s, false),
      axes(
        rest,
        { title: "Temperature (K), in the order of the run", ...ticks },
        { title: "Residual (nm)", ticks: niceTicks(r0, r1, 3) },
        s,
      ),
      clipped(rest, "drift-rest", ...below),
      residuals.length === 0
        ? label(left + width / 2, restTop + height3 / 2, "no measured pairs", {
            size: s.textPt,
            fill: s.faint,
            anchor: "middle",
          })
        : "",
    ].join(""),
    table: {
      columns: ["what", "frame_or_reference", "moving", "temperature_K", "x_nm", "y_nm", "sd_nm", "sd_y_nm", "used"],
      rows,
    },
  };
}

function trackPanel(
  placed: readonly Row[],
  left: number,
  top: number,
  width: number,
  o: FigureOptions,
): { svg: string; bottom: number } {
  const s = o.style;
  const sd = (r: Row): number => Z95 * (num(r, "drift_sd_nm") ?? 0);
  const [x0, x1] = extent(
    placed.flatMap((r) => [must(r, "drift_x_nm") - sd(r), must(r, "drift_x_nm") + sd(r)]),
    0.1,
  );
  const [y0, y1] = extent(
    placed.flatMap((r) => [must(r, "drift_y_nm") - sd(r), must(r, "drift_y_nm") + sd(r)]),
    0.1,
  );
  const most = 0.8 * width;
  const perNm = Math.min(width / (x1 - x0), most / (y1 - y0));
  const height = Math.max(0.45 * width, (y1 - y0) * perNm);
  const [cx, cy] = [(x0 + x1) / 2, (y0 + y1) / 2];
  // y grows with the row index: down the page, as in the images
  const panel: Panel = {
    left,
    top,
    width,
    height,
    x: linear(cx - width / perNm / 2, cx + width / perNm / 2, left, left + width),
    y: linear(cy - height / perNm / 2, cy + height / perNm / 2, top, top + height),
  };
  const xs = placed.map((r) => panel.x(must(r, "drift_x_nm")));
  const ys = placed.map((r) => panel.y(must(r, "drift_y_nm")));
  const parts = [polyline(xs, ys, { stroke: s.faint, "stroke-width": 0.6 })];
  placed.forEach((r, k) => {
    const cooling = word(r, "branch") === "cooling";
    const colour = s.series[cooling ? 0 : 1];
    const half = sd(r) * perNm;
    parts.push(
      element("path", {
        d: barPath(xs[k], ys[k] - half, ys[k] + half, 0) + lyingBarPath(ys[k], xs[k] - half, xs[k] + half, 0),
        ...stroke(colour, 0.6),
      }),
      marker(
        xs[k],
        ys[k],
        {
          shape: cooling ? "down" : "up",
          size: 4,
          fill: cooling ? colour : s.background,
          stroke: colour,
          strokeWidth: 0.8,
        },
        {
          "data-frame": must(r, "frame"),
          "data-x-nm": must(r, "drift_x_nm"),
          "data-y-nm": must(r, "drift_y_nm"),
          "data-sd-nm": num(r, "drift_sd_nm"),
        },
      ),
    );
  });
  const ends = placed.length > 1 ? [0, placed.length - 1] : placed.map((_, k) => k);
  const names = ends.map((k) => {
    const right = xs[k] < left + width / 2;
    return label(xs[k] + (right ? 4 : -4), ys[k] - 3, word(placed[k], "frame"), {
      size: s.textPt,
      fill: s.ink,
      anchor: right ? "start" : "end",
    });
  });
  const yTicks = ticksOf(panel.y, Math.max(3, height / 26));
  const svg =
    axes(panel, { title: "x (nm)" }, { title: "y (nm)", ticks: yTicks, labels: tickLabels(yTicks) }, s) +
    clipped(panel, "drift-track", ...parts, ...names);
  return { svg, bottom: top + height + bottomRoom("x", s) };
}
