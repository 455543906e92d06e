import { spawnSync } from "node:child_process";
import { expect, test } from "vitest";

// Source: SciPy and scikit-image themselves, on random input of this seed; `npm run compare` draws another one each day.
test("registration, contours, labels, fits, functions and blurs agree with SciPy and scikit-image", (context) => {
  const r = spawnSync(process.execPath, ["scripts/compare_scipy.mjs", "--seed", "7"], {
    encoding: "utf8",
    env: { ...process.env, COLDSEAM_NO_BUILD: "1" },
  });
  if (r.stdout.startsWith("skipped")) context.skip(r.stdout.trim());
  expect(r.stdout).toMatch(/^ok .*masked blur: weights/m);
  expect(r.stdout.split("\n").filter((l) => l.startsWith("OFF"))).toEqual([]);
  expect(r.stdout + r.stderr).toMatch(/all \d+ within what is allowed/);
  expect(r.status).toBe(0);
});
