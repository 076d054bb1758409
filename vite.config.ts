import { defineConfig } from "vite";

export default defineConfig({
  root: "alerts/watch/page",
  base: "./",
  oxc: { jsx: { runtime: "automatic", importSource: "preact" } },
  build: { outDir: "../../../dist/page", emptyOutDir: true, assetsInlineLimit: 0 },
});
