// `npm run bench [-- PART …] [--long]`: how long the work takes, beside the reference, beside what it could cost at least, and how it
// grows. Goals are printed beside the figures; the bench fails only where a part cannot be run.
import { ensureBuilt, ensureInstalled } from "./install_if_missing.mjs";

ensureInstalled();
ensureBuilt();

const long = process.argv.includes("--long");
const PARTS = {
  256: async () => (await import("./bench/ingest.mjs")).benchIngest(256, 24, 6),
  512: async () => (await import("./bench/ingest.mjs")).benchIngest(512, 80, 50),
  floors: async () => (await import("./bench/floors.mjs")).benchFloors(),
  workers: async () => (await import("./bench/workers.mjs")).benchWorkers(),
  scaling: async () => (await import("./bench/scaling.mjs")).benchScaling(),
  startup: async () => (await import("./bench/startup.mjs")).benchStartup(),
  store: async () => (await import("./bench/store.mjs")).benchStore(long),
  page: async () => (await import("./bench/page.mjs")).benchPage(),
  memory: async () => (await import("./bench/scaling.mjs")).benchMemory(),
};
const asked = process.argv.slice(2).filter((a) => a !== "--long");
const unknown = asked.filter((a) => !(a in PARTS));
if (unknown.length > 0) {
  console.error(
    `bench: the parts are ${Object.keys(PARTS).join(", ")}; --long adds the large database and 2,000 frames`,
  );
  process.exit(2);
}
const parts = asked.length > 0 ? asked : Object.keys(PARTS).filter((p) => long || p !== "memory");
console.log("CPU: user and system seconds of all threads; wall times hold what else the machine does.");
for (const p of parts) await PARTS[p]();
