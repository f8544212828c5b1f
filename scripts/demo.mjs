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

// The same bell in three echoes, the middle one read backward, under a shim that is off: water, oil and field in their places.
carillon(
  ...["simulate", "--out", "demo-output/tower.h5", "--te-ms", "2.3", "--te-ms", "3.9", "--te-ms", "5.5"],
  ...["--reversed-echoes", "odd", "--dwell-us", "16", "--field-slope", "0.8,-0.4", "--force", "--quiet"],
);
carillon(
  ...["recon", "demo-output/tower.h5", "--out", "demo-output/placed", "--force", "--quiet"],
  ...["--separate", "fat-water", "--undisplace", "measured"],
);

// Three windows side by side: open demo-output/windows/compare.html.
carillon(
  ...["compare", "demo-output/bell.h5", "--out", "demo-output/windows", "--force", "--quiet"],
  ...["--vary", "apodize.window=none,hann,tukey:0.5", "--noise-by", "replicas"],
);
