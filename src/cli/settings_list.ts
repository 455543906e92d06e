import { listSettings } from "../settings.js";
import { print } from "./say.js";

/** `coldseam settings`: every setting with its default, unit and meaning. */
export function settingsList(o: { format: string }): void {
  const all = listSettings();
  if (o.format === "json") {
    print(`${JSON.stringify(all, null, 2)}\n`);
    return;
  }
  const width = Math.max(...all.map((s) => s.name.length));
  for (const s of all) {
    const value = `${String(s.default)}${s.unit === "" || s.unit === "1" ? "" : ` ${s.unit}`}`;
    const choices = s.choices === undefined ? "" : ` [${s.choices.join(", ")}]`;
    print(`${s.name.padEnd(width)}  ${value.padEnd(12)}  ${s.means}${choices}\n`);
  }
  print(`\nchange one for a run: coldseam ingest COOLDOWN.yaml --db FILE --set ${(all[1] ?? all[0])?.name}=VALUE\n`);
}
