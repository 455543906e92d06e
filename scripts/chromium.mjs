// A browser for the tests, the bench and the picture of the report page: Debian's Chromium, with everything off that would ask a network.
import { spawnSync } from "node:child_process";
import { existsSync, mkdtempSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";

const PLACES = ["/usr/bin/chromium", "/usr/bin/chromium-browser", "/usr/bin/google-chrome"];

const ARGUMENTS = [
  "--headless",
  "--no-sandbox",
  "--disable-gpu",
  "--disable-quic",
  "--no-first-run",
  "--disable-background-networking",
  "--disable-component-update",
  "--disable-sync",
];

/** Path of a Chromium: $COLDSEAM_CHROMIUM, an installed one, or one that apt installs where this may be done; else null, with the reason said. */
export function findChromium(install = true) {
  const named = process.env["COLDSEAM_CHROMIUM"];
  if (named !== undefined && named !== "") return existsSync(named) ? named : null;
  const found = () => PLACES.find((p) => existsSync(p)) ?? null;
  if (found() !== null || !install) return found();
  if (process.platform === "linux" && process.getuid?.() === 0 && existsSync("/usr/bin/apt-get")) {
    console.error("coldseam: installing chromium, to look at the report page with (once) …");
    const env = { ...process.env, DEBIAN_FRONTEND: "noninteractive" };
    // without a network this must end soon
    const patience = [
      "-o",
      "Acquire::Retries=0",
      "-o",
      "Acquire::http::Timeout=10",
      "-o",
      "Acquire::https::Timeout=10",
    ];
    const options = { env, stdio: ["ignore", "ignore", 2], timeout: 300_000 };
    const run = (...args) => spawnSync("apt-get", ["-qq", ...patience, ...args], options).status === 0;
    if ((run("update") && run("install", "-y", "--no-install-recommends", "chromium")) || found() !== null)
      return found();
  }
  console.error(
    "coldseam: no Chromium here and none could be installed: the report page is not looked at in a browser",
  );
  return null;
}

/** Opens a browser with a profile of its own that goes when it is closed. The network is off.
 *  @returns { page, close } */
export async function openBrowser(executablePath, { width = 1280, height = 800, ...more } = {}) {
  const { chromium } = await import("playwright-core");
  const profile = mkdtempSync(path.join(tmpdir(), "coldseam-browser-"));
  const context = await chromium.launchPersistentContext(profile, {
    executablePath,
    args: ARGUMENTS,
    offline: true,
    viewport: { width, height },
    ...more,
  });
  const page = context.pages()[0] ?? (await context.newPage());
  const close = async () => {
    await context.close();
    rmSync(profile, { recursive: true, force: true });
  };
  return { context, page, close };
}
