#!/usr/bin/env bash
# npm pack makes a package that installs and runs in another folder.
set -euo pipefail
cd "$(dirname "$0")/.."
elsewhere=$(mktemp -d)
trap 'rm -rf "$elsewhere"' EXIT
archive=$(npm pack --silent --ignore-scripts --pack-destination "$elsewhere")
cd "$elsewhere"
npm init -y >/dev/null
npm install --silent --no-audit --no-fund "./$archive"
npx carillon --version
npx carillon simulate --out bell.h5 --matrix 32 --quiet >/dev/null
npx carillon recon bell.h5 --out bell --quiet >/dev/null
node --input-type=module -e 'import { readScan } from "carillon"; const { facts } = await readScan("bell.h5"); if (facts.channels !== 4) throw new Error("library");'
test -s bell/image.npy
