import { describe, expect, test } from "vitest";
import {
  domainsFigure,
  driftFigure,
  framesFigure,
  fringeFigure,
  loopFigure,
  orbitFigure,
  styleNamed,
  svgDocument,
  wallFigure,
  widthsFigure,
  type Figure,
  type Row,
} from "../../src/figures/index.js";
import {
  drawn,
  elementsWith,
  frame,
  fringeRow,
  LOOP_FRAMES,
  loopRow,
  middleOf,
  normalised,
  profileRow,
} from "./drawing.js";

const o = { widthPt: 243.78, style: styleNamed("paper") };
const n = (e: Record<string, string>, attribute: string): number => Number(e[attribute]);

/** Whether places are the values times one factor plus one offset, to a hundredth of a point and a bit. */
function expectAffine(values: readonly number[], places: readonly number[]): void {
  const low = values.indexOf(Math.min(...values));
  const high = values.indexOf(Math.max(...values));
  const slope = (places[high] - places[low]) / (values[high] - values[low]);
  expect(Math.abs(slope)).toBeGreaterThan(0);
  values.forEach((v, k) => expect(Math.abs(places[low] + slope * (v - values[low]) - places[k])).toBeLessThan(0.03));
}

const WALLS: readonly Row[] = LOOP_FRAMES.filter((r) => r["profiles"] === 3).flatMap((r) => [
  profileRow({ ...pick(r), profile: 0, width_nm: 80 }),
  profileRow({ ...pick(r), profile: 1, width_nm: 92.5 }),
  profileRow({ ...pick(r), profile: 2, width_nm: null, width_sd_nm: null, width_upper95_nm: 40, resolved: 0 }),
  profileRow({ ...pick(r), profile: 3, width_nm: 500, flag: "poor-fit" }),
]);
function pick(r: Row): Row {
  return { frame: r["frame"], branch: r["branch"], temperature_K: r["temperature_K"] };
}

const loops = [loopRow({})];
const PROFILE = {
  row: profileRow({}),
  wNm: 38.5,
  sigmaNm: 12.74,
  bins: Array.from({ length: 21 }, (_, k) => [
    20 * (k - 10),
    0.5 * (1 + Math.tanh((k - 10) / 2)) + 0.01 * (k % 3),
    0.02,
  ]).flat(),
};
const FRINGE = {
  row: fringeRow({}),
  metallicRe: 1.8,
  metallicIm: 1.1,
  bins: Array.from({ length: 30 }, (_, k) => {
    const d = 20 * (k - 8);
    const u = 0.5 * (1 + Math.tanh(d / 40));
    const turn = d > 0 ? 0.2 * Math.cos(d / 40) * Math.exp(-d / 150) : 0;
    const [re, im] = [1 + 0.8 * u, 1.1 * u];
    const [fr, fi] = [re * Math.cos(turn) - im * Math.sin(turn), re * Math.sin(turn) + im * Math.cos(turn)];
    return [d, fr + 0.003 * (k % 2), fi - 0.002 * (k % 3), 0.01, re, im, fr, fi];
  }).flat(),
};
const PAIRS: readonly Row[] = [1, 2, 3, 4, 5, 6, 7, 8, 9].map((k) => ({
  reference: k - 1,
  moving: k,
  x_nm: 12.5 + 0.1 * (k % 3),
  y_nm: -8 - 0.2 * (k % 2),
  sd_x_nm: 0.2,
  sd_y_nm: 0.2,
  used: k === 4 ? 0 : 1,
}));
const DOMAINS: readonly Row[] = [
  {
    cooldown: "kv14-run1",
    domain: 0,
    kind: "metallic",
    origin: "first-frame",
    fate: "vanished",
    largest_area_nm2: 2e6,
  },
  { cooldown: "kv14-run1", domain: 1, kind: "insulating", origin: "nucleated", fate: "merged", largest_area_nm2: 4e5 },
];
const APPEARANCES: readonly Row[] = [
  ...[2e6, 1.6e6, 9e5, 1e5].map((area_nm2, k) => ({
    domain: 0,
    frame: k,
    temperature_K: 170 - 5 * k,
    area_nm2,
    touches_border: k < 2 ? 1 : 0,
  })),
  ...[2e5, 4e5].map((area_nm2, k) => ({
    domain: 1,
    frame: k + 1,
    temperature_K: 160 - 5 * k,
    area_nm2,
    touches_border: 0,
  })),
];
const PIXEL =
  "data:image/png;base64,iVBORw0KGgoAAAANSUhEUgAAAAEAAAABCAYAAAAfFcSJAAAADUlEQVR42mNkYPhfDwAChwGA60e6kgAAAABJRU5ErkJggg==";
