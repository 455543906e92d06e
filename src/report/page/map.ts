import { scaleLength } from "../../figures/frame_keys.js";
import { must, num } from "../../figures/rows.js";
import { styleNamed } from "../../figures/style.js";
import { current, currentFrames, frameText, picked, type Context } from "./context.js";
import { h } from "./dom.js";
import type { Frame } from "./frames.js";
import { takeMapInput } from "./map_input.js";
import { outlineOf } from "./outline.js";
import { drawRaster, drawVeil } from "./raster_layer.js";
import { isPoint, type MapView, type Point } from "./state.js";
import { fittedView, frameRect, Projection, wholeField, type Rect } from "./view.js";
import { drawWalls, widthRange } from "./wall_layer.js";

const STYLE = styleNamed("paper");
const ACCENT = "#c8102e";
/** Chosen, measured and marked things: a dark line with a light one in it is seen on any colour. */
const DARK = "#111111";

/** The picture of a frame in the cooldown's coordinates, with all that is laid over it. */
export class FrameMap {
  readonly node: HTMLElement;
  readonly canvas = h("canvas", {
    class: "map-canvas",
    tabindex: 0,
    role: "application",
    "aria-roledescription": "map of a frame",
    "aria-describedby": "map-keys",
  });
  private readonly pen: CanvasRenderingContext2D;
  private readonly ranges = new Map<number, { low: number; high: number } | null>();
  private width = 1;
  private height = 1;
  private waiting = false;

  constructor(readonly context: Context) {
    const pen = this.canvas.getContext("2d");
    if (pen === null) throw new Error("no canvas");
    this.pen = pen;
    this.node = h("div", { class: "map-box" }, this.canvas);
    new ResizeObserver(() => this.resize()).observe(this.node);
    takeMapInput(this);
    context.store.on(
      [
        "cooldown",
        "frame",
        "base",
        "over",
        "mix",
        "walls",
        "compare",
        "split",
        "pinned",
        "pointed",
        "line",
        "region",
        "view",
        "at",
      ],
      () => this.redraw(),
    );
    context.store.on(["cooldown"], () => this.resize());
    context.store.on(["cooldown", "frame", "base"], (s) => {
      const c = current(context);
      this.canvas.setAttribute("aria-label", `${s.base} of ${frameText(c, s.frame)}`);
    });
  }

  get field(): Rect {
    return wholeField(current(this.context));
  }

  get fit(): MapView {
    return fittedView(this.field, this.width, this.height);
  }

  get projection(): Projection {
    return new Projection(this.context.store.now.view ?? this.fit, this.width, this.height);
  }

  /** The two frames side by side where branches are compared: cooling left, warming right. */
  get pair(): { left: number; right: number } | null {
    const { compare, frame } = this.context.store.now;
    const other = compare === "split" ? current(this.context).opposite(frame) : null;
    if (other === null) return null;
    const c = current(this.context);
    return c.frameRow(frame)["branch"] === "cooling" ? { left: frame, right: other } : { left: other, right: frame };
  }

  /** The frame that is seen at a place of the map, CSS pixels. */
  frameAt(x: number): Frame | null {
    const { frame, split } = this.context.store.now;
    const pair = this.pair;
    const shown = pair === null ? frame : x < split * this.width ? pair.left : pair.right;
    return currentFrames(this.context).get(shown);
  }

  private resize(): void {
    const field = this.field;
    const width = Math.max(120, this.node.clientWidth);
    const aspect = (field.y1Nm - field.y0Nm) / (field.x1Nm - field.x0Nm);
    const most = Math.max(260, window.innerHeight - 232);
    const height = Math.round(Math.min(width * aspect, most));
    const dots = window.devicePixelRatio || 1;
    if (this.width !== width || this.height !== height || this.canvas.width !== Math.round(width * dots)) {
      [this.width, this.height] = [width, height];
      Object.assign(this.canvas, { width: Math.round(width * dots), height: Math.round(height * dots) });
      this.canvas.style.height = `${height}px`;
    }
    this.draw();
  }

