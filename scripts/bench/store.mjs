// Questions to a large database: how long they take, and with how much memory.
import { rmSync, statSync } from "node:fs";
import Database from "better-sqlite3";
import { atMost, printTable, seconds } from "./goals.mjs";
import { largeDatabase } from "./large_database.mjs";
import { leastOf, timedNode } from "./run_child.mjs";
import { program } from "./startup.mjs";

export async function benchStore(long) {
  const [cooldowns, frames, profiles] = long ? [200, 80, 1250] : [200, 50, 20];
  const file = await largeDatabase(cooldowns, frames, profiles);
  const rows = cooldowns * frames * profiles;
  const ask = (times, ...args) => leastOf(times, () => timedNode([program, ...args, "--db", file]));
  const help = leastOf(5, () => timedNode([program, "--help"]));
  const one = ["--cooldown", "years-0123"];
  const twenty = Array.from({ length: 20 }, (_, k) => `years-${String(100 + k).padStart(4, "0")}`);
  const runs = [
    ["--help", help, ""],
    ["cooldowns", ask(3, "cooldowns"), 3],
    ["loops of all cooldowns", ask(3, "loops"), 3],
    ["loops of one", ask(3, "loops", ...one), 3],
    ["export walls of one", ask(3, "export", "walls", ...one), ""],
    ["export walls of twenty", ask(1, "export", "walls", "--cooldown", ...twenty), ""],
    ["export temperature of all", ask(3, "export", "temperature"), ""],
    ["export walls of all", ask(1, "export", "walls"), ""],
  ];
  console.log(
    `\nStore: ${cooldowns} cooldowns, ${cooldowns * frames} frames, ${rows.toLocaleString("en")} profiles, ${(statSync(file).size / 1e6).toFixed(0)} MB`,
  );
  printTable([
    ["question", "wall", "CPU", "times --help, CPU", "MiB", ""],
    ...runs.map(([what, r, goal]) => {
      const times = r.cpuS / help.cpuS;
      return [
        what,
        seconds(r.wallS),
        seconds(r.cpuS),
        times.toFixed(1),
        r.peakMiB.toFixed(0),
        goal === "" ? "" : atMost(times, goal),
      ];
    }),
  ]);
  const all = runs.at(-1)[1];
  const twentyRun = runs.at(-3)[1];
  // A heap grows to some size of its own before it is cleared: what tells is that it does not grow with the rows.
  console.log(
    `  export of all: ${(rows / all.cpuS / 1000).toFixed(0)} thousand rows a CPU second; its memory ${all.peakMiB.toFixed(0)} MiB ${atMost(Math.round(all.peakMiB), 200, " MiB")}, ${(all.peakMiB / twentyRun.peakMiB).toFixed(2)} of that of twenty cooldowns`,
  );
  const db = new Database(file, { readonly: true });
  const size = db.prepare("SELECT sum(pgsize) AS bytes FROM dbstat WHERE name = ?");
  console.log(
    `  a profile takes ${(size.get("profile").bytes / rows).toFixed(0)} bytes; a frame ${(size.get("frame").bytes / (cooldowns * frames)).toFixed(0)}`,
  );
  db.close();
  if (long) for (const end of ["", "-wal", "-shm"]) rmSync(file + end, { force: true });
}
