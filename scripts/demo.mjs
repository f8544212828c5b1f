// The README's demo: simulate a raw file, look at it, reconstruct it, print what came out.
import { execFileSync } from "node:child_process";
import { fileURLToPath } from "node:url";

const root = fileURLToPath(new URL("..", import.meta.url));
const carillon = (...words) => {
  process.stdout.write(`\n$ npx carillon ${words.join(" ")}\n`);
  execFileSync(process.execPath, ["dist/carillon.js", ...words], { cwd: root, stdio: "inherit" });
};

// A bell cast in agar with inclusions of oil, at a low bandwidth: the oil stands out of place along the readout.
carillon(
  "simulate",
  "--out",
  "demo-output/bell.h5",
  "--slices",
  "3",
  "--dwell-us",
  "12",
  "--force",
  "--quiet",
);
carillon("inspect", "demo-output/bell.h5", "--quiet");
carillon("recon", "demo-output/bell.h5", "--out", "demo-output/bell", "--force", "--quiet");
