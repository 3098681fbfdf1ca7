import { defineConfig } from "vitest/config";

export default defineConfig({
  test: {
    include: ["test/soak/**/*.test.ts"],
    setupFiles: ["test/setup/quiet.ts"],
    testTimeout: 3_600_000,
    maxWorkers: 1,
  },
});
