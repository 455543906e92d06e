// Keeps what it can in the folder given, on a disk with room for two of four results; prints what was said and what came out.
import { readdirSync } from "node:fs";
import { cached, takeTrouble } from "../../dist/workers/cached.js";

const cache = { folder: process.argv[2], code: "this", write: true, rasters: true };
const results = async (made) => {
  const found = [];
  for (const k of [1, 2, 3, 4])
    found.push(await cached(cache, "map", k, () => ({ made, bytes: Buffer.alloc(25_000, k) })));
  return found;
};
const first = await results("first");
const trouble = takeTrouble({ cache });
const names = readdirSync(cache.folder).map((f) => f.split("-")[0]);
const second = await results("second");
console.log(
  JSON.stringify({
    right: [first, second].every((r) => r.every((v, k) => v.bytes.every((b) => b === k + 1))),
    trouble,
    names,
    second: second.map((v) => v.made),
  }),
);
