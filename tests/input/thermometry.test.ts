import * as fc from "fast-check";
import { afterEach, beforeEach, describe, expect, test } from "vitest";
import { readCooldown } from "../../src/input/index.js";
import { scanTemperature } from "../../src/input/scan_temperature.js";
import { instant, timeZone } from "../../src/input/times.js";
import type { Cooldown } from "../../src/model/cooldown.js";
import { CooldownFolder, problemsOf } from "./folder.js";

describe("temperature of a scan", () => {
  const ramp = (rate: number, from = 0, to = 2000, step = 10) => {
    const timesS = Float64Array.from({ length: (to - from) / step + 1 }, (_, k) => from + k * step);
    return { timesS, kelvin: timesS.map((t) => 170 + rate * t) };
  };

  test("on a straight ramp: the middle, the ramp, its spread, and the lag behind by rate × time constant", () => {
    const scan = scanTemperature(ramp(-0.02), 1003, 1604, 40);
    const middle = 170 - 0.02 * 1303.5;
    expect(scan?.meanK).toBeCloseTo(middle + 0.8, 9); // behind on cooling means warmer
    expect(scan?.lagShiftK).toBeCloseTo(0.8, 9);
    expect(scan?.rampKPerS).toBeCloseTo(-0.02, 12);
    expect(scan?.sdK).toBeCloseTo((0.02 * 601) / Math.sqrt(12), 9); // of a uniform distribution
    expect(scan?.longestGapS).toBe(10);
    expect(scanTemperature(ramp(0.02), 1003, 1604, 40)?.lagShiftK).toBeCloseTo(-0.8, 9);
  });

  test("a step of the sensor: the sample follows as 1 − e^(−t/τ)", () => {
    const log = { timesS: Float64Array.of(0, 100, 100.000001, 1000), kelvin: Float64Array.of(170, 170, 171, 171) };
    const tau = 50;
    const [a, b] = [120, 220];
    const mean = 171 - (tau * (Math.exp(-(a - 100) / tau) - Math.exp(-(b - 100) / tau))) / (b - a);
    expect(scanTemperature(log, a, b, tau)?.meanK).toBeCloseTo(mean, 6); // the step takes 1 µs
  });

  test("outside the log there is none; an instant has a temperature but no spread", () => {
    expect(scanTemperature(ramp(1), -1, 5, 0)).toBeNull();
    expect(scanTemperature(ramp(1), 1990, 2001, 0)).toBeNull();
    expect(scanTemperature(ramp(1), 15, 15, 0)).toMatchObject({ meanK: 185, sdK: 0, rampKPerS: 0, lagShiftK: 0 });
  });

  test("joining two scans end to end gives the mean weighted by time, whatever the log", () => {
    const step = fc.integer({ min: 1, max: 40 });
    const entry = fc.tuple(step, fc.double({ min: 150, max: 190, noNaN: true }));
    fc.assert(
      fc.property(
        fc.array(entry, { minLength: 4, maxLength: 30 }),
        fc.double({ min: 0.01, max: 0.98, noNaN: true }),
        fc.double({ min: 0, max: 100, noNaN: true }),
        (entries, part, lag) => {
          let t = 0;
          const timesS = Float64Array.from(entries.map(([dt]) => (t += dt)));
          const log = { timesS, kelvin: Float64Array.from(entries.map(([, k]) => k)) };
          const [a, c] = [timesS[0], t];
          const b = a + part * (c - a);
          const [one, two, both] = [
            scanTemperature(log, a, b, lag),
            scanTemperature(log, b, c, lag),
            scanTemperature(log, a, c, lag),
          ];
          if (one === null || two === null || both === null) throw new Error("inside the log");
          expect(both.meanK).toBeCloseTo((one.meanK * (b - a) + two.meanK * (c - b)) / (c - a), 7);
          const coldest = Math.min(...log.kelvin) - 1e-9;
          expect(both.meanK).toBeGreaterThanOrEqual(coldest); // the sample is never outside what the sensor saw
          expect(both.meanK).toBeLessThanOrEqual(Math.max(...log.kelvin) + 1e-9);
          expect(both.sdK).toBeLessThanOrEqual((Math.max(...log.kelvin) - coldest) / 2 + 1e-6);
        },
      ),
      { seed: 3, numRuns: 200 },
    );
  });
});

