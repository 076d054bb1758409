/**
 * Takes the pictures that README shows, from the running program: `npm run pictures`. Starts the demo, waits for its first settled fault, and draws what an
 * operator sees then.
 */
import { mkdtempSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import { fileURLToPath } from "node:url";
import { run } from "../end-to-end/processes.ts";
import { openBrowser } from "./browser.ts";

const folder = mkdtempSync(join(tmpdir(), "spanmark-pictures-"));
const picture = (name: string) => fileURLToPath(new URL(`./pictures/${name}.png`, import.meta.url));
const demo = run("watch", "--demo", "--port", "0", "--data", folder);
const browser = await openBrowser({ width: 1280, height: 900 });
try {
  const url = await demo.until((line) => /Watch page: (\S+)/.exec(line)?.[1], "the page's address");
  await demo.until((line) => (line.startsWith("Settled") ? line : undefined), "a settled fault");
  const page = await browser.context.newPage();
  await page.goto(url);
  await page.getByRole("button", { name: /^Open/ }).first().waitFor();
  await page.locator(".end").first().getByText("sees").waitFor();
  await page.screenshot({ path: picture("overview"), clip: { x: 0, y: 0, width: 1280, height: 900 } });
  await page.getByRole("button", { name: /^Open/ }).first().click();
  await page.locator("article.incident").screenshot({ path: picture("incident") });
} finally {
  await browser.close();
  demo.child.kill("SIGINT");
  await demo.ended;
  rmSync(folder, { recursive: true, force: true });
}
