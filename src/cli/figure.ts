import { plainText } from "../model/text.js";
import path from "node:path";
import {
  ptFromMm,
  styleNamed,
  svgDocument,
  type Figure,
  type FigureOptions,
  type FigureTable,
} from "../figures/index.js";
import { UsageError } from "../model/errors.js";
import { closestWord } from "../model/text.js";
import { formatTable } from "../tables/format.js";
import { FIGURE_KINDS, gatherFigure, type FigureChoice } from "./figure_data.js";
import { pngOf } from "./figure_images.js";
import { say } from "./say.js";
import { openSelected, type SelectOptions } from "./select.js";
import { writeFile } from "./write_file.js";

export interface FigureCommandOptions extends SelectOptions {
  readonly out: string;
  readonly widthMm?: string;
  readonly dpi?: string;
  readonly style?: "paper" | "screen";
  readonly data?: string;
  readonly frame?: readonly string[];
  readonly wall?: string;
  readonly profile?: string;
  readonly stretch?: string;
  readonly channel?: FigureChoice["channel"];
}

/** `coldseam figure`: one figure of what is stored, as SVG or PNG, and its numbers beside it. */
export async function figure(kind: string, o: FigureCommandOptions): Promise<void> {
  if (!FIGURE_KINDS.includes(kind)) {
    const meant = closestWord(kind, FIGURE_KINDS);
    throw new UsageError(
      `no figure "${kind}"${meant === null ? "" : `; did you mean "${meant}"?`}`,
      `the kinds are ${FIGURE_KINDS.join(", ")}`,
    );
  }
  refuseUnused(kind, o);
  const format = path.extname(o.out).toLowerCase();
  if (format !== ".svg" && format !== ".png")
    throw new UsageError(`--out ${o.out}: the name must end in .svg or .png`, "SVG is the better one for papers");
  const widthMm = within("--width-mm", o.widthMm ?? "86", 30, 600);
  const dpi = within("--dpi", o.dpi ?? "300", 50, 2400);
  const options: FigureOptions = { widthPt: ptFromMm(widthMm), style: styleNamed(o.style ?? "paper") };
  const choice: FigureChoice = {
    frames: (o.frame ?? []).map((f) => index("--frame", f)),
    wall: o.wall === undefined ? null : index("--wall", o.wall),
    profile: o.profile === undefined ? null : index("--profile", o.profile),
    stretch: o.stretch === undefined ? null : index("--stretch", o.stretch),
    channel: o.channel ?? "amplitude",
  };
  const { db, selection } = openSelected(o);
  let made: Figure;
  try {
    made = await gatherFigure(kind, db, selection, choice, options);
  } finally {
    db.close();
  }
  writeFile(o.out, [format === ".svg" ? svgDocument(made) : await pngOf(made, dpi)]);
  say(`${plainText(made.title)}: written to ${plainText(o.out)}`);
  for (const note of made.notes) say(`  ${plainText(note)}`);
  if (o.data !== undefined) {
    writeFile(o.data, [csvOf(made.table)]);
    say(`its numbers: ${o.data}`);
  }
}

/** Which options say what a kind shows; given to another kind they would be passed over without a word. */
const CHOOSES: Readonly<Record<string, readonly string[]>> = {
  frames: ["frame", "channel"],
  wall: ["frame", "wall", "profile"],
  fringe: ["frame", "wall", "stretch"],
  orbit: ["frame", "wall", "stretch"],
};

function refuseUnused(kind: string, o: FigureCommandOptions): void {
  const given = { frame: o.frame, wall: o.wall, profile: o.profile, stretch: o.stretch, channel: o.channel };
  const takes = CHOOSES[kind] ?? [];
  for (const [name, value] of Object.entries(given))
    if (value !== undefined && !takes.includes(name))
      throw new UsageError(
        `the figure ${kind} has no --${name}`,
        takes.length === 0
          ? "it shows the whole cooldown; leave it out"
          : `it takes ${takes.map((t) => `--${t}`).join(", ")}`,
      );
}

function within(name: string, text: string, low: number, high: number): number {
  const v = Number(text);
  if (text.trim() === "" || !(v >= low && v <= high))
    throw new UsageError(`${name} ${text}: expected a number from ${low} to ${high}`, "leave it out for the usual one");
  return v;
}

function index(name: string, text: string): number {
  const v = Number(text);
  if (text.trim() === "" || !Number.isInteger(v) || v < 0)
    throw new UsageError(
      `${name} ${text}: expected a whole number from 0`,
      "they are counted from 0, as in the tables",
    );
  return v;
}

function csvOf(table: FigureTable): string {
  const columns = table.columns.map((name) => ({ name, means: "" }));
  const rows = table.rows.map((r) => Object.fromEntries(table.columns.map((c, k) => [c, r[k] ?? null])));
  return [...formatTable({ name: "figure", view: "", row: "", orderBy: [], columns }, rows, "csv")].join("");
}
