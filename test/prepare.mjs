/**
 * Sees to what the tests need besides npm's packages: Chromium (the watch page) and tshark (an independent reader of the wire format). On Debian as
 * root it installs what is missing; elsewhere it says what to install and fails. Nothing is skipped in silence.
 */
import { spawnSync } from "node:child_process";
import { existsSync } from "node:fs";

const needs = [
  { program: "chromium", package: "chromium", why: "the watch page's tests drive a real browser" },
  { program: "tshark", package: "tshark", why: "frames that our codec wrote are read by an independent dissector" },
];

const isThere = (program) => (process.env.PATH ?? "").split(":").some((folder) => existsSync(`${folder}/${program}`));
const missing = needs.filter((need) => !isThere(need.program));
if (missing.length > 0) {
  const packages = missing.map((need) => need.package);
  const canInstall = process.getuid?.() === 0 && existsSync("/etc/debian_version");
  if (canInstall) {
    console.log(`Installing for the tests: ${packages.join(", ")}`);
    const apt = (...args) =>
      spawnSync("apt-get", args, {
        stdio: ["ignore", "ignore", "inherit"],
        env: { ...process.env, DEBIAN_FRONTEND: "noninteractive" },
      });
    apt("update");
    apt("install", "-y", "--no-install-recommends", ...packages);
  }
  const still = missing.filter((need) => !isThere(need.program));
  if (still.length > 0) {
    for (const need of still)
      console.error(`Missing: ${need.program} (${need.why}). On Debian or Ubuntu: sudo apt-get install ${need.package}`);
    process.exit(1);
  }
}
