// Packs the libraries of a report page into sfcpart/report/page/libraries/: each as one minified
// script that sets one global name, with the licence texts of all that is inside.
//
//     cd tools/page && npm install && npm run build
//
// Versions are pinned in package.json; the names and versions of all that went in stand at the
// head of the licence file.
import { build } from "esbuild";
import { existsSync, mkdirSync, readdirSync, readFileSync, writeFileSync } from "node:fs";
import { join } from "node:path";

const target = "../../sfcpart/report/page/libraries";
const bundles = [
  { entry: "drawing.js", name: "sfcpartDrawing" },
  { entry: "charts.js", name: "sfcpartCharts" },
];

mkdirSync(target, { recursive: true });
const packages = new Set();
for (const { entry, name } of bundles) {
  const result = await build({
    entryPoints: [entry],
    outfile: join(target, entry.replace(".js", ".min.js")),
    bundle: true,
    minify: true,
    format: "iife",
    globalName: name,
    target: "es2020",
    legalComments: "none", // the licences are in a file of their own
    metafile: true,
  });
  for (const input of Object.keys(result.metafile.inputs)) {
    const found = input.match(/node_modules\/((?:@[^/]+\/)?[^/]+)\//);
    if (found) packages.add(found[1]);
  }
}

const texts = [];
for (const name of [...packages].sort()) {
  const folder = join("node_modules", name);
  const { version, license } = JSON.parse(readFileSync(join(folder, "package.json")));
  const file = readdirSync(folder).find((entry) => /^licen[cs]e/i.test(entry));
  const text = file && existsSync(join(folder, file)) ? readFileSync(join(folder, file), "utf8") : "";
  texts.push(`${name} ${version} (${license})\n\n${text.trim()}\n`);
}
const heads = texts.map((text) => `  ${text.split("\n")[0]}`).join("\n");
writeFileSync(
  join(target, "LICENCES.txt"),
  `The scripts in this folder are made of these packages, unchanged but for minifying:\n\n${heads}\n\n` +
    texts.map((text) => `${"-".repeat(79)}\n${text}`).join("\n"),
);
