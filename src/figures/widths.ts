import type { Figure, FigureOptions, Place } from "./figure.js";
import { legend, type LegendItem } from "./legend.js";
import { barPath, limitPath, marker, stroke } from "./marks.js";
import { axes, bottomRoom, clipped, leftRoom, type Panel } from "./panel.js";
import { must, num, word, type Cell, type Row } from "./rows.js";
import { extent, linear, niceTicks, tickLabels } from "./scale.js";
import { element, group, label, line, pt } from "./svg.js";

export interface WidthsInput {
  /** Rows of the tables `temperature` and `walls` of one cooldown. */
  readonly frames: readonly Row[];
  readonly walls: readonly Row[];
}

/** Profiles drawn a frame; of more, every second, third … along the walls. */
const MOST_A_FRAME = 150;

/** Wall widths by temperature, a panel a branch: every sound profile, limits as limits, medians with their intervals, the tip. */
export function widthsFigure(input: WidthsInput, o: FigureOptions): Figure {
  const s = o.style;
  const sound = input.walls.filter(
    (r) => word(r, "flag") === "" && (num(r, "width_nm") ?? num(r, "width_upper95_nm")) !== null,
  );
  const withWalls = input.frames.filter((r) => (num(r, "profiles") ?? 0) > 0);
  const branches = ["cooling", "warming"].filter((b) => withWalls.some((r) => word(r, "branch") === b));
  const tip = input.walls.map((r) => num(r, "tip_resolution_nm")).find((v) => v !== null) ?? null;
  const title = tip === null ? "Upper limit of the width (nm)" : "Wall width, 10–90 % (nm)";

  const values = sound.map((r) => num(r, "width_nm") ?? must(r, "width_upper95_nm")).sort((a, b) => a - b);
  const highMedian = extent(withWalls.map((r) => num(r, "wall_width_median_high_nm")))[1];
  const far = values.length === 0 ? 1 : values[Math.floor(0.98 * (values.length - 1))];
  const largest = values[values.length - 1] ?? 1;
  const most = Math.max(largest > 1.6 * far ? 1.15 * far : 1.04 * largest, 1.1 * highMedian, 1.3 * (tip ?? 0));
  const beyond = values.filter((v) => v > most).length;

  const [t0, t1] = extent(
    withWalls.map((r) => must(r, "temperature_K")),
    0.08,
  );
  const yTicks = niceTicks(0, most, 4);
  const yLabels = tickLabels(yTicks);
  const left = leftRoom(yLabels, title, s) + 2;
  const width = o.widthPt - left - 4;
  const key = legend(legendItems(tip, sound, o), left, 2, width, s);
  const height = width * 0.42;
  const parts: string[] = [key.svg];
  const rows: Cell[][] = [];
  const places: Place[] = [];
  let top = key.height + 6;
  let thinned = 1;
  branches.forEach((branch, b) => {
    const panel: Panel = {
      left,
      top,
      width,
      height,
      x: linear(t0, t1, left, left + width),
      y: linear(0, most, top + height, top),
    };
    const own = withWalls.filter((r) => word(r, "branch") === branch);
    const slot = slotWidth(own.map((r) => panel.x(must(r, "temperature_K"))));
    let dots = "";
    let limits = "";
    const medians: string[] = [];
    for (const f of own) {
      const frame = must(f, "frame");
      const x = panel.x(must(f, "temperature_K"));
      const profiles = sound.filter((r) => must(r, "frame") === frame);
      const step = Math.ceil(profiles.length / MOST_A_FRAME);
      thinned = Math.max(thinned, step);
      profiles.forEach((r, k) => {
        const w = num(r, "width_nm");
        const upper = num(r, "width_upper95_nm");
        rows.push([
          "profile",
          branch,
          num(f, "cycle"),
          frame,
          num(f, "temperature_K"),
          num(r, "wall"),
          num(r, "profile"),
          w,
          num(r, "width_sd_nm"),
          upper,
          num(r, "resolved"),
        ]);
        if (k % step !== 0) return;
        const at = x + slot * (spread(k / step) - 0.5);
        const drawn = w ?? upper;
        if (drawn !== null && drawn <= most)
          places.push({
            x: at,
            y: panel.y(drawn),
            keys: { frame, wall: must(r, "wall"), profile: must(r, "profile") },
          });
        if (w !== null) dots += `M${pt(at)} ${pt(panel.y(w))}h0`;
        else if (upper !== null) limits += limitPath(at, panel.y(upper), 3.6, 0.8);
      });
      const median = num(f, "wall_width_median_nm");
      const low = num(f, "wall_width_median_low_nm");
      const high = num(f, "wall_width_median_high_nm");
      rows.push([
        "median",
        branch,
        num(f, "cycle"),
        frame,
        num(f, "temperature_K"),
        null,
        null,
        median,
        low,
        high,
        num(f, "unresolved_share"),
      ]);
      if (median === null) continue;
      const colour = s.series[branch === "cooling" ? 0 : 1];
      if (low !== null && high !== null) {
        // under the bar a wider line of the background keeps it apart from the points
        medians.push(
          element("path", { d: barPath(x, panel.y(low), panel.y(high), 2.2), ...stroke(s.background, 2.4) }),
        );
        medians.push(element("path", { d: barPath(x, panel.y(low), panel.y(high), 2.2), ...stroke(colour, 1.1) }));
      }
      medians.push(
        marker(
          x,
          panel.y(median),
          {
            shape: branch === "cooling" ? "down" : "up",
            size: 4.6,
            fill: branch === "cooling" ? colour : s.background,
            stroke: colour,
            strokeWidth: 1,
          },
          {
            "data-frame": frame,
            "data-branch": branch,
            "data-temperature-k": num(f, "temperature_K"),
            "data-median-nm": median,
            "data-low-nm": low,
            "data-high-nm": high,
          },
        ),
      );
    }
    const cut: string[] = [];
    if (dots !== "")
      cut.push(
        element("path", {
          class: "profiles",
          d: dots,
          ...stroke(s.faint, 1.5, { "stroke-linecap": "round", opacity: 0.75 }),
        }),
      );
    if (limits !== "")
      cut.push(element("path", { class: "limits", d: limits, ...stroke(s.ink, 0.45, { opacity: 0.8 }) }));
    if (tip !== null)
      cut.push(
        line(left, panel.y(tip), left + width, panel.y(tip), {
          class: "tip",
          stroke: s.ink,
          "stroke-width": 0.7,
          "stroke-dasharray": "4 2",
          "data-tip-resolution-nm": tip,
        }),
      );
    const last = b === branches.length - 1;
    parts.push(
      clipped(panel, `widths-${branch}`, ...cut, group({ class: "medians" }, ...medians)),
      axes(
        panel,
        { title: last ? "Temperature (K)" : "", labelled: last },
        { title, ticks: yTicks, labels: yLabels },
        s,
      ),
      label(left + 5, top + height - 5, branch, { size: s.textPt, fill: s.ink, weight: "bold" }),
    );
    top += height + s.textPt + 2;
  });
  if (branches.length === 0)
    parts.push(
      label(o.widthPt / 2, top + 20, "no walls in these frames", { size: s.textPt, fill: s.ink, anchor: "middle" }),
    );
  const cooldown = word(input.frames[0] ?? {}, "cooldown");
  return {
    widthPt: o.widthPt,
    heightPt: branches.length === 0 ? top + 40 : top - s.textPt - 2 + bottomRoom("Temperature (K)", s) + 3,
    style: s,
    title: `Wall widths of ${cooldown}`,
    notes: [
      tip === null
        ? "Without a tip resolution a width is only limited from above; arrows: 95 % limits of single profiles."
        : "Dots: intrinsic widths of single profiles, the tip's blur taken out; arrows: 95 % upper limits where a profile resolves none.",
      "Triangles: medians that treat limits as limits, with 95 % intervals; missing where over half are limits.",
      ...(tip === null ? [] : ["Dashed: tip resolution, full width at half maximum."]),
      ...(thinned > 1
        ? [`Up to ${MOST_A_FRAME} profiles a frame are drawn, evenly along the walls; medians are of all.`]
        : []),
      ...(beyond > 0 ? [`Above the axis: ${beyond} of ${values.length} profiles.`] : []),
    ],
    body: parts.join(""),
    table: {
      columns: [
        "what",
        "branch",
        "cycle",
        "frame",
        "temperature_K",
        "wall",
        "profile",
        "width_nm",
        "width_sd_or_low_nm",
        "upper95_or_high_nm",
        "resolved_or_unresolved_share",
      ],
      rows,
    },
    places,
  };
}

