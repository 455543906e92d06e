import { readFileSync } from "node:fs";
import path from "node:path";
import { UsageError } from "../model/errors.js";
import { countOf, plainText } from "../model/text.js";
import { reportDocument, type PageParts } from "../report/document.js";
import { packReport } from "../report/pack.js";
import { programVersion } from "./main.js";
import { makeProgress } from "./progress.js";
import { gatherReport } from "./report_data.js";
import { say } from "./say.js";
import { noCooldown, openSelected, type SelectOptions } from "./select.js";
import { writeFile } from "./write_file.js";

export interface ReportCommandOptions extends SelectOptions {
  readonly out: string;
}

/** From here on a file is slow to open and heavy to pass on. */
const HEAVY_BYTES = 20e6;

/** `coldseam report`: one page of what is stored, that opens without the program, its sources or a network. Returns its size in bytes. */
export async function report(o: ReportCommandOptions): Promise<number> {
  if (![".html", ".htm"].includes(path.extname(o.out).toLowerCase()))
    throw new UsageError(`--out ${o.out}: the name must end in .html`, "for example --out report.html");
  const { db, selection } = openSelected(o);
  try {
    const progress = makeProgress("report", 1);
    const data = await gatherReport(db, selection, programVersion(), (done, of) =>
      progress.update("reading the store", done, of),
    ).finally(() => progress.stop());
    if (data.cooldowns.length === 0) throw noCooldown(db, o.db);
    const size = writeFile(o.out, reportDocument(packReport(data), pageParts()));
    const frames = data.cooldowns.reduce((n, c) => n + c.frames.length, 0);
    say(
      `${countOf(data.cooldowns.length, "cooldown")}, ${countOf(frames, "frame")}: written to ${plainText(o.out)} (${(size / 1e6).toFixed(1)} MB)`,
    );
    for (const c of data.cooldowns)
      if (c.frames.every((f) => f.previews.length === 0))
        say(
          `note: ${plainText(c.info.cooldown)}: analysis ${c.info.analysis} was made by a version that kept no images; the page shows its maps and numbers`,
        );
    if (size > HEAVY_BYTES)
      say(
        `note: a large page, slow to open${data.cooldowns.length > 1 ? "; --cooldown ID writes one of a single cooldown" : ""}`,
      );
    return size;
  } finally {
    db.close();
  }
}

function pageParts(): PageParts {
  const read = (name: string): string =>
    readFileSync(new URL(`../report/page/${name}`, import.meta.url), "utf8").trim();
  return { script: read("main.js"), style: read("page.css") };
}
