/** The packed library in a project of somebody else: its types under strict settings, its functions on three Nodes. */
import { execFile } from 'node:child_process';
import { cp, mkdir, mkdtemp, readdir, rm, symlink } from 'node:fs/promises';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { promisify } from 'node:util';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { ROOT } from './run.ts';

const run = promisify(execFile);
const TSC = join(ROOT, 'node_modules', 'typescript', 'bin', 'tsc');
/** Newer Nodes come from the registry, as packages that hold nothing but the program. */
const NEWER = ['22.23.5', '24.22.3'];
const NODE_PACKAGE = `node-${process.platform}-${process.arch}`;

let project = '';

beforeAll(async () => {
  project = await mkdtemp(join(tmpdir(), 'settlemark-project-'));
  await cp(join(ROOT, 'test', 'e2e', 'consumer'), project, { recursive: true });
  const modules = join(project, 'node_modules');
  const library = join(modules, 'settlemark');
  await mkdir(library, { recursive: true });
  // What `npm publish` would send, and the dependencies that this folder has already.
  const pack = ['pack', '--ignore-scripts', '--pack-destination', project];
  await run('npm', pack, { cwd: ROOT });
  const tarball = (await readdir(project)).find((name) => name.endsWith('.tgz')) ?? '';
  await run('tar', ['-xzf', join(project, tarball), '-C', library, '--strip-components=1']);
  for (const name of await readdir(join(ROOT, 'node_modules'))) {
    if (name.startsWith('.') || name === 'settlemark') continue;
    await symlink(join(ROOT, 'node_modules', name), join(modules, name));
  }
});

afterAll(() => rm(project, { recursive: true, force: true }));

async function program(node: string): Promise<Record<string, unknown>> {
  const { stdout, stderr } = await run(node, ['out/main.js'], { cwd: project });
  expect(stderr).toBe('');
  return JSON.parse(stdout) as Record<string, unknown>;
}

describe('a project that depends on the library', () => {
  it('compiles under strict settings, declarations of dependencies checked too', async () => {
    const { stdout } = await run(process.execPath, [TSC, '-p', '.'], { cwd: project });
    expect(stdout).toBe('');
  });

  it('runs on this Node', async () => {
    const told = await program(process.execPath);
    expect(told).toMatchObject({ count: 6000, same: [true, true], pairSum: true, code: 3 });
    // No source: four times the noise of 6000 bodies.
    expect(Math.abs((told.virialRatio as number) - 1)).toBeLessThan(0.042);
  });

  it.each(NEWER)('gives the same on Node %s', async (version) => {
    const folder = join(tmpdir(), `settlemark-node-${version}`);
    const node = join(folder, 'node_modules', NODE_PACKAGE, 'bin', 'node');
    const found = await run(node, ['--version']).catch(() => null);
    if (found === null) {
      await run('npm', ['install', '--no-save', '--prefix', folder, `${NODE_PACKAGE}@${version}`]);
    }
    expect((await run(node, ['--version'])).stdout).toBe(`v${version}\n`);
    expect(await program(node)).toEqual(await program(process.execPath));
  });
});