const SHEET = {
  frames: LOOP_FRAMES.map((row, k) => ({
    row,
    href: PIXEL,
    imageRows: 1,
    imageCols: 1,
    stepX: 100,
    stepY: 80,
    rows: 80,
    cols: 100,
    walls: k === 2 ? [{ points: [0, 0, 300, 400, 900, 700], closed: false, lengthNm: 1170 }] : [],
  })),
  shown: "amplitude" as const,
  scale: null,
  unit: "",
  pixelXNm: 10,
  pixelYNm: 10,
  total: 12,
};

const ALL: Readonly<Record<string, () => Figure>> = {
  loop: () => loopFigure({ frames: LOOP_FRAMES, loops }, o),
  widths: () => widthsFigure({ frames: LOOP_FRAMES, walls: WALLS }, o),
  wall: () => wallFigure(PROFILE, o),
  fringe: () => fringeFigure(FRINGE, o),
  orbit: () => orbitFigure(FRINGE, o),
  drift: () => driftFigure({ frames: LOOP_FRAMES, pairs: PAIRS }, o),
  domains: () => domainsFigure({ frames: LOOP_FRAMES, domains: DOMAINS, appearances: APPEARANCES }, o),
  frames: () => framesFigure(SHEET, o),
};

describe.each(Object.keys(ALL))("the figure %s", (kind) => {
  test("is what it was", async () => {
    await expect(normalised(ALL[kind]())).toMatchFileSnapshot(`expected/${kind}.svg`);
  });

  test("is well-formed, as wide as asked, with readable text and nothing that is no number", async () => {
    const f = ALL[kind]();
    const svg = svgDocument(f);
    expect(svg).toContain('width="86mm"');
    expect(svg).not.toMatch(/NaN|undefined|Infinity|"null"/);
    for (const e of elementsWith(svg, "font-size")) expect(n(e, "font-size")).toBeGreaterThanOrEqual(6);
    const p = await drawn(f);
    expect(p.width).toBe(244);
    expect(Math.abs(p.height - f.heightPt)).toBeLessThanOrEqual(1);
    for (const r of f.table.rows) expect(r.length).toBe(f.table.columns.length);
    expect(f.table.rows.length).toBeGreaterThan(0);
  });

  test("keeps all its text inside the drawing", () => {
    const f = ALL[kind]();
    for (const e of elementsWith(svgDocument(f), "font-size")) {
      expect(n(e, "x")).toBeGreaterThanOrEqual(0);
      expect(n(e, "x")).toBeLessThanOrEqual(f.widthPt);
      expect(n(e, "y")).toBeLessThanOrEqual(f.heightPt - 1);
    }
  });
});

