import type { FrameInfo, Notice } from "../model/cooldown.js";
import type { PixelSize } from "../model/raster.js";

/** What is odd about the run as described, without being wrong: told at the end, never a reason to stop. */
export function checkOrder(frames: readonly FrameInfo[], pixel: PixelSize, resolutionNm: number | null): Notice[] {
  return [...temperatureNotices(frames), ...repeatedImages(frames), ...pixelNotices(pixel, resolutionNm)];
}

function temperatureNotices(frames: readonly FrameInfo[]): Notice[] {
  const notices: Notice[] = [];
  const notice = (frame: number | null, code: string, message: string): void => {
    notices.push({ frame, code, message });
  };
  const bySeries = new Map<number, FrameInfo[]>();
  for (const f of frames) bySeries.set(f.series, [...(bySeries.get(f.series) ?? []), f]);
  const all = [...bySeries.values()];
  for (const run of all) {
    const branch = run[0].branch;
    const sign = branch === "cooling" ? -1 : 1;
    const steps = run.slice(1).map((f, i) => ({ f, stepK: f.temperatureK - run[i].temperatureK }));
    const contrary = steps.filter((s) => Math.sign(s.stepK) === -sign).length;
    if (contrary > steps.length / 2 && Math.sign(run[run.length - 1].temperatureK - run[0].temperatureK) === -sign) {
      const [did, other] = branch === "cooling" ? ["rise", "warming"] : ["fall", "cooling"];
      const message =
        `the temperatures of this ${branch} series ${did}, from ${round(run[0].temperatureK)} to ${round(run[run.length - 1].temperatureK)} K: ` +
        `write \`branch: ${other}\`, or put the temperatures in the order of the frames; as it stands the loop is taken to run the other way`;
      notice(run[0].frame, "branch-contrary", message);
    }
    for (const { f, stepK } of steps) {
      if (stepK === 0) {
        notice(f.frame, "temperature-repeated", `${f.temperatureK} K again, the temperature of the frame before`);
      } else if (Math.sign(stepK) !== sign && contrary <= steps.length / 2) {
        const before = f.temperatureK - stepK;
        notice(f.frame, "temperature-order", `${f.temperatureK} K after ${before} K in a ${branch} series`);
      }
    }
    const sizes = steps.map((s) => Math.abs(s.stepK));
    const total = sizes.reduce((a, b) => a + b, 0);
    steps.forEach(({ f }, i) => {
      if (sizes.length >= 3 && sizes[i] > total - sizes[i]) {
        notice(
          f.frame,
          "temperature-jump",
          `a step of ${round(sizes[i])} K, more than all others of its series together`,
        );
      }
    });
  }
  all.slice(1).forEach((run, i) => {
    const before = all[i];
    if (run[0].branch === "warming" && before[0].branch === "warming" && run[0].cycle !== before[0].cycle) {
      const message = "a warming series that starts below the end of the warming series before it: a cycle of its own";
      notice(run[0].frame, "warming-without-cooling", message);
    }
  });
  return notices;
}

/** One page under two names is most often a slip of copy and paste. */
function repeatedImages(frames: readonly FrameInfo[]): Notice[] {
  const first = new Map<string, string>();
  const notices: Notice[] = [];
  for (const f of frames) {
    for (const [channel, s] of Object.entries(f.sources)) {
      const key = JSON.stringify([s.file, s.dataset, s.page, s.sample, s.complex]);
      const here = `frame ${f.frame} ${channel}`;
      const before = first.get(key);
      if (before === undefined) first.set(key, here);
      else
        notices.push({
          frame: f.frame,
          code: "same-image",
          message: `${channel} is the same image as ${before} (${s.label})`,
        });
    }
  }
  return notices;
}

function pixelNotices(pixel: PixelSize, resolutionNm: number | null): Notice[] {
  const largest = Math.max(pixel.xNm, pixel.yNm);
  const smallest = Math.min(pixel.xNm, pixel.yNm);
  const size = `${pixel.xNm} × ${pixel.yNm} nm`;
  if (smallest < 0.5 || largest > 2000) {
    const message = `pixels of ${size} are far from what a near-field scan has: is the number in nm?`;
    return [{ frame: null, code: "pixel-size", message }];
  }
  if (resolutionNm !== null && resolutionNm < smallest / 5) {
    const message = `tip.resolution_nm of ${resolutionNm} nm is below a fifth of a pixel of ${size}: is the number in nm?`;
    return [{ frame: null, code: "tip-below-pixel", message }];
  }
  if (resolutionNm !== null && largest > resolutionNm) {
    const message = `pixels of ${size} are coarser than the tip's resolution of ${resolutionNm} nm: widths will have wide limits`;
    return [{ frame: null, code: "pixel-size", message }];
  }
  return [];
}

const round = (x: number): number => Number(x.toPrecision(6));