describe("times", () => {
  const paris = timeZone("Europe/Paris");
  test.each([
    ["2024-05-17T09:30:00+02:00", null, "2024-05-17T07:30:00.000Z"],
    ["2024-05-17 09:30:00,25+0200", null, "2024-05-17T07:30:00.250Z"],
    ["2024-05-17T09:30Z", null, "2024-05-17T09:30:00.000Z"],
    ["2024-05-17T09:30:00-05", null, "2024-05-17T14:30:00.000Z"],
    ["2024-05-17T09:30:00", paris, "2024-05-17T07:30:00.000Z"],
    ["2024-01-17T09:30:00", paris, "2024-01-17T08:30:00.000Z"],
    ["2024-05-17T09:30:00", timeZone("-03:30"), "2024-05-17T13:00:00.000Z"],
    ["2024-05-17T09:30:00+00:00", paris, "2024-05-17T09:30:00.000Z"], // its own offset holds
  ])("%s", (text, zone, utc) => {
    const found = instant(text, zone);
    expect("ms" in found ? new Date(found.ms).toISOString() : found.fault).toBe(utc);
  });
  test.each([
    ["2024-05-17T09:30:00", null, "no-zone"],
    ["2024-10-27T02:30:00", paris, "twice"],
    ["2024-03-31T02:30:00", paris, "never"],
    ["17.5.2024 09:30", paris, "no-time"],
    ["2024-13-17T09:30:00Z", null, "no-time"],
  ])("%s: %s", (text, zone, fault) => {
    expect(instant(text, zone)).toEqual({ fault });
  });
  test("no such zone", () => {
    expect([timeZone("Europe/Pris"), timeZone("+25:00"), timeZone("")]).toEqual([null, null, null]);
  });
});

