#!/bin/sh
# Remakes d3-subset.min.js from the npm packages pinned in package-lock.json. Run by hand; needs npm and Node.js.
set -eu
here=$(CDPATH= cd -- "$(dirname -- "$0")" && pwd)
work=$(mktemp -d)
trap 'rm -rf "$work"' EXIT
cp "$here/package.json" "$here/package-lock.json" "$here/d3-subset.entry.js" "$work"
cd "$work"
npm ci --no-audit --no-fund --silent
npx esbuild d3-subset.entry.js --bundle --minify --format=iife --global-name=d3 --target=es2019 \
    --charset=utf8 --legal-comments=none --metafile=meta.json --outfile=bundle.js --log-level=warning
# The header: every package that went in, with its version, its copyright line and the licence they share (ISC).
node - > out.js <<'JS'
const fs = require("fs");
const inputs = Object.keys(JSON.parse(fs.readFileSync("meta.json")).inputs);
const names = [...new Set(inputs.map((p) => (p.match(/^node_modules\/([^/]+)\//) || [])[1]).filter(Boolean))].sort();
const lines = ["/*!", " * Made by vendor.sh from:"];
let terms = "";
for (const name of names) {
  const about = JSON.parse(fs.readFileSync(`node_modules/${name}/package.json`));
  const licence = fs.readFileSync(`node_modules/${name}/LICENSE`, "utf8").trim();
  if (about.license !== "ISC") throw new Error(`${name} is under ${about.license}: give its terms in the header`);
  const [copyright, ...rest] = licence.split("\n");
  terms = rest.join("\n").trim();
  lines.push(` * ${name} ${about.version} (ISC). ${copyright}`);
}
lines.push(" *", ...terms.split("\n").map((line) => ` * ${line}`.trimEnd()), " */");
console.log(lines.join("\n") + "\n" + fs.readFileSync("bundle.js", "utf8").trim());
JS
if grep -q '</script' out.js; then
    echo "vendor.sh: the bundle holds a closing script tag and cannot stand inside a page" >&2
    exit 1
fi
mv out.js "$here/d3-subset.min.js"
