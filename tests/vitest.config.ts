import { defineConfig } from "vitest/config";

export default defineConfig({
  test: {
    include: ["tests/**/*.test.ts"],
    globalSetup: ["tests/global_setup.ts"],
    pool: "threads",
    testTimeout: 120_000,
    hookTimeout: 120_000,
  },
});