  /** At the next frame of the screen, once whatever asks. */
  redraw(): void {
    if (this.waiting) return;
    this.waiting = true;
    requestAnimationFrame(() => {
      this.waiting = false;
      this.draw();
    });
  }

  private draw(): void {
    const { context } = this;
    const frames = currentFrames(context);
    const s = context.store.now;
    const pair = this.pair;
    const needed = new Set([s.frame, ...(pair === null ? [] : [pair.left, pair.right])]);
    const other = s.compare === "outlines" ? current(context).opposite(s.frame) : null;
    if (other !== null) needed.add(other);
    const missing = [...needed].filter((f) => frames.get(f) === null);
    if (missing.length > 0) {
      void Promise.all(missing.map((f) => frames.load(f))).then(() => this.redraw());
      if (frames.get(s.frame) === null) return; // what was drawn before stays until then
    }
    const p = this.projection;
    const to = this.pen;
    const dots = window.devicePixelRatio || 1;
    to.setTransform(dots, 0, 0, dots, 0, 0);
    to.fillStyle = "#eceae4";
    to.fillRect(0, 0, this.width, this.height);
    const drawn = (frame: number | null): Frame | null => (frame === null ? null : frames.get(frame));
    if (pair === null) this.drawFrame(p, drawn(s.frame), "");
    else {
      const at = s.split * this.width;
      this.inside(0, at, () => this.drawFrame(p, drawn(pair.left), "left-"));
      this.inside(at, this.width, () => this.drawFrame(p, drawn(pair.right), "right-"));
      this.drawSplit(at, pair);
    }
    const beside = drawn(other);
    if (beside !== null) drawWalls(to, p, current(context), null, beside, ACCENT);
    this.drawTools(p);
    this.drawScaleBar(p);
    this.canvas.dataset["frame"] = String(s.frame);
    this.canvas.dataset["drawn"] = String(Number(this.canvas.dataset["drawn"] ?? 0) + 1);
  }

  private inside(from: number, to: number, paint: () => void): void {
    this.pen.save();
    this.pen.beginPath();
    this.pen.rect(from, 0, to - from, this.height);
    this.pen.clip();
    paint();
    this.pen.restore();
  }

  private drawFrame(p: Projection, frame: Frame | null, side: string): void {
    if (frame === null) return;
    const { context, pen } = this;
    const c = current(context);
    const s = context.store.now;
    if (!drawRaster(pen, p, c, frame, s.base, `${side}base`)) {
      const r = frameRect(c, frame.frame);
      this.words(`no ${s.base} in this frame`, p.x((r.x0Nm + r.x1Nm) / 2), p.y((r.y0Nm + r.y1Nm) / 2));
    }
    if (s.over !== "none") {
      pen.globalAlpha = s.mix;
      drawRaster(pen, p, c, frame, s.over, `${side}over`);
      pen.globalAlpha = 1;
    }
    for (const e of c.info.exclusions) if (e.frame === frame.frame) this.drawExclusion(p, frame, e.regionNm);
    const pick = picked(context);
    // under the walls, whose colours it must not hide
    if (pick?.kind === "domain") {
      if (s.pinned === null) this.drawDomain(p, frame, pick.domain);
      else if (drawVeil(pen, p, c, frame, pick.domain, `${side}veil`)) this.drawDomain(p, frame, pick.domain);
      else this.words(`domain ${pick.domain} is not in this frame`, this.width / 2, this.height - 16);
    }
    if (s.walls) {
      if (!this.ranges.has(s.cooldown)) this.ranges.set(s.cooldown, widthRange(c));
      drawWalls(pen, p, c, this.ranges.get(s.cooldown) ?? null, frame);
    }
    if (pick?.kind === "profile" && pick.frame === frame.frame) this.drawProfile(p, frame, pick.wall, pick.profile);
    if (c.drift(frame.frame) === null) this.words("not placed: drawn where the first frame lies", this.width / 2, 18);
  }

