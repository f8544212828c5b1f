import { defineConfig } from "vitest/config";

export default defineConfig({
  // css: style sheets that are imported as text are otherwise empty
  test: { css: true, include: ["test/**/*.test.ts"], testTimeout: 60_000, hookTimeout: 60_000 },
});
