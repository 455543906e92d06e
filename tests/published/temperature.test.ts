import { expect, test } from "vitest";
import { scanTemperature } from "../../src/input/scan_temperature.js";
import { fixture } from "./fixture.js";

interface Checks {
  mean_over_a_scan: {
    log_time_s: number[];
    log_T_K: number[];
    start_s: number;
    end_s: number;
    time_weighted_mean_K: number;
    plain_mean_of_the_log_entries_inside_K: number;
  };
  lag: { tau_s: number; rate_K_per_s: number; offset_K: number; false_width_K: number };
}
const checks = fixture<Checks>("temperature");

test("the mean over a scan is weighted by time, with interpolated ends: 170.471 K, not the entries' 170.368 K", () => {
  const c = checks.mean_over_a_scan;
  const log = { timesS: Float64Array.from(c.log_time_s), kelvin: Float64Array.from(c.log_T_K) };
  const found = scanTemperature(log, c.start_s, c.end_s, 0);
  expect(Math.abs((found?.meanK ?? NaN) - c.time_weighted_mean_K)).toBeLessThan(1e-9);
  expect(Math.abs((found?.meanK ?? NaN) - c.plain_mean_of_the_log_entries_inside_K)).toBeGreaterThan(0.1);
});

test("a lag of 40 s on ramps of 0.02 K/s moves the two branches 1.6 K apart", () => {
  const { tau_s: tau, rate_K_per_s: rate, offset_K: offset, false_width_K: width } = checks.lag;
  const shift = (r: number): number => {
    const log = { timesS: Float64Array.of(0, 3000), kelvin: Float64Array.of(170, 170 + r * 3000) };
    return scanTemperature(log, 2000, 2600, tau)?.lagShiftK ?? NaN;
  };
  expect(Math.abs(shift(-rate) - offset)).toBeLessThan(1e-9);
  expect(Math.abs(shift(-rate) - shift(rate) - width)).toBeLessThan(1e-9);
});
