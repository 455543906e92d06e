import { spawnSync } from "node:child_process";

/** Runs a shell script where it may mount what it likes: nothing of it is seen outside, and all of it is gone when it ends. */
export function inNamespace(script: string): { code: number | null; out: string; err: string } {
  const own = process.getuid?.() === 0 ? ["--mount"] : ["--mount", "--map-root-user"];
  const r = spawnSync("unshare", [...own, "sh", "-ec", script], { encoding: "utf8" });
  return { code: r.status, out: r.stdout ?? "", err: r.stderr ?? "" };
}

/** Whether this machine lets us: containers and some distributions do not. */
export const MAY_MOUNT = inNamespace("mount -t tmpfs -o size=64k tmpfs /mnt && touch /mnt/x").code === 0;