describe("numbers read back from the drawing equal the rows", () => {
  test("loop: fractions with their intervals, half temperatures with theirs, each at its place", () => {
    const svg = svgDocument(loopFigure({ frames: LOOP_FRAMES, loops }, o));
    const points = elementsWith(svg, "data-fraction");
    expect(
      points
        .map((e) => ["data-frame", "data-temperature-k", "data-fraction", "data-low", "data-high"].map((a) => n(e, a)))
        .sort((a, b) => a[0] - b[0]),
    ).toEqual(
      LOOP_FRAMES.map((r) =>
        ["frame", "temperature_K", "metallic_fraction", "metallic_fraction_low", "metallic_fraction_high"].map(
          (c) => r[c],
        ),
      ),
    );
    const halves = elementsWith(svg, "data-half-k");
    expect(halves.map((e) => [n(e, "data-half-k"), n(e, "data-low-k"), n(e, "data-high-k")])).toEqual([
      [153.25, 152, 154.5],
      [159.5, 158.75, 160.25],
    ]);
    const at = points.map((e) => ({ ...middleOf(e["d"]), branch: e["data-branch"] }));
    expectAffine(
      [...points.map((e) => n(e, "data-temperature-k")), ...halves.map((e) => n(e, "data-half-k"))],
      [...at.map((p) => p.x), ...halves.map((e) => middleOf(e["d"]).x)],
    );
    // the middle of a triangle's height is not its centre, but the same way off for all of one branch
    for (const b of ["cooling", "warming"]) {
      const own = points.filter((e) => e["data-branch"] === b);
      expectAffine(
        own.map((e) => n(e, "data-fraction")),
        own.map((e) => middleOf(e["d"]).y),
      );
    }
  });

  test("loop: a half temperature that was never reached, and undecided frames, are not drawn; the latter are counted", () => {
    const frames = [
      ...LOOP_FRAMES,
      frame({ frame: 10, metallic_fraction: null, metallic_fraction_low: null, metallic_fraction_high: null }),
    ];
    const f = loopFigure({ frames, loops: [loopRow({ warming_half_K: null, width_K: null })] }, o);
    const svg = svgDocument(f);
    expect(elementsWith(svg, "data-half-k").length).toBe(1);
    expect(elementsWith(svg, "data-fraction").length).toBe(10);
    expect(f.notes.join(" ")).toContain("want of a fraction: 1 frame.");
    expect(svg).not.toContain("width 6");
  });

  test("loop: several cooldowns keep apart by shape as well as by colour", () => {
    const other = LOOP_FRAMES.map((r) => ({ ...r, cooldown: "kv14-run2" }));
    const svg = svgDocument(
      loopFigure(
        { frames: [...LOOP_FRAMES, ...other], loops: [...loops, loopRow({ cooldown: "kv14-run2", width_K: 9.5 })] },
        o,
      ),
    );
    const points = elementsWith(svg, "data-fraction");
    const look = (name: string): string[] =>
      [
        ...new Set(
          points
            .filter((e) => e["data-cooldown"] === name)
            .map((e) => `${e["stroke"]} ${e["d"].replace(/-?[\d.]+/g, "")}`),
        ),
      ].sort();
    // triangles up and down are drawn by the same strokes, circles by others
    expect(look("kv14-run1").length).toBe(1);
    expect(look("kv14-run2").length).toBe(1);
    expect(look("kv14-run1").filter((l) => look("kv14-run2").includes(l))).toEqual([]);
    expect(svg).toContain("kv14-run2: width 9.5 K");
  });

  test("loop: however long the names, the signs stand on the line of their words", () => {
    const names = ["kv14-run1", `kv14-${"very-".repeat(12)}long`, `kv15-${"quite-".repeat(8)}long`];
    const frames = names.flatMap((cooldown) => LOOP_FRAMES.map((r) => ({ ...r, cooldown })));
    const svg = svgDocument(loopFigure({ frames, loops: names.map((cooldown) => loopRow({ cooldown })) }, o));
    const key = /<g class="legend">.*?<\/g>/s.exec(svg)?.[0] ?? "";
    const words = Array.from(
      key.matchAll(/<text[^>]* y="([\d.]+)"[^>]*>([^<]*)</g),
      (m) => [Number(m[1]), m[2]] as const,
    );
    // a sign's dash, drawn level
    const signs = elementsWith(key, "d").flatMap((e) => {
      const level = /^M[\d.]+ ([\d.]+)L[\d.]+ \1$/.exec(e["d"]);
      return level === null ? [] : [Number(level[1])];
    });
    const named = words.filter(([, text]) => /^kv1[45]/.test(text));
    expect(named).toHaveLength(3);
    expect(signs).toHaveLength(6);
    for (const [y] of named) expect(signs.filter((sign) => y - sign > 0 && y - sign < 5)).toHaveLength(2);
  });

  test("widths: medians with intervals, a dot a resolved profile, an arrow a limit, none for flagged ones, the tip", () => {
    const svg = svgDocument(widthsFigure({ frames: LOOP_FRAMES, walls: WALLS }, o));
    const medians = elementsWith(svg, "data-median-nm");
    const withWalls = LOOP_FRAMES.filter((r) => r["profiles"] === 3);
    expect(
      medians.map((e) => [n(e, "data-frame"), n(e, "data-median-nm"), n(e, "data-low-nm"), n(e, "data-high-nm")]),
    ).toEqual(
      withWalls.map((r) => [
        r["frame"],
        r["wall_width_median_nm"],
        r["wall_width_median_low_nm"],
        r["wall_width_median_high_nm"],
      ]),
    );
    const paths = (name: string): string =>
      elementsWith(svg, "class")
        .filter((e) => e["class"] === name)
        .map((e) => e["d"])
        .join("");
    expect(paths("profiles").match(/h0/g)?.length).toBe(2 * withWalls.length);
    // roof, stem and two strokes of the head, all downwards from the limit
    expect(paths("limits").match(/v[\d.]+m/g)?.length).toBe(withWalls.length);
    const tip = elementsWith(svg, "data-tip-resolution-nm");
    expect(tip.map((e) => n(e, "data-tip-resolution-nm"))).toEqual([30, 30]);
    // dots of 80 and 92.5 nm and the tip line of 30 nm on one scale
    const dots = Array.from(
      elementsWith(svg, "class")
        .find((e) => e["class"] === "profiles")
        ?.["d"].matchAll(/M[\d.]+ ([\d.]+)h0/g) ?? [],
      (m) => Number(m[1]),
    );
    const tipY = Number(tip[0]["d"].split(/[ L]/)[1]);
    expectAffine([30, 80, 92.5], [tipY, dots[0], dots[1]]);
  });

  test("widths: without a tip there are only limits, and the axis says so", () => {
    const walls = WALLS.map((r) => ({
      ...r,
      width_nm: null,
      width_upper95_nm: 100,
      resolved: 0,
      tip_resolution_nm: null,
    }));
    const frames = LOOP_FRAMES.map((r) => ({
      ...r,
      wall_width_median_nm: null,
      wall_width_median_low_nm: null,
      wall_width_median_high_nm: null,
    }));
    const svg = svgDocument(widthsFigure({ frames, walls }, o));
    expect(svg).toContain("Upper limit of the width (nm)");
    expect(elementsWith(svg, "data-median-nm")).toEqual([]);
    expect(elementsWith(svg, "data-tip-resolution-nm")).toEqual([]);
    expect(svg).not.toContain('class="profiles"');
  });

  test("wall: bins as they are, residuals against the fitted curve, the width as wide as it is", () => {
    const svg = svgDocument(wallFigure(PROFILE, o));
    const points = elementsWith(svg, "data-share");
    expect(points.flatMap((e) => [n(e, "data-distance-nm"), n(e, "data-share"), n(e, "data-sd")])).toEqual(
      PROFILE.bins,
    );
    expectAffine(
      points.map((e) => n(e, "data-share")),
      points.map((e) => middleOf(e["d"]).y),
    );
    const xs = points.map((e) => middleOf(e["d"]).x);
    const perNm = (xs[20] - xs[0]) / 400;
    const width = elementsWith(svg, "data-width-nm")[0];
    const [from, to] = (/M([\d.]+) [\d.]+H([\d.]+)/.exec(width["d"]) ?? []).slice(1).map(Number);
    expect((to - from) / perNm).toBeCloseTo(84.5, 0);
    expect(elementsWith(svg, "data-residual").length).toBe(21);
  });

  test("wall: a limit is written as a limit, and no width is drawn", () => {
    const row = profileRow({ width_nm: null, width_sd_nm: null, width_upper95_nm: 21.5, resolved: 0 });
    const svg = svgDocument(wallFigure({ ...PROFILE, row }, o));
    expect(svg).toContain("width &lt; 21.5 nm (95 %)");
    expect(elementsWith(svg, "data-width-nm")).toEqual([]);
  });

  test("fringe and orbit: phase, null and fit of every bin, the tabled contrast at its tabled place", () => {
    const svg = svgDocument(fringeFigure(FRINGE, o));
    const points = elementsWith(svg, "data-phase-rad");
    expect(points.length).toBe(30);
    points.forEach((e, k) => {
      const [d, re, im, sd, nr, ni, fr, fi] = FRINGE.bins.slice(8 * k, 8 * k + 8);
      expect([n(e, "data-distance-nm"), n(e, "data-sd-rad")]).toEqual([d, sd]);
      expect(n(e, "data-phase-rad")).toBeCloseTo(Math.atan2(im, re), 12);
      expect(n(e, "data-null-rad")).toBeCloseTo(Math.atan2(ni, nr), 12);
      expect(n(e, "data-fit-rad")).toBeCloseTo(Math.atan2(fi, fr), 12);
    });
    const contrast = elementsWith(svg, "data-contrast-rad")[0];
    expect([n(contrast, "data-contrast-rad"), n(contrast, "data-offset-nm")]).toEqual([0.2, 40]);
    expectAffine(
      [...points.map((e) => n(e, "data-distance-nm")), 40],
      [...points.map((e) => middleOf(e["d"]).x), middleOf(contrast["d"]).x],
    );
    const orbit = elementsWith(svgDocument(orbitFigure(FRINGE, o)), "data-re");
    expect(orbit.flatMap((e) => [n(e, "data-re"), n(e, "data-im")])).toEqual(
      Array.from({ length: 30 }, (_, k) => [FRINGE.bins[8 * k + 1], FRINGE.bins[8 * k + 2]]).flat(),
    );
    // one unit is as long up as it is across
    const at = orbit.map((e) => middleOf(e["d"]));
    const long = (values: readonly number[], places: readonly number[]): number =>
      (Math.max(...places) - Math.min(...places)) / (Math.max(...values) - Math.min(...values));
    const across = long(
      orbit.map((e) => n(e, "data-re")),
      at.map((p) => p.x),
    );
    expect(
      long(
        orbit.map((e) => n(e, "data-im")),
        at.map((p) => p.y),
      ) / across,
    ).toBeCloseTo(1, 2);
  });

  test("fringe: a phase beyond π does not tear null and fit from the data; one not detected is dotted and has no mark", () => {
    const turned = [...FRINGE.bins];
    for (let k = 0; k < 30; k++) {
      for (const j of [1, 4, 6]) {
        const [re, im] = [turned[8 * k + j], turned[8 * k + j + 1]];
        const c = Math.cos(2.9);
        const s = Math.sin(2.9);
        turned[8 * k + j] = re * c - im * s;
        turned[8 * k + j + 1] = re * s + im * c;
      }
    }
    const svg = svgDocument(
      fringeFigure({ ...FRINGE, bins: turned, row: fringeRow({ detected: 0, adjusted_p: 0.4 }) }, o),
    );
    for (const e of elementsWith(svg, "data-phase-rad")) {
      expect(Math.abs(n(e, "data-phase-rad") - n(e, "data-null-rad"))).toBeLessThan(0.4);
      expect(Math.abs(n(e, "data-phase-rad") - n(e, "data-fit-rad"))).toBeLessThan(0.4);
    }
    expect(elementsWith(svg, "data-contrast-rad")).toEqual([]);
    expect(svg).toContain("no fringe: adjusted p 0.40");
  });

  test("drift: places in the table, residual of a pair its shift minus that of the places", () => {
    const f = driftFigure({ frames: LOOP_FRAMES, pairs: PAIRS }, o);
    const places = elementsWith(svgDocument(f), "data-x-nm");
    expect(places.map((e) => [n(e, "data-x-nm"), n(e, "data-y-nm"), n(e, "data-sd-nm")])).toEqual(
      LOOP_FRAMES.map((r) => [r["drift_x_nm"], r["drift_y_nm"], r["drift_sd_nm"]]),
    );
    const pairs = f.table.rows.filter((r) => r[0] === "pair");
    pairs.forEach((r, k) => {
      expect(r[4]).toBeCloseTo(0.1 * ((k + 1) % 3), 9);
      expect(r[5]).toBeCloseTo(-0.2 * ((k + 1) % 2), 9);
    });
    expect(f.notes.join(" ")).toContain("Crosses");
    const lost = LOOP_FRAMES.map((r, k) =>
      k === 3 ? { ...r, drift_x_nm: null, drift_y_nm: null, drift_sd_nm: null } : r,
    );
    const without = driftFigure({ frames: lost, pairs: PAIRS }, o);
    expect(without.notes.join(" ")).toContain("Not placed: 1 frame.");
    expect(without.table.rows.filter((r) => r[0] === "pair").length).toBe(7);
  });

  test("domains: areas of every appearance, births and ends by their signs", () => {
    const svg = svgDocument(domainsFigure({ frames: LOOP_FRAMES, domains: DOMAINS, appearances: APPEARANCES }, o));
    const areas = elementsWith(svg, "data-area-nm2");
    expect(areas.map((e) => [n(e, "data-domain"), n(e, "data-frame"), n(e, "data-area-nm2")])).toEqual(
      APPEARANCES.map((r) => [r["domain"], r["frame"], r["area_nm2"]]),
    );
    expect(elementsWith(svg, "data-origin").map((e) => e["data-origin"])).toEqual(["nucleated"]);
    expect(elementsWith(svg, "data-fate").map((e) => e["data-fate"])).toEqual(["vanished", "merged"]);
    const own = areas.filter((e) => e["data-kind"] === "metallic");
    expectAffine(
      own.map((e) => Math.log(n(e, "data-area-nm2"))),
      own.map((e) => middleOf(e["d"]).y),
    );
  });

  test("frames: a wall lies where its pixels are, whatever the drift; what is shown of the whole is said", () => {
    const f = framesFigure(SHEET, o);
    const svg = svgDocument(f);
    expect(elementsWith(svg, "data-temperature-k").map((e) => n(e, "data-temperature-k"))).toEqual(
      LOOP_FRAMES.map((r) => r["temperature_K"]),
    );
    expect(f.notes.join(" ")).toContain("10 of 12 frames are shown");
    const image = elementsWith(svg, "preserveAspectRatio")[2];
    const perNm = n(image, "width") / 1000;
    const wall = elementsWith(svg, "class").find((e) => e["class"] === "walls")?.["d"] ?? "";
    const points = Array.from(wall.matchAll(/[ML]([-\d.]+) ([-\d.]+)/g), (m) => [Number(m[1]), Number(m[2])]);
    // point (300, 400) nm is the centre of column 30, row 40: half a pixel from its edge
    expect(points[1][0]).toBeCloseTo(n(image, "x") + 305 * perNm, 1);
    expect(points[1][1]).toBeCloseTo(n(image, "y") + 405 * perNm, 1);
  });
});

