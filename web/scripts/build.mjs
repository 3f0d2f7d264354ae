// Bundles scripts and styles into web/dist, which the Go binary embeds.
import { build } from 'esbuild';
import { copyFile, mkdir } from 'node:fs/promises';
import { dirname, join } from 'node:path';
import { fileURLToPath } from 'node:url';

const web = dirname(dirname(fileURLToPath(import.meta.url)));
const out = join(web, 'dist');
await mkdir(out, { recursive: true });

const common = { bundle: true, minify: true, sourcemap: false, legalComments: 'none', absWorkingDir: web, logLevel: 'warning' };
await build({
  ...common,
  entryPoints: ['scripts/first.js', 'scripts/app.js', 'scripts/charts.js'],
  outdir: 'dist',
  format: 'iife',
  target: ['chrome110', 'firefox115', 'safari16'],
  charset: 'utf8',
});
await build({ ...common, entryPoints: ['styles/style.css'], outfile: 'dist/style.css' });
await copyFile(join(web, 'styles', 'icon.svg'), join(out, 'icon.svg'));