  private drawExclusion(p: Projection, frame: Frame, region: readonly number[] | null): void {
    const c = current(this.context);
    const d = c.drift(frame.frame) ?? { xNm: 0, yNm: 0 };
    const whole = frameRect(c, frame.frame);
    const [x0, y0, x1, y1] =
      region === null
        ? [p.x(whole.x0Nm), p.y(whole.y0Nm), p.x(whole.x1Nm), p.y(whole.y1Nm)]
        : [p.x(region[0] + d.xNm), p.y(region[1] + d.yNm), p.x(region[2] + d.xNm), p.y(region[3] + d.yNm)];
    const { pen } = this;
    pen.save();
    pen.beginPath();
    pen.rect(x0, y0, x1 - x0, y1 - y0);
    pen.clip();
    pen.beginPath();
    for (let at = x0 - (y1 - y0); at < x1; at += 9) {
      pen.moveTo(at, y1);
      pen.lineTo(at + (y1 - y0), y0);
    }
    Object.assign(pen, { strokeStyle: STYLE.faint, lineWidth: 1 });
    pen.stroke();
    pen.restore();
    Object.assign(pen, { strokeStyle: DARK, lineWidth: 1 });
    pen.strokeRect(x0, y0, x1 - x0, y1 - y0);
  }

  private drawDomain(p: Projection, frame: Frame, domain: number): void {
    const path = outlineOf(frame, domain);
    if (path === null) return;
    const c = current(this.context);
    const d = c.drift(frame.frame) ?? { xNm: 0, yNm: 0 };
    const { pixelXNm, pixelYNm } = c.info;
    const scaled = new Path2D();
    const k = p.view.nmPerPx;
    scaled.addPath(
      path,
      new DOMMatrix([pixelXNm / k, 0, 0, pixelYNm / k, p.x(d.xNm - pixelXNm / 2), p.y(d.yNm - pixelYNm / 2)]),
    );
    this.pen.lineJoin = "round";
    this.twice(() => this.pen.stroke(scaled), 1.6);
  }

  private drawProfile(p: Projection, frame: Frame, wall: number, profile: number): void {
    const row = current(this.context).profile(frame.frame, wall, profile);
    const w = frame.walls.find((v) => v.wall === wall);
    if (row === null || w === undefined) return;
    const turn = (must(row, "normal_deg") * Math.PI) / 180;
    const d = current(this.context).drift(frame.frame) ?? { xNm: 0, yNm: 0 };
    // Its row has no place where the frame has none: then it lies at its length along the wall.
    const at = w.arcNm.findIndex((a) => a >= must(row, "arc_nm"));
    const k = at < 0 ? w.arcNm.length - 1 : at;
    const x = p.x(num(row, "x_nm") ?? w.points[2 * k] + d.xNm);
    const y = p.y(num(row, "y_nm") ?? w.points[2 * k + 1] + d.yNm);
    const [dx, dy] = [Math.cos(turn), -Math.sin(turn)];
    const { pen } = this;
    this.twice(() => {
      pen.beginPath();
      pen.moveTo(x - 26 * dx, y - 26 * dy);
      pen.lineTo(x + 26 * dx, y + 26 * dy);
      pen.lineTo(x + 20 * dx - 4 * dy, y + 20 * dy + 4 * dx);
      pen.moveTo(x + 26 * dx, y + 26 * dy);
      pen.lineTo(x + 20 * dx + 4 * dy, y + 20 * dy - 4 * dx);
      pen.stroke();
    }, 2);
    pen.beginPath();
    pen.arc(x, y, 4.5, 0, 2 * Math.PI);
    Object.assign(pen, { fillStyle: "#ffffff", strokeStyle: DARK, lineWidth: 2 });
    pen.fill();
    pen.stroke();
  }

