// Bundles the tests and hands them to node's own test runner: node 20 reads no TypeScript.

import { spawnSync } from "node:child_process";
import { mkdirSync, readdirSync, rmSync } from "node:fs";
import { dirname, join } from "node:path";
import { fileURLToPath } from "node:url";
import { build } from "esbuild";

const web = dirname(dirname(fileURLToPath(import.meta.url)));

export async function test(folder) {
  const names = readdirSync(join(web, "test", folder)).filter((name) => name.endsWith(".test.ts"));
  const wanted = process.argv.slice(2);
  const chosen = names.filter((name) => wanted.length === 0 || wanted.some((part) => name.includes(part)));
  const out = join(web, "node_modules", ".tests", folder);
  rmSync(out, { recursive: true, force: true });
  mkdirSync(out, { recursive: true });
  await build({
    absWorkingDir: web,
    entryPoints: chosen.map((name) => join("test", folder, name)),
    outdir: out,
    outExtension: { ".js": ".mjs" },
    bundle: true,
    platform: "node",
    format: "esm",
    target: "node20",
    packages: "external",
    sourcemap: "inline",
    logLevel: "warning",
  });
  const files = chosen.map((name) => join(out, name.replace(/\.ts$/, ".mjs")));
  const run = spawnSync(
    process.execPath,
    ["--enable-source-maps", "--test", "--test-reporter=spec", "--test-concurrency=1", ...files],
    { stdio: "inherit", cwd: web },
  );
  process.exit(run.status ?? 1);
}
