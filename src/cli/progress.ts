import cliProgress from "cli-progress";
import { countOf } from "../model/text.js";

export interface Progress {
  update(stage: string, done: number, total: number): void;
  stop(): void;
}

/** A progress bar on standard error; plain lines, one for each tenth, where that is not a terminal. */
export function makeProgress(title: string, frames: number): Progress {
  if (process.stderr.isTTY === true) {
    const bar = new cliProgress.SingleBar({
      format: `${title} [{bar}] {framesDone}/${countOf(frames, "frame")}  {eta_formatted} left  {stage}`,
      stream: process.stderr,
      hideCursor: true,
      clearOnComplete: true,
      etaBuffer: 50,
    });
    let started = false;
    return {
      update(stage, done, total) {
        const payload = { stage, framesDone: Math.floor((done / total) * frames) };
        if (!started) bar.start(total, done, payload);
        else bar.update(done, payload);
        started = true;
      },
      stop: () => bar.stop(),
    };
  }
  let tenth = 0;
  return {
    update(stage, done, total) {
      const now = Math.floor((done / total) * 10 + 1e-9);
      if (now <= tenth) return;
      tenth = now;
      process.stderr.write(`${title}: ${now * 10} % (${stage})\n`);
    },
    stop: () => undefined,
  };
}