  private drawSplit(at: number, pair: { left: number; right: number }): void {
    const { pen } = this;
    this.twice(() => {
      pen.beginPath();
      pen.moveTo(at, 0);
      pen.lineTo(at, this.height);
      pen.stroke();
    }, 1.5);
    const c = current(this.context);
    this.words(frameText(c, pair.left), Math.max(70, at / 2), this.height - 40);
    this.words(frameText(c, pair.right), Math.min(this.width - 70, (at + this.width) / 2), this.height - 40);
  }

  private drawTools(p: Projection): void {
    const { line, region, at, tool } = this.context.store.now;
    const { pen } = this;
    const spot = (q: Point): readonly [number, number] => [p.x(q.xNm), p.y(q.yNm)];
    if (line !== null && tool === "measure") {
      const [[x0, y0], [x1, y1]] = [spot(line[0]), spot(line[1])];
      this.twice(() => {
        pen.beginPath();
        pen.moveTo(x0, y0);
        pen.lineTo(x1, y1);
        pen.stroke();
      }, 1.8);
      for (const [x, y, name] of [
        [x0, y0, "A"],
        [x1, y1, "B"],
      ] as const) {
        pen.beginPath();
        pen.arc(x, y, 8, 0, 2 * Math.PI);
        Object.assign(pen, { fillStyle: "#ffffff", strokeStyle: DARK, lineWidth: 1.5 });
        pen.fill();
        pen.stroke();
        Object.assign(pen, { fillStyle: DARK, font: `600 10px ${STYLE.font}`, textAlign: "center" });
        pen.fillText(name, x, y + 3.5);
      }
    }
    if (region !== null && tool === "mark") {
      // until its second corner is set the rectangle follows the cross
      const [[x0, y0], [x1, y1]] = [spot(region[0]), spot(isPoint(region) ? (at ?? region[1]) : region[1])];
      this.twice(() => pen.strokeRect(Math.min(x0, x1), Math.min(y0, y1), Math.abs(x1 - x0), Math.abs(y1 - y0)), 2);
    }
    if (at !== null && document.activeElement === this.canvas) {
      const [x, y] = spot(at);
      this.twice(() => {
        pen.beginPath();
        for (const [dx, dy] of [
          [1, 0],
          [-1, 0],
          [0, 1],
          [0, -1],
        ]) {
          pen.moveTo(x + 4 * dx, y + 4 * dy);
          pen.lineTo(x + 12 * dx, y + 12 * dy);
        }
        pen.stroke();
      }, 1.5);
    }
  }

  private drawScaleBar(p: Projection): void {
    const { nm, text } = scaleLength(this.width * p.view.nmPerPx * 0.3);
    const long = nm / p.view.nmPerPx;
    const { pen } = this;
    Object.assign(pen, { fillStyle: "#ffffff" });
    pen.fillRect(10, this.height - 30, Math.max(long, 40) + 12, 24);
    pen.fillStyle = DARK;
    pen.fillRect(16, this.height - 12, long, 3);
    Object.assign(pen, { font: `11px ${STYLE.font}`, textAlign: "left" });
    pen.fillText(text, 16, this.height - 16);
    this.canvas.dataset["scaleBarNm"] = String(nm);
    this.canvas.dataset["scaleBarPx"] = String(long);
  }

  /** A stroke in dark, and a lighter one within it. */
  private twice(stroke: () => void, width: number): void {
    Object.assign(this.pen, { strokeStyle: DARK, lineWidth: width + 2.4 });
    stroke();
    Object.assign(this.pen, { strokeStyle: "#ffffff", lineWidth: width });
    stroke();
  }

  private words(text: string, x: number, y: number): void {
    const { pen } = this;
    Object.assign(pen, { font: `12px ${STYLE.font}`, textAlign: "center" });
    const wide = pen.measureText(text).width + 12;
    pen.fillStyle = "rgba(255, 255, 255, 0.88)";
    pen.fillRect(x - wide / 2, y - 14, wide, 20);
    pen.fillStyle = DARK;
    pen.fillText(text, x, y);
  }
}