/** Room a frame has for its points: a little less than the gap to the nearest neighbour. */
function slotWidth(xs: readonly number[]): number {
  const sorted = [...xs].sort((a, b) => a - b);
  let gap = 24;
  for (let k = 1; k < sorted.length; k++) if (sorted[k] > sorted[k - 1]) gap = Math.min(gap, sorted[k] - sorted[k - 1]);
  return Math.max(3, 0.7 * gap);
}

/** Van der Corput's sequence in base 2: places that fill [0, 1) evenly whatever their number. */
function spread(k: number): number {
  let v = 0;
  for (let n = k + 1, f = 0.5; n > 0; n >>= 1, f /= 2) v += (n & 1) * f;
  return v;
}

function legendItems(tip: number | null, sound: readonly Row[], o: FigureOptions): LegendItem[] {
  const s = o.style;
  const items: LegendItem[] = [];
  if (sound.some((r) => num(r, "width_nm") !== null))
    items.push({
      text: "profiles",
      sign: (x, y) =>
        element("path", {
          d: `M${pt(x - 2)} ${pt(y - 1)}h0M${pt(x + 2)} ${pt(y + 1)}h0`,
          ...stroke(s.faint, 1.5, { "stroke-linecap": "round" }),
        }),
    });
  if (sound.some((r) => num(r, "width_nm") === null))
    items.push({
      text: "upper limits",
      sign: (x, y) => element("path", { d: limitPath(x, y - 2, 4.2, 1), ...stroke(s.ink, 0.5) }),
    });
  items.push({
    text: "median, 95 %",
    sign: (x, y) =>
      element("path", { d: barPath(x, y - 3.6, y + 3.6, 1.6), ...stroke(s.series[0], 0.9) }) +
      marker(x, y, { shape: "down", size: 4, fill: s.series[0], stroke: s.series[0] }),
  });
  if (tip !== null)
    items.push({
      text: `tip ${Number(tip.toFixed(1))} nm`,
      wide: 14,
      sign: (x, y) => line(x - 7, y, x + 7, y, { stroke: s.ink, "stroke-width": 0.7, "stroke-dasharray": "4 2" }),
    });
  return items;
}
