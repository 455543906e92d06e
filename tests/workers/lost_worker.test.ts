import { spawnSync } from "node:child_process";
import { writeFileSync } from "node:fs";
import path from "node:path";
import { fileURLToPath } from "node:url";
import { afterEach, expect, test } from "vitest";
import { InputError } from "../../src/model/errors.js";
import { settingsWith } from "../../src/settings.js";
import { makeRunner, type Runner } from "../../src/workers/pool.js";
import { makeScratch, removeScratch } from "../../src/workers/scratch.js";
import type { TaskInput } from "../../src/workers/tasks.js";

const here = path.dirname(fileURLToPath(import.meta.url));
const scratch = makeScratch();
let runner: Runner | null = null;
afterEach(async () => {
  await runner?.close();
  removeScratch(scratch);
});

const input = (frame: number): TaskInput<"levels"> => ({
  scratch,
  settings: settingsWith(),
  frame,
  drift: { frame, xNm: null, yNm: null, sdNm: null },
  tip: null,
});

async function failure(run: Promise<unknown>): Promise<Error> {
  const e: unknown = await run.then(
    () => null,
    (reason: unknown) => reason,
  );
  if (!(e instanceof Error)) throw new Error("the run did not fail");
  return e;
}

test("a thread that ends under its task: the frame is named, the run rejects, and closing it is clean", async () => {
  runner = makeRunner(2, { file: path.join(here, "exiting_worker.mjs") });
  const inputs = [0, 1, 2, 3].map((frame) => ({ ...input(frame), how: "exit" }));
  const e = await failure(runner.map("levels", inputs));
  expect(e).toBeInstanceOf(InputError);
  expect((e as InputError).problems[0]).toMatchObject({ at: "frame 2" });
  expect(e.message).toMatch(/worker thread ended while finding the levels of it \(worker exited with code: 3\)/);
  // The pool has put a new thread in its place.
  expect(await runner.map("levels", [input(5)])).toEqual([5]);
});

test("a thread that runs out of memory ends alone; its frame is named", () => {
  const r = spawnSync(process.execPath, ["--max-old-space-size=40", path.join(here, "memory_run.mjs")], {
    encoding: "utf8",
  });
  expect(r.status, r.stderr).toBe(0);
  expect(r.stdout).toMatch(/^InputError: frame 2: its worker thread ended while finding the levels of it \(.*memory/);
});

test.each([0, 1])("an error inside a task names its frame, with %i threads", async (threads) => {
  const dir = makeScratch();
  try {
    writeFileSync(path.join(dir, "clean-3"), "these are no kept values");
    runner = makeRunner(threads);
    const e = await failure(runner.map("levels", [{ ...input(3), scratch: dir }]));
    expect(e).not.toBeInstanceOf(InputError);
    expect(e.message).toMatch(/^finding the levels of frame 3: ./);
  } finally {
    removeScratch(dir);
  }
});
