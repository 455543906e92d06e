export { closeImages } from "./image_file.js";
export { loadFrame } from "./load_frame.js";
export { readCooldown, surveyCooldown, type ReadOptions, type Survey } from "./read_cooldown.js";
export { describeCooldown } from "./describe_cooldown.js";
export { sizeProblems } from "./least_size.js";
export { frameDigest, imagesDigest } from "./frame_digest.js";
export { inspectFrame } from "./inspect_frame.js";
export { hashFile } from "./source_files.js";
export { draftCooldown } from "./draft.js";
