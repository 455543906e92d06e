// Stands in for the worker's module: does its task, but for frame 2 its thread ends or its memory runs out.
export default function run({ input }) {
  if (input.frame === 2 && input.how === "exit") process.exit(3);
  if (input.frame === 2 && input.how === "memory") {
    const kept = [];
    for (;;) kept.push(Array.from({ length: 100_000 }, () => kept.length));
  }
  return { ok: true, value: input.frame };
}
