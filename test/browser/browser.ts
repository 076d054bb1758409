/** Real Chromium, as Debian ships it, with a profile of its own for each test file. */
import { existsSync, mkdtempSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import { type BrowserContext, chromium } from "playwright-core";

const EXECUTABLE = process.env.CHROMIUM ?? "/usr/bin/chromium";
const ARGS = [
  "--headless",
  "--no-sandbox",
  "--disable-gpu",
  "--disable-quic",
  "--no-first-run",
  "--disable-background-networking",
  "--disable-component-update",
  "--disable-sync",
];

export async function openBrowser(
  viewport = { width: 1440, height: 1000 },
): Promise<{ context: BrowserContext; close: () => Promise<void> }> {
  if (!existsSync(EXECUTABLE))
    throw new Error(
      `${EXECUTABLE} is missing: install Debian's chromium (npm test does so as root), or name another in CHROMIUM`,
    );
  const profile = mkdtempSync(join(tmpdir(), "spanmark-chromium-"));
  const context = await chromium.launchPersistentContext(profile, { executablePath: EXECUTABLE, args: ARGS, viewport });
  return {
    context,
    async close() {
      await context.close();
      rmSync(profile, { recursive: true, force: true });
    },
  };
}