describe("a log in a cooldown", () => {
  let folder: CooldownFolder;
  beforeEach(() => {
    folder = new CooldownFolder();
    folder.stack("a.tif", 3);
  });
  afterEach(() => folder.remove());

  const LOG =
    "# cryostat 2\ntime\tset\tstage\tsample\n" +
    Array.from({ length: 61 }, (_, k) => {
      const time = new Date(Date.UTC(2024, 4, 17, 7, k)).toISOString().replace(".000Z", "Z");
      return `${time}\t0\t1\t${(-93.15 - 0.1 * k).toFixed(3)}`;
    }).join("\n");
  const TABLE =
    "temperature_K,amplitude,started_at,ended_at\n" +
    ",a.tif#0,2024-05-17T07:10:00Z,2024-05-17T07:20:00Z\n" +
    "177,a.tif#1,2024-05-17T09:30:00+02:00,2024-05-17T09:40:00+02:00\n" +
    "170,a.tif#2,,\n";
  const read = (thermometry: string, table = TABLE, log = LOG): Promise<Cooldown> => {
    folder.text("log.tsv", log);
    folder.text("f.csv", table);
    return readCooldown(
      folder.text(
        "cooldown.yaml",
        `sample: S\ncooldown: C\nscan: { pixel_size_nm: [10, 10] }\nthermometry: { log: log.tsv, time: time, temperature: sample, unit: C${thermometry} }\nseries:\n- { branch: cooling, frames: f.csv }\n`,
      ),
    );
  };

  test("gives each frame its temperature, spread, ramp and lag, and is a source; a frame without times keeps its own", async () => {
    const c = await read(", lag_s: 30");
    const [first, second, third] = c.frames;
    expect(first?.temperatureK).toBeCloseTo(180 - 0.1 * 15 + 0.05, 6); // 30 s behind at 0.1 K a minute
    expect(first?.temperatureSdK).toBeCloseTo(1 / Math.sqrt(12), 6);
    expect(first?.rampKPerS).toBeCloseTo(-0.1 / 60, 9);
    expect(first?.lagShiftK).toBeCloseTo(0.05, 6);
    expect(second?.temperatureK).toBeCloseTo(180 - 0.1 * 35 + 0.05, 6);
    expect(third).toMatchObject({ temperatureK: 170 });
    expect(third?.temperatureSdK).toBeUndefined();
    expect(c.notices.map((n) => `${n.frame} ${n.code}: ${n.message}`)).toEqual([
      "null no-scan-times: 1 frame without started_at and ended_at: temperatures as given, not from the log",
    ]);
    expect(c.sources.map((s) => s.path)).toEqual(["cooldown.yaml", "f.csv", "log.tsv", "a.tif"]);
  });

  test("a temperature that differs from the log's, and a scan outside it, are told; without one it is a problem", async () => {
    const table =
      "temperature_K,amplitude,started_at,ended_at\n" +
      "190,a.tif#0,2024-05-17T07:10:00Z,2024-05-17T07:20:00Z\n" +
      "160,a.tif#1,2024-05-17T19:10:00Z,2024-05-17T19:20:00Z\n";
    const c = await read("", table);
    expect(c.frames.map((f) => Number(f.temperatureK.toFixed(3)))).toEqual([178.5, 160]);
    expect(c.notices.map((n) => `${n.frame} ${n.code}: ${n.message}`)).toEqual([
      "0 temperature-differs: 178.5 K by the log, 190 K as given: the log's is used",
      "1 outside-log: the scan from 2024-05-17T19:10:00Z to 2024-05-17T19:20:00Z does not lie inside the log, " +
        "2024-05-17T07:00:00Z to 2024-05-17T08:00:00Z: 160 K as given, not from the log",
    ]);
    expect(await problemsOf(read("", table.replace("160,", ",")))).toEqual([
      expect.stringMatching(/^f\.csv:3: the scan from .* does not lie inside the log, .* \| give temperature_K/),
    ]);
  });

  test("local times: an error that shows the fix, once; right with a zone", async () => {
    const local = TABLE.replaceAll("Z,", ",").replaceAll("Z\n", "\n").replaceAll("+02:00", "");
    expect(await problemsOf(read("", local))).toEqual([
      'f.csv:2: the time "2024-05-17T07:10:00" has no offset from UTC, and the scans must be matched with the log (and 3 times more) | ' +
        'write 2024-05-17T07:10:00+02:00 with your offset, or add to thermometry `time_zone: "+02:00"` or the name of a zone such as Europe/Paris',
    ]);
    const c = await read(
      ', time_zone: "+01:00"',
      TABLE.replace("07:10:00Z,2024-05-17T07:20:00Z", "08:10:00,2024-05-17T08:20:00"),
    );
    expect(c.frames[0]?.temperatureK).toBeCloseTo(178.5, 6);
    expect(await problemsOf(read(", time_zone: Mars/Olympus"))).toEqual([
      expect.stringMatching(/no time zone "Mars\/Olympus" \| write for example/),
    ]);
  });

  describe("stacks with scan times", () => {
    const stack = (more: string, log = true): Promise<Cooldown> => {
      folder.text("log.tsv", LOG);
      return readCooldown(
        folder.text(
          "cooldown.yaml",
          "sample: S\ncooldown: C\nscan: { pixel_size_nm: [10, 10] }\n" +
            (log ? "thermometry: { log: log.tsv, time: time, temperature: sample, unit: C }\n" : "") +
            `series:\n- branch: cooling\n  stacks: { amplitude: a.tif }\n${more}`,
        ),
      );
    };
    const STARTED = "  started_at: [2024-05-17T07:10:00Z, 2024-05-17T07:20:00Z, 2024-05-17T09:30:00+02:00]\n";
    const ENDED = "  ended_at: [2024-05-17T07:20:00Z, 2024-05-17T07:30:00Z, 2024-05-17T09:40:00+02:00]\n";

    test("have their temperatures from the log, and need none of their own", async () => {
      const c = await stack(STARTED + ENDED);
      expect(c.frames.map((f) => Number(f.temperatureK.toFixed(6)))).toEqual([178.5, 177.5, 176.5]);
      expect(c.frames[2]).toMatchObject({
        startedAt: "2024-05-17T09:30:00+02:00",
        endedAt: "2024-05-17T09:40:00+02:00",
      });
      expect(c.frames.every((f) => (f.temperatureSdK ?? 0) > 0.28)).toBe(true);
      expect(c.notices).toEqual([]);
      // beside temperatures of their own the log's are used all the same; without a log the times are only kept
      expect(
        (await stack(`  temperatures_K: [178.5, 177.4, 176.4]\n${STARTED}${ENDED}`)).frames[1]?.temperatureK,
      ).toBeCloseTo(177.5, 9);
      const own = await stack(`  temperatures_K: [180, 170, 160]\n${STARTED}${ENDED}`, false);
      expect(own.frames[1]).toMatchObject({ temperatureK: 170, startedAt: "2024-05-17T07:20:00Z" });
    });

    test.each([
      ["one list alone", STARTED, /:\d+: started_at without ended_at \| give both/],
      [
        "lists of unlike length",
        STARTED + ENDED.replace(", 2024-05-17T07:30:00Z", ""),
        /2 times in ended_at, 3 in started_at/,
      ],
      [
        "not one a temperature",
        `  temperatures_K: [180, 170]\n${STARTED}${ENDED}`,
        /3 times in started_at, 2 in temperatures_K/,
      ],
      [
        "no time",
        STARTED.replace("2024-05-17T07:20:00Z", "noon") + ENDED,
        /started_at\[1\] is "noon"; expected a time as ISO 8601/,
      ],
      ["an end before its beginning", STARTED + ENDED.replace("07:20", "07:02"), /ended_at lies before started_at/],
      [
        "not one a page",
        STARTED.replace(", 2024-05-17T07:20:00Z", "") + ENDED.replace(", 2024-05-17T07:30:00Z", ""),
        /3 pages for 2 scan times \| make started_at and ended_at/,
      ],
      ["neither", "", /stacks without temperatures_K \| .*or `started_at` and `ended_at` to look them up/],
    ])("%s", async (_, more, words) => {
      const found = await problemsOf(stack(more));
      expect(found.join("\n")).toMatch(words);
    });

    test("times without a log do not stand for temperatures, nor beside a table", async () => {
      expect((await problemsOf(stack(STARTED + ENDED, false))).join("\n")).toMatch(/stacks without temperatures_K/);
      folder.text("f.csv", TABLE);
      const yaml =
        "sample: S\ncooldown: C\nscan: { pixel_size_nm: [10, 10] }\nseries:\n- branch: cooling\n  frames: f.csv\n";
      expect((await problemsOf(readCooldown(folder.text("c.yaml", yaml + STARTED)))).join("\n")).toMatch(
        /started_at beside frames: the table holds the times/,
      );
    });
  });

  test.each([
    [
      "no such column",
      LOG.replace("sample", "sampel"),
      /log\.tsv:2: no column "sample"; did you mean "sampel"\? \| the columns are time, set, stage, sampel/,
    ],
    [
      "times that go back",
      LOG.replace("2024-05-17T07:20:00Z", "2024-05-17T06:20:00Z"),
      /log\.tsv:23: "2024-05-17T06:20:00Z" lies before the entry above it/,
    ],
    ["below absolute zero", LOG.replace("-93.250", "-300"), /log\.tsv:4: -300 °C; expected above 0 K/],
    ["no time", LOG.replace("2024-05-17T07:20:00Z", "noon"), /log\.tsv:23: the time is "noon"; expected ISO 8601/],
    ["nothing in it", "time\tsample\n", /0 entries with a number/],
  ])("%s", async (_, log, words) => {
    const found = await problemsOf(read("", TABLE, log));
    expect(found).toHaveLength(1);
    expect(found[0]).toMatch(words);
  });

  test("gaps, lines without a number, a log that begins with the scan", async () => {
    const lines = LOG.split("\n").filter((_, k) => k < 30 || k > 42);
    lines[5] = lines[5]?.replace(/\t[^\t]*$/, "\tn/a") ?? "";
    const c = await read(", lag_s: 300", TABLE, lines.join("\n"));
    expect(c.notices.map((n) => `${n.frame} ${n.code}`)).toEqual(
      expect.arrayContaining(["0 log-starts-late", "1 log-gap", "null log-skipped"]),
    );
  });
});
