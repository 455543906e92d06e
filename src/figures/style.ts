/** How a figure looks. Lengths in points (1/72 inch). */
export interface Style {
  readonly name: "paper" | "screen";
  readonly background: string;
  readonly ink: string;
  /** Second-rank ink: grid, notes, errors of single points. */
  readonly faint: string;
  readonly font: string;
  /** Axis titles; ticks and legends. */
  readonly titlePt: number;
  readonly textPt: number;
  readonly linePt: number;
  /** The two states: far apart in lightness, so that they part in grey print and for every kind of colour sight. */
  readonly insulating: string;
  readonly metallic: string;
  /** Cooldowns laid over one another, by colour and by shape. The first is also the colour of single tracks. */
  readonly series: readonly string[];
  /** Walls drawn on images, and the line under them that keeps them visible on both states. */
  readonly wall: string;
  readonly wallUnder: string;
}

/** Fonts that one of every usual system has; text stays text. */
const FONT = "Helvetica, Arial, 'Liberation Sans', 'DejaVu Sans', sans-serif";

const PAPER: Style = {
  name: "paper",
  background: "#ffffff",
  ink: "#1c1c1c",
  faint: "#8a8a86",
  font: FONT,
  titlePt: 7.5,
  textPt: 6.5,
  linePt: 0.6,
  insulating: "#39305f",
  metallic: "#d99a2b",
  series: ["#1d4f57", "#c26a2e", "#7a4a8c", "#5f8f2f", "#a83e5c", "#7d7d78"],
  wall: "#ffffff",
  wallUnder: "#1c1c1c",
};

const SCREEN: Style = {
  ...PAPER,
  name: "screen",
  background: "#16191b",
  ink: "#ecebe6",
  faint: "#8f938f",
  titlePt: 8.5,
  textPt: 7.5,
  linePt: 0.8,
  insulating: "#7d70c4",
  metallic: "#f2c25c",
  series: ["#4b9da0", "#f5b27c", "#c398d6", "#a4cf74", "#f08aa6", "#b9b9b2"],
};

export const styleNamed = (name: "paper" | "screen"): Style => (name === "paper" ? PAPER : SCREEN);
