import Database from "better-sqlite3";
import { appendFileSync, rmSync } from "node:fs";
import path from "node:path";
import { pathToFileURL } from "node:url";
import type { Page } from "playwright-core";
import { afterAll, beforeAll, beforeEach, describe, expect, test } from "vitest";
import { findChromium, openBrowser } from "../../scripts/chromium.mjs";
import { gatherReport } from "../../src/cli/report_data.js";
import { readCooldown } from "../../src/input/index.js";
import { openForReading } from "../../src/store/open.js";
import { coldseam } from "../cli/program.js";
import { HOSTILE, ingestFile, makeReport, type MadeReport } from "./made_report.js";

/* The page as a reader has it: a file opened from disk in a browser whose network is off. */

const chromium = findChromium();

describe.skipIf(chromium === null)("the report in a browser", () => {
  let made: MadeReport;
  let page: Page;
  let close: () => Promise<void>;
  let db: Database.Database;
  const said: string[] = [];
  const asked: string[] = [];

  beforeAll(async () => {
    made = await makeReport();
    db = new Database(made.db, { readonly: true });
    const browser = await openBrowser(chromium as string);
    ({ page, close } = browser);
    page.on("console", (m) => said.push(`${m.type()}: ${m.text()}`));
    page.on("pageerror", (e) => said.push(e.message));
    page.on("request", (r) => asked.push(r.url()));
  });
  afterAll(async () => {
    db.close();
    await close();
    rmSync(made.folder, { recursive: true, force: true });
  });
  beforeEach(async () => {
    await page.setViewportSize({ width: 1280, height: 800 });
    await page.goto(pathToFileURL(made.html).href);
    await page.waitForSelector("html[data-loaded]");
  });

  const frameOf = async (): Promise<number> => Number(await page.locator(".spine").getAttribute("aria-valuenow"));
  const goTo = async (frame: number): Promise<void> => {
    await page.locator(".spine").focus();
    await page.keyboard.press("Home");
    for (let k = 0; k < frame; k++) await page.keyboard.press("ArrowRight");
    await page.waitForFunction((f) => document.querySelector("canvas")?.dataset["frame"] === String(f), frame);
  };
  const row = (sql: string, ...values: (string | number)[]): Record<string, number | string | null> =>
    db.prepare(sql).get(...values) as Record<string, number | string | null>;
  const facts = async (box: string): Promise<Record<string, string>> =>
    page
      .locator(`${box} dl.facts`)
      .first()
      .evaluate((list) => {
        const texts = (tag: string): string[] => [...list.querySelectorAll(tag)].map((n) => n.textContent ?? "");
        const values = texts("dd");
        return Object.fromEntries(texts("dt").map((name, k) => [name, values[k]]));
      });
  /** The picture of the map as text, which changes with any of its pixels. */
  const pixels = async (): Promise<string> =>
    page.locator("canvas").evaluate((c) => (c as HTMLCanvasElement).toDataURL());
  const settle = async (): Promise<void> => {
    await page.evaluate(() => new Promise((r) => requestAnimationFrame(() => requestAnimationFrame(r))));
  };

  test("opens without an error, asks nothing of anybody, and is allowed nothing", async () => {
    expect(said).toEqual([]);
    expect(asked.every((u) => u.startsWith(pathToFileURL(made.html).href) || /^(data|blob):/.test(u))).toBe(true);
    expect(asked.filter((u) => u.startsWith("file:")).length).toBeGreaterThan(0);
    const refused = await page.evaluate(async () => {
      try {
        await fetch("https://example.org/");
        return "";
      } catch (e) {
        return String(e);
      }
    });
    expect(refused).not.toBe("");
    expect(said.splice(0).join("\n")).toMatch(/Content Security Policy/);
  });

  test("a hostile name stays text", async () => {
    expect(await page.locator("h1").textContent()).toBe(`a ${HOSTILE}`);
    expect(await page.locator(".about").textContent()).toContain(`sample S ${HOSTILE}`);
    expect(await page.title()).toContain(HOSTILE);
    expect(await page.evaluate(() => [document.images.length, "hit" in window])).toEqual([0, false]);
    await page.getByText("all loops together").click(); // its name in a drawing, too
    expect(await page.locator(".plot svg").textContent()).toContain("a </script><img");
    expect(await page.evaluate(() => [document.images.length, "hit" in window])).toEqual([0, false]);
  });

  test("going along the loop changes frame, picture and numbers, which are those of the database", async () => {
    const seen = new Set<string>();
    let decided = 0;
    for (let frame = 0; frame < 6; frame++) {
      await goTo(frame);
      await settle();
      seen.add(await pixels());
      const r = row("SELECT * FROM temperature WHERE cooldown = ? AND frame = ?", `a ${HOSTILE}`, frame);
      const [fraction, low, high] = ["", "_low", "_high"].map((k) => r[`metallic_fraction${k}`] as number | null);
      const text = await page.locator("#now").textContent();
      expect(text).toContain(`frame ${frame}, ${r["branch"]}, ${Number((r["temperature_K"] as number).toFixed(2))} K`);
      if (fraction !== null) decided++;
      expect(text).toContain(
        fraction === null
          ? "metallic fraction none: undecided"
          : `${fraction.toFixed(3)} (${low?.toFixed(3)} to ${high?.toFixed(3)})`,
      );
      const shown = await facts('[aria-label="this frame"]');
      const count = (kind: string): string => String(r[`${kind}_domains`] ?? "–");
      expect(shown["domains"]).toBe(`${count("metallic")} metallic, ${count("insulating")} insulating`);
      const median = r["wall_width_median_nm"] as number | null;
      expect(shown["median wall width"]).toContain(median === null ? "none" : median.toFixed(1));
    }
    expect(seen.size).toBe(6);
    expect(decided).toBeGreaterThan(2);
    await page.locator(".spine").focus();
    await page.keyboard.press("ArrowUp"); // frame 5 is warming, 190 K; of the cooling branch 180 K is nearest
    expect(await frameOf()).toBe(0);
  });

  test("pointing at the loop and at the rail leads to the frame that is drawn there", async () => {
    const marker = page.locator('.plot [data-frame="4"]').first();
    const box = await marker.boundingBox();
    if (box === null) throw new Error("frame 4 is not drawn");
    await page.mouse.click(box.x + box.width / 2, box.y + box.height / 2);
    expect(await frameOf()).toBe(4);
    const rail = await page.locator(".rail").boundingBox();
    if (rail === null) throw new Error("no rail");
    await page.mouse.move(rail.x + 12, rail.y + 16);
    await page.mouse.down();
    expect(await frameOf()).toBe(0);
    await page.mouse.move(rail.x + rail.width - 12, rail.y + 16, { steps: 8 });
    await page.mouse.up();
    expect(await frameOf()).toBe(5);
  });

  /** A place of the map in CSS pixels of the window, from nm of the cooldown. */
  const onMap = async (xNm: number, yNm: number): Promise<{ x: number; y: number }> => {
    const box = await page.locator("canvas").boundingBox();
    if (box === null) throw new Error("no map");
    // The reading of two places gives the scale.
    const read = async (dx: number, dy: number): Promise<[number, number]> => {
      await page.mouse.move(box.x + dx, box.y + dy);
      const text = (await page.locator("#place").textContent()) ?? "";
      const found = /x (−?\d+) nm, y (−?\d+) nm/.exec(text);
      if (found === null) throw new Error(text);
      return [found[1], found[2]].map((v) => Number(v.replace("−", "-"))) as [number, number];
    };
    const [x0, y0] = await read(4, 4);
    const [x1, y1] = await read(box.width - 4, box.height - 4);
    return {
      x: box.x + 4 + ((xNm - x0) / (x1 - x0)) * (box.width - 8),
      y: box.y + 4 + ((yNm - y0) / (y1 - y0)) * (box.height - 8),
    };
  };

  test("a wall is reached by pointer, and its numbers are those of its row", async () => {
    await goTo(2);
    const r = row(
      "SELECT * FROM walls WHERE cooldown = ? AND frame = 2 AND flag = '' AND resolved = 1 ORDER BY wall, profile LIMIT 1 OFFSET 2",
      `a ${HOSTILE}`,
    );
    const at = await onMap(r["x_nm"] as number, r["y_nm"] as number);
    await page.mouse.move(at.x, at.y);
    const heading = `Wall ${r["wall"]}, profile ${r["profile"]}`;
    await page.locator("#inspector h2", { hasText: heading }).waitFor();
    const shown = await facts("#inspector");
    const one = (v: unknown): string => (v as number).toFixed(1);
    expect(shown["width, 10–90 %"]).toBe(`${one(r["width_nm"])} ± ${one(r["width_sd_nm"])} nm`);
    expect(shown["upper limit, 95 %"]).toBe(`< ${one(r["width_upper95_nm"])} nm`);
    expect(shown["fit"]).toContain((r["reduced_chi2"] as number).toFixed(2));
    const bins = db
      .prepare(
        "SELECT length(bins) / 12 FROM profile_bins WHERE analysis_id = ? AND frame = 2 AND wall = ? AND profile = ?",
      )
      .pluck()
      .get(r["analysis"], r["wall"], r["profile"]);
    expect(await page.locator("#inspector [data-share]").count()).toBe(bins);
    await page.mouse.click(at.x, at.y);
    await page.mouse.move(at.x + 300, at.y); // kept
    expect(await page.locator("#inspector h2").first().textContent()).toBe(heading);
  });

  test("walls and domains are reached by keyboard", async () => {
    await goTo(2);
    await page.locator("canvas").focus();
    await page.keyboard.press("w");
    await page.locator("#inspector h2", { hasText: "Wall 0, profile 0" }).waitFor();
    await page.keyboard.press("w");
    await page.locator("#inspector h2", { hasText: /Wall \d+, profile/ }).waitFor();
    await page.keyboard.press("d");
    const largest = row(
      "SELECT * FROM domain_frames WHERE cooldown = ? AND frame = 2 ORDER BY area_nm2 DESC LIMIT 1",
      `a ${HOSTILE}`,
    );
    await page.locator("#inspector h2", { hasText: `Domain ${largest["domain"]},` }).waitFor();
    await page.keyboard.press("Escape");
    await page.locator("#inspector h2", { hasText: "In this frame" }).waitFor();
    // without any shortcut, too
    await page.locator(".ways button", { hasText: "domain" }).first().focus();
    await page.keyboard.press("Enter");
    await page.locator("#inspector h2", { hasText: `Domain ${largest["domain"]},` }).waitFor();
  });

  test("a domain is reached by pointer, is outlined, and keeps its outline in its other frames only", async () => {
    await goTo(2);
    const r = row(
      `SELECT d.*, f.area_nm2 AS here FROM domain_frames f JOIN domains d ON d.cooldown = f.cooldown AND d.domain = f.domain
       WHERE f.cooldown = ? AND f.frame = 2 AND d.first_frame < 2 ORDER BY f.area_nm2 DESC LIMIT 1`,
      `a ${HOSTILE}`,
    );
    const plain = await pixels();
    await page.getByRole("button", { name: `domain ${r["domain"]}:` }).click();
    await settle();
    expect(await pixels()).not.toBe(plain);
    const shown = await facts("#inspector");
    expect(shown["here"]).toContain(((r["here"] as number) / 1e6).toFixed(4));
    expect(shown["begins"]).toContain(String(r["origin"]));
    // by pointer, too: the first place of a raster over the map where it is what is pointed at
    const box = await page.locator("canvas").boundingBox();
    if (box === null) throw new Error("no map");
    await page.locator("canvas").focus();
    await page.keyboard.press("Escape");
    const heading = page.locator("#inspector h2", { hasText: `Domain ${r["domain"]},` });
    let found = false;
    for (let k = 1; k < 12 && !found; k++)
      for (let j = 1; j < 12 && !found; j++) {
        const at = [box.x + (box.width * j) / 12, box.y + (box.height * k) / 12] as const;
        await page.mouse.move(...at);
        await settle();
        found = (await heading.count()) === 1;
        if (found) await page.mouse.click(...at);
      }
    expect(found).toBe(true);
    const frames = db
      .prepare("SELECT frame FROM domain_frames WHERE cooldown = ? AND domain = ? ORDER BY frame")
      .pluck()
      .all(`a ${HOSTILE}`, r["domain"]);
    expect(await page.locator(".cursor circle[stroke='#1c1c1c']").count()).toBe(frames.length);
  });

  test("a sign of the width plot and of the domain chart leads back to its place", async () => {
    await goTo(0);
    const chart = page.locator('[aria-label="Wall widths"] .chart');
    await chart.focus();
    await page.keyboard.press("ArrowRight");
    await page.keyboard.press("Enter");
    await page.locator("#inspector h2", { hasText: /Wall \d+, profile \d+/ }).waitFor();
    const heading = (await page.locator("#inspector h2").first().textContent()) ?? "";
    const [, wall, profile] = /Wall (\d+), profile (\d+)/.exec(heading) ?? [];
    const n = db
      .prepare("SELECT count(*) FROM walls WHERE cooldown = ? AND frame = ? AND wall = ? AND profile = ? AND flag = ''")
      .pluck()
      .get(`a ${HOSTILE}`, await frameOf(), wall, profile);
    expect(n).toBe(1);
    await page.locator('[aria-label="Domains along the run"] .chart').focus();
    await page.keyboard.press("ArrowRight");
    await page.keyboard.press("Enter");
    await page.locator("#inspector h2", { hasText: /Domain \d+/ }).waitFor();
    expect(await frameOf()).toBe(0);
  });

  test("both branches stand side by side at one temperature", async () => {
    await goTo(2);
    const one = await pixels();
    await page.getByRole("button", { name: "split" }).click();
    await settle();
    const two = await pixels();
    expect(two).not.toBe(one);
    await page.locator("#split").fill("80");
    await settle();
    expect(await pixels()).not.toBe(two);
    await page.getByRole("button", { name: "walls of both" }).click();
    await settle();
    expect(await pixels()).not.toBe(one);
  });

  test("channels lie over one another, and each changes the picture", async () => {
    await goTo(2);
    const seen = new Set<string>();
    for (const name of ["Amplitude", "Phase", "Topography", "States"]) {
      await page.getByRole("button", { name, exact: true }).click();
      await settle();
      seen.add(await pixels());
    }
    expect(seen.size).toBe(4);
    await page.getByRole("button", { name: "Amplitude", exact: true }).click();
    await page.locator("#over").selectOption("states");
    await settle();
    expect(seen.has(await pixels())).toBe(false);
  });

  test("a distance is that of the two places, the line cut has the stored image's values", async () => {
    await goTo(2);
    await page.getByRole("button", { name: "measure" }).click();
    for (const [k, v] of [100, 100, 400, 500].entries()) {
      await page.locator(".corners input").nth(k).fill(String(v));
      await page.locator(".corners input").nth(k).blur();
    }
    await expect.poll(() => page.locator("#distance strong").textContent()).toBe("500.0 nm");
    await page.locator(".cut svg").waitFor();
    await page.locator(".cut summary").click();
    await page.locator(".cut tbody").waitFor();
    const cells = await page.locator(".cut tbody td:nth-child(2)").allTextContents();
    const { low, high } = row(
      "SELECT low, high FROM preview WHERE analysis_id = 1 AND frame = 2 AND channel = 'amplitude'",
    ) as { low: number; high: number };
    const step = (high - low) / 255;
    expect(cells.length).toBeGreaterThan(50);
    for (const c of cells.filter((v) => v !== "")) {
      const code = (Number(c) - low) / step;
      expect(Math.abs(code - Math.round(code))).toBeLessThan(0.01); // seven digits shown
    }
  });

  test("the bar of the scale is as long as it says", async () => {
    const [nm, px] = await page
      .locator("canvas")
      .evaluate((c) => [Number(c.dataset["scaleBarNm"]), Number(c.dataset["scaleBarPx"])]);
    const a = await onMap(0, 0);
    const b = await onMap(nm, 0);
    expect(b.x - a.x).toBeCloseTo(px, 0);
  });

  test("what was noted, set and read is on the page", async () => {
    const text = (await page.locator(".below").textContent()) ?? "";
    for (const n of db.prepare("SELECT message FROM notice WHERE analysis_id = 1").pluck().all())
      expect(text).toContain(n);
    const sums = db.prepare("SELECT sha256 FROM source WHERE analysis_id = 1").pluck().all() as string[];
    expect(sums.length).toBeGreaterThan(0);
    for (const s of sums) expect(text).toContain(s);
    expect(text).toContain("coldseam 0.0.1");
    expect(text).toContain("nothing here is an instruction to an instrument");
  });

  test("the other cooldown is a choice away, at the temperature that was shown", async () => {
    await goTo(2);
    await page.locator("#cooldown").selectOption({ label: "b plain" });
    expect(await page.locator("h1").textContent()).toBe("b plain");
    expect(await page.locator("#now").textContent()).toContain("frame 1, cooling, 151 K");
  });

  test("without a tip's resolution a frame has its apparent widths", async () => {
    await page.locator("#cooldown").selectOption({ label: "b plain" });
    const frame = row("SELECT frame FROM temperature WHERE cooldown = 'b plain' AND profiles > 2 LIMIT 1")["frame"];
    await goTo(Number(frame));
    const seen = db
      .prepare<[number], number>(
        "SELECT apparent_width_nm FROM walls WHERE cooldown = 'b plain' AND frame = ? AND flag = '' ORDER BY 1",
      )
      .pluck()
      .all(Number(frame));
    const median = (seen[(seen.length - 1) >> 1] + seen[seen.length >> 1]) / 2;
    const shown = await facts("[aria-label='this frame']");
    expect(shown["median wall width"]).toBeUndefined();
    expect(shown["median apparent width"]).toContain(`${median.toFixed(1)} nm (middle half of the profiles`);
    expect(shown["sound profiles"]).toContain("no tip resolution was given");
  });

  test("profiles left out are counted one by one, not by the lines that group them", async () => {
    const count = (where: string): number =>
      Number(row(`SELECT count(*) AS n FROM walls WHERE cooldown = ? AND ${where}`, `a ${HOSTILE}`)["n"]);
    const heads = await page.locator("[aria-label='left out, failed, uncertain'] summary").allTextContents();
    const flagged = count("flag <> ''");
    expect(flagged).toBeGreaterThan(0);
    expect(heads).toContain(`Profiles left out of the statistics: ${flagged}`);
    const limits = count("flag = '' AND width_nm IS NULL");
    if (limits > 0) expect(heads).toContain(`Widths that are upper limits only: ${limits}`);
  });

  test("by keyboard a region takes two Enters, one a corner; the panel says so, and nothing is excluded before", async () => {
    expect(await page.locator("#corrections .hint").textContent()).toMatch(/^Nothing is excluded by hand\./);
    await goTo(1);
    await page.getByRole("button", { name: "mark bad" }).click();
    const panel = page.locator("#inspector");
    expect(await panel.textContent()).toMatch(/Enter sets one corner, a second the other/);
    const leaveOut = page.getByRole("button", { name: "leave out this region" });
    const corners = async (): Promise<string[]> =>
      panel.locator(".corners input").evaluateAll((list) => list.map((n) => (n as HTMLInputElement).value));
    await page.locator("canvas").focus();
    for (let k = 0; k < 3; k++) await page.keyboard.press("Shift+ArrowLeft");
    await page.keyboard.press("Enter");
    const first = await corners();
    expect(first.slice(0, 2).every((v) => v !== "")).toBe(true);
    expect(first.slice(2)).toEqual(["", ""]);
    expect(await leaveOut.isDisabled()).toBe(true);
    expect(await panel.textContent()).toContain("one corner is set; Enter sets the other");
    for (let k = 0; k < 3; k++) await page.keyboard.press("Shift+ArrowRight");
    for (let k = 0; k < 2; k++) await page.keyboard.press("Shift+ArrowDown");
    await page.keyboard.press("Enter");
    const second = await corners();
    expect(second.slice(0, 2)).toEqual(first.slice(0, 2));
    expect(Number(second[2])).toBeGreaterThan(Number(first[0]));
    expect(Number(second[3])).toBeGreaterThan(Number(first[1]));
    expect(await leaveOut.isDisabled()).toBe(false);
  });

  test("on a narrow screen each number of the loops stands on one line", async () => {
    await page.setViewportSize({ width: 390, height: 844 });
    await settle();
    const lines = await page.locator("[aria-label='loops'] td").evaluateAll((cells) =>
      cells.map((c) => {
        const range = document.createRange();
        range.selectNodeContents(c);
        return new Set([...range.getClientRects()].map((r) => Math.round(r.top))).size;
      }),
    );
    expect(lines.length).toBeGreaterThan(4);
    expect(Math.max(...lines)).toBe(1);
    expect(await page.evaluate(() => document.documentElement.scrollWidth)).toBeLessThanOrEqual(390);
  });

  test("marked frames and regions come out as lines that ingest honours and the next page shows", async () => {
    await page.locator("#cooldown").selectOption({ label: "b plain" });
    const reason = `tip "changed": # {here}, \\ ${HOSTILE}`;
    await page.getByRole("button", { name: "mark bad" }).click();
    await page.getByRole("button", { name: "leave out the whole frame" }).click();
    expect(await page.locator("#inspector").textContent()).toContain("Say why first");
    await page.locator("#reason").fill(reason);
    await page.getByRole("button", { name: "leave out the whole frame" }).click();
    const frame = await frameOf();
    await goTo(2);
    // a region by pointer, in nm of its frame
    const drift = row(
      "SELECT drift_x_nm AS x, drift_y_nm AS y FROM temperature WHERE cooldown = 'b plain' AND frame = 2",
    ) as {
      x: number;
      y: number;
    };
    const from = await onMap(drift.x + 50, drift.y + 60);
    const to = await onMap(drift.x + 150, drift.y + 140);
    await page.mouse.move(from.x, from.y);
    await page.mouse.down();
    await page.mouse.move(to.x, to.y, { steps: 5 });
    await page.mouse.up();
    await page.locator("#reason").fill("scratch");
    await page.getByRole("button", { name: "leave out this region" }).click();
    // a domain's state
    const withDomains = row("SELECT frame FROM domain_frames WHERE cooldown = 'b plain' ORDER BY frame LIMIT 1");
    await goTo(withDomains["frame"] as number);
    await page.getByRole("button", { name: "look" }).click();
    await page.locator("canvas").focus();
    await page.keyboard.press("d");
    await page.getByRole("button", { name: "its state is wrong here" }).click();
    expect(await page.locator("#reason").inputValue()).toMatch(/^domain \d+ is not (metallic|insulating): $/);
    await page.getByRole("button", { name: "look" }).click();

    const lines = (await page.locator("#exclude-lines").textContent()) ?? "";
    appendFileSync(made.yaml[1], `\n${lines}`);
    const cooldown = await readCooldown(made.yaml[1]);
    expect(cooldown.frames[frame].excluded).toBe(reason.replace(/\s+/g, " "));
    const [region] = cooldown.frames[2].excludedRegions ?? [];
    expect(region.reason).toBe("scratch");
    const nmPerPx = 3; // the map shows a field of about 400 nm on some 500 px, the reading is whole nm
    for (const [got, meant] of [
      [region.x0Nm, 50],
      [region.y0Nm, 60],
      [region.x1Nm, 150],
      [region.y1Nm, 140],
    ])
      expect(Math.abs(got - meant)).toBeLessThan(nmPerPx);

    await ingestFile(made.yaml[1], made.db, 9);
    const handle = openForReading(made.db);
    const data = await gatherReport(handle, { cooldowns: ["b plain"] }, "0.0.1").finally(() => handle.close());
    expect(
      [...data.cooldowns[0].info.exclusions].sort((a, b) => Number(b.regionNm === null) - Number(a.regionNm === null)),
    ).toEqual([
      { frame, regionNm: null, reason: reason.replace(/\s+/g, " ") },
      { frame: 2, regionNm: [region.x0Nm, region.y0Nm, region.x1Nm, region.y1Nm], reason: "scratch" },
    ]);
    const next = path.join(made.folder, "next.html");
    expect(coldseam("report", "--db", made.db, "--cooldown", "b plain", "--out", next)).toMatchObject({ code: 0 });
    await page.goto(pathToFileURL(next).href);
    await page.waitForSelector("html[data-loaded]");
    const stored = (await page.locator("#corrections li").allTextContents()).join("\n");
    expect(stored).toContain(reason.replace(/\s+/g, " "));
    expect(stored).toContain("scratch");
  });

  test("fits a telephone, where a finger goes along the loop", async () => {
    await page.setViewportSize({ width: 390, height: 844 });
    await settle();
    expect(await page.evaluate(() => document.documentElement.scrollWidth)).toBeLessThanOrEqual(390);
    const slide = page.locator(".thumb-bar input");
    expect(await slide.isVisible()).toBe(true);
    await slide.fill("4");
    expect(await frameOf()).toBe(4);
    const cdp = await page.context().newCDPSession(page);
    await cdp.send("Emulation.setTouchEmulationEnabled", { enabled: true });
    const box = await page.locator("canvas").boundingBox();
    if (box === null) throw new Error("no map");
    const touch = async (type: "touchStart" | "touchMove" | "touchEnd", x?: number): Promise<void> => {
      const touchPoints = x === undefined ? [] : [{ x: box.x + x, y: box.y + 90 }];
      await cdp.send("Input.dispatchTouchEvent", { type, touchPoints });
    };
    await touch("touchStart", 200);
    for (let x = 195; x >= 150; x -= 5) await touch("touchMove", x);
    await touch("touchEnd");
    await expect.poll(frameOf).toBe(1); // 50 px back, a frame every 16 px
    await cdp.send("Emulation.setTouchEmulationEnabled", { enabled: false });
    await cdp.detach();
  });

  test("nothing was said on the console in all of this", () => {
    expect(said).toEqual([]);
  });
});
