// Loaded before a measured program: writes what the process has used when it ends.
const { writeFileSync } = require("node:fs");

process.on("exit", () => {
  const u = process.resourceUsage();
  const use = { cpuS: (u.userCPUTime + u.systemCPUTime) / 1e6, peakMiB: u.maxRSS / 1024 };
  writeFileSync(process.env.COLDSEAM_BENCH_USE, JSON.stringify(use));
});
