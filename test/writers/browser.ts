import { existsSync } from "node:fs";
import { type Browser, chromium } from "playwright-core";

const USUAL_PLACES = [
  "/usr/bin/chromium",
  "/usr/bin/chromium-browser",
  "/usr/bin/google-chrome",
  "/snap/bin/chromium",
  "/Applications/Chromium.app/Contents/MacOS/Chromium",
  "/Applications/Google Chrome.app/Contents/MacOS/Google Chrome",
];

/** A headless browser. It must be there: a page that no browser has opened is not tested. */
export async function launchBrowser(): Promise<Browser> {
  const given = process.env.TEST_CHROMIUM;
  const executablePath = given ?? USUAL_PLACES.find((place) => existsSync(place));
  if (executablePath === undefined || !existsSync(executablePath)) {
    throw new Error(
      `no browser at ${given ?? USUAL_PLACES.join(", ")}: install Debian's package chromium, or say where one is with TEST_CHROMIUM=/path/to/chromium`,
    );
  }
  return chromium.launch({ executablePath, args: ["--no-sandbox"] }); // root, as in containers, has no sandbox
}