test("hostile names stay text in every figure", async () => {
  const name = `<script>alert("1")</script>&\u001b[2J\u202e]]>'"`;
  const named = (rows: readonly Row[]): Row[] => rows.map((r) => ({ ...r, cooldown: name }));
  const made = [
    loopFigure({ frames: [...named(LOOP_FRAMES), ...LOOP_FRAMES], loops: named(loops) }, o),
    widthsFigure({ frames: named(LOOP_FRAMES), walls: named(WALLS) }, o),
    wallFigure({ ...PROFILE, row: { ...PROFILE.row, cooldown: name, flag: name } }, o),
    fringeFigure({ ...FRINGE, row: { ...FRINGE.row, cooldown: name } }, o),
    orbitFigure({ ...FRINGE, row: { ...FRINGE.row, cooldown: name } }, o),
    driftFigure({ frames: named(LOOP_FRAMES), pairs: PAIRS }, o),
    domainsFigure({ frames: named(LOOP_FRAMES), domains: named(DOMAINS), appearances: APPEARANCES }, o),
    framesFigure(
      { ...SHEET, unit: name, frames: SHEET.frames.map((p) => ({ ...p, row: { ...p.row, cooldown: name } })) },
      o,
    ),
  ];
  for (const f of made) {
    const svg = svgDocument(f);
    expect(svg).not.toMatch(/<script/);
    expect(svg).not.toContain("\u001b");
    expect((await drawn(f)).width).toBe(244);
  }
});
