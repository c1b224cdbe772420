// Builds the page into dist/: one script, one style sheet, the fonts, and index.html. Every file
// but index.html carries the hash of its content in its name, and every text file stands there
// compressed as well, so that the daemon compresses nothing while a sink draws current.

import { createHash } from "node:crypto";
import { mkdirSync, readdirSync, readFileSync, rmSync, writeFileSync } from "node:fs";
import { dirname, join } from "node:path";
import { fileURLToPath } from "node:url";
import { brotliCompressSync, constants, gzipSync } from "node:zlib";
import { build } from "esbuild";

const here = dirname(fileURLToPath(import.meta.url));
const dist = join(here, "dist");

mkdirSync(dist, { recursive: true });
for (const name of readdirSync(dist)) {
  if (name !== ".gitignore") rmSync(join(dist, name));
}

const result = await build({
  absWorkingDir: here,
  entryPoints: { page: "src/main.ts", style: "src/style/page.css" },
  outdir: "dist",
  entryNames: "[name]-[hash]",
  assetNames: "[name]-[hash]",
  bundle: true,
  minify: true,
  format: "esm",
  target: "es2022",
  charset: "utf8",
  legalComments: "none",
  loader: { ".woff2": "file" },
  metafile: true,
  logLevel: "warning",
});

const written = Object.keys(result.metafile.outputs).map((path) => path.slice("dist/".length));
const only = (pattern) => {
  const found = written.filter((name) => pattern.test(name));
  if (found.length !== 1) throw new Error(`one file like ${pattern} is expected, not ${found}`);
  return found[0];
};
const icon = readFileSync(join(here, "src/icon.svg"));
const iconName = `icon-${hash(icon)}.svg`;
writeFileSync(join(dist, iconName), icon);
written.push(iconName);
const html = readFileSync(join(here, "src/index.html"), "utf8")
  .replace("{{script}}", `page/${only(/^page-.*\.js$/)}`)
  .replace("{{style}}", `page/${only(/^style-.*\.css$/)}`)
  .replace("{{icon}}", `page/${iconName}`)
  .replace("{{font}}", `page/${only(/latin-400-normal-.*\.woff2$/)}`);
writeFileSync(join(dist, "index.html"), html);

let weight = 0;
for (const name of [...written, "index.html"]) {
  const plain = readFileSync(join(dist, name));
  if (!/\.(js|css|html|svg)$/.test(name)) {
    weight += plain.length;
    continue;
  }
  const brotli = brotliCompressSync(plain, {
    params: { [constants.BROTLI_PARAM_QUALITY]: 11, [constants.BROTLI_PARAM_SIZE_HINT]: plain.length },
  });
  writeFileSync(join(dist, `${name}.gz`), gzipSync(plain, { level: 9 }));
  writeFileSync(join(dist, `${name}.br`), brotli);
  weight += brotli.length;
}
console.log(`page ${hash(html)}: ${(weight / 1000).toFixed(1)} kB compressed, fonts included`);

function hash(content) {
  return createHash("sha256").update(content).digest("hex").slice(0, 8);
}
