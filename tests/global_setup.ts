import { execFileSync } from "node:child_process";
import { existsSync } from "node:fs";

/** Worker threads run JavaScript only, and the command-line tests run the program as users do: build once, before any test. */
export default function setup(): void {
  if (process.env["COLDSEAM_NO_BUILD"] === "1" && existsSync("dist")) return;
  execFileSync(process.execPath, ["scripts/build.mjs"], { stdio: "inherit" });
}
