// The report page in a browser: how large, how soon it is there, how smoothly it goes along the loop.
import { existsSync, statSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { pathToFileURL } from "node:url";
import { findChromium, openBrowser } from "../chromium.mjs";
import { generatedCooldown } from "./data.mjs";
import { atLeast, atMost, printTable, seconds } from "./goals.mjs";

/** The large generated cooldown in a database that is kept between runs; an ingest recognises it there. */
async function database() {
  const yaml = await generatedCooldown(512, 80);
  const db = path.join(tmpdir(), "coldseam-bench", "page.sqlite");
  if (!existsSync(db)) console.error("ingesting it, once: minutes …");
  const { ingest } = await import("../../dist/cli/ingest.js");
  await ingest(yaml, { db });
  return db;
}

/** Opens the page of 80 frames of 512 × 512 as a reader does, and goes through all of them and back. */
export async function benchPage() {
  const chromium = findChromium();
  if (chromium === null) {
    console.log("\nReport page: skipped, no Chromium here");
    return;
  }
  const db = process.env["COLDSEAM_BENCH_DB"] ?? (await database());
  const html = path.join(path.dirname(db), "bench-page.html");
  const { report } = await import("../../dist/cli/report.js");
  const began = performance.now();
  await report({ db, out: html });
  const writtenS = (performance.now() - began) / 1000;
  const { page, close } = await openBrowser(chromium);
  try {
    const opened = performance.now();
    await page.goto(pathToFileURL(html).href);
    await page.waitForSelector("html[data-ready]");
    const openS = (performance.now() - opened) / 1000;
    await page.waitForSelector("html[data-loaded]");
    const loadedS = (performance.now() - opened) / 1000;
    const { frames, perSecond, slowestMs, pictures } = await page.evaluate(alongTheLoop);
    const sizeMB = statSync(html).size / 1e6;
    console.log(`\nReport page: ${frames} frames; drawn and read back, ${pictures} of them different`);
    printTable([
      ["what", "", ""],
      ["size", `${sizeMB.toFixed(1)} MB`, atMost(sizeMB, 20, " MB")],
      ["written in", seconds(writtenS), ""],
      ["first frame and all figures after", seconds(openS), atMost(openS, 2, " s")],
      ["all frames unpacked after", seconds(loadedS), ""],
      ["frames a second along the loop", perSecond.toFixed(0), atLeast(perSecond, 30)],
      ["slowest frame", `${slowestMs.toFixed(0)} ms`, ""],
    ]);
  } finally {
    await close();
  }
}

/** In the page: every frame there and back through the slider's keys, each waited for until it is drawn. */
async function alongTheLoop() {
  const canvas = document.querySelector("canvas");
  const slider = document.querySelector(".spine");
  const press = (key) => slider.dispatchEvent(new KeyboardEvent("keydown", { key, bubbles: true, cancelable: true }));
  press("Home");
  await new Promise((r) => setTimeout(r, 200));
  const last = Number(slider.getAttribute("aria-valuemax"));
  const times = [];
  const seen = new Set();
  const begin = performance.now();
  for (const key of ["ArrowRight", "ArrowLeft"])
    for (let k = 0; k < last; k++) {
      const t = performance.now();
      press(key);
      await new Promise((r) => requestAnimationFrame(r)); // the page draws in this frame, having asked for it first
      const { data } = canvas.getContext("2d").getImageData(canvas.width >> 1, 0, 1, canvas.height); // drawn, not only asked for
      seen.add(data.join(""));
      times.push(performance.now() - t);
    }
  const took = performance.now() - begin;
  return {
    frames: last + 1,
    perSecond: (1000 * times.length) / took,
    slowestMs: Math.max(...times),
    pictures: seen.size,
  };
}
