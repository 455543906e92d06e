import { spawn, spawnSync } from "node:child_process";
import path from "node:path";
import { fileURLToPath } from "node:url";

export const TOP = path.dirname(path.dirname(path.dirname(fileURLToPath(import.meta.url))));
const ENTRY = path.join(TOP, "scripts/coldseam.mjs");

export interface Ended {
  readonly code: number | null;
  readonly out: string;
  readonly err: string;
}

/** Runs the program as a user does, in a process of its own. Commands that it prints are written as if it were installed. */
export const coldseam = (...args: string[]): Ended => runAs({}, args);

/** A user who has to keep to the rights of files, as root does not. */
const OTHER = process.getuid?.() === 0 ? { uid: 65534, gid: 65534 } : {};

/** As `coldseam`, run by a user who has to keep to the rights of files. */
export const asOther = (...args: string[]): Ended => runAs(OTHER, args);

/** Whether this machine knows such rights, and such a user may read the program. */
export const MAY_BE_OTHER = process.getuid !== undefined && asOther("--version").code === 0;

function runAs(user: { readonly uid?: number; readonly gid?: number }, args: readonly string[]): Ended {
  const r = spawnSync(process.execPath, [ENTRY, ...args], { encoding: "utf8", cwd: TOP, maxBuffer: 1 << 28, ...user });
  const installed = (text: string): string => text.replaceAll("node scripts/coldseam.mjs ", "coldseam ");
  return { code: r.status, out: installed(r.stdout ?? ""), err: installed(r.stderr ?? "") };
}

/** Starts the program and sends it a signal once `when` has been seen on its standard error. */
export function coldseamInterrupted(signal: NodeJS.Signals, when: RegExp, ...args: string[]): Promise<Ended> {
  return new Promise((resolve) => {
    const child = spawn(process.execPath, [ENTRY, ...args], { cwd: TOP });
    let out = "";
    let err = "";
    let sent = false;
    child.stdout.on("data", (d: Buffer) => (out += d.toString()));
    child.stderr.on("data", (d: Buffer) => {
      err += d.toString();
      if (!sent && when.test(err)) sent = child.kill(signal);
    });
    child.on("close", (code) => resolve({ code, out, err }));
  });
}
