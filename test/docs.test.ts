/** The words that come with the program: links lead somewhere, commands exist, lists are complete. */
import { existsSync, mkdtempSync, readdirSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { dirname, join } from 'node:path';
import { Writable } from 'node:stream';
import { fileURLToPath } from 'node:url';
import { describe, expect, it } from 'vitest';
import { buildProgram } from '../src/cli/program.ts';
import type { Streams } from '../src/cli/streams.ts';
import { BUILT_IN_RULES } from '../src/gate/builtIn.ts';
import { OF_RUN, OF_SNAPSHOT } from '../src/gate/derived.ts';
import { VERDICT_SCALARS } from '../src/gate/quantities.ts';
import { parseRules } from '../src/gate/readRules.ts';
import { REMARK_CODES } from '../src/gate/remarkCodes.ts';
import { STATISTICS } from '../src/gate/rules.ts';
import { parseLayout } from '../src/snapshot/raw/layout-check.ts';
import { bodyBytes, fieldBytes, isSkip } from '../src/snapshot/raw/layout.ts';
import { readRaw } from '../src/snapshot/raw/read.ts';
import { writeRaw } from '../src/snapshot/raw/write.ts';
import type { Particles } from '../src/snapshot/particles.ts';
import { UNIT_SYSTEMS } from '../src/snapshot/units.ts';
import { RUN_FILE_KEYS, runFileSchema } from '../src/survey/runFileSchema.ts';

const ROOT = fileURLToPath(new URL('..', import.meta.url));
const read = (name: string) => readFileSync(join(ROOT, name), 'utf8');
const PAGES = [
  'README.md',
  'DEVELOPERS.md',
  'CHANGELOG.md',
  ...readdirSync(join(ROOT, 'docs'))
    .filter((name) => name.endsWith('.md'))
    .map((name) => `docs/${name}`),
];

interface Fence {
  readonly language: string;
  readonly text: string;
}

function fencesOf(page: string): Fence[] {
  return [...read(page).matchAll(/^```(\w*)\n([\s\S]*?)^```$/gm)].map(([, language, text]) => ({
    language,
    text,
  }));
}

/** The anchor that common viewers of Markdown give a heading. */
function anchorOf(heading: string): string {
  return heading
    .trim()
    .toLowerCase()
    .replace(/[^\p{L}\p{N} _-]/gu, '')
    .replaceAll(' ', '-');
}

function anchors(page: string): string[] {
  const text = read(page).replace(/^```[\s\S]*?^```$/gm, '');
  return [...text.matchAll(/^#+ (.*)$/gm)].map(([, heading]) => anchorOf(heading));
}

describe.each(PAGES)('%s', (page) => {
  it('has links that lead somewhere', () => {
    const links = [...read(page).matchAll(/\]\(([^)\s]+)\)/g)].map(([, target]) => target);
    for (const link of links) {
      if (/^https?:/.test(link)) continue;
      const [path, anchor] = link.split('#');
      const target = path === '' ? page : join(dirname(page), path);
      expect(existsSync(join(ROOT, target)), `${link} in ${page}`).toBe(true);
      if (anchor !== undefined) expect(anchors(target), `${link} in ${page}`).toContain(anchor);
    }
  });
});

describe('commands in the docs', () => {
  const nowhere = new Writable({ write: (_chunk, _encoding, next) => next() });
  const streams = { stdout: nowhere, stderr: nowhere, env: {} } as unknown as Streams;
  const program = buildProgram(streams, () => undefined);
  const known = new Map(
    program.commands.map((command) => [
      command.name(),
      // The help is what users see: options come from its text.
      [...command.helpInformation().matchAll(/^ {2}(--[a-z-]+)/gm)].map(([, option]) => option),
    ]),
  );
  const lines = PAGES.flatMap((page) =>
    fencesOf(page)
      .filter(({ language }) => language === 'sh')
      .flatMap(({ text }) => text.replaceAll('\\\n', ' ').split('\n'))
      .map((line) => line.replace(/^(\$ )?(npx )?/, ''))
      .filter((line) => line.startsWith('settlemark '))
      .map((line) => ({ page, line })),
  );

  it('are found', () => {
    // A pattern that no longer finds them would pass the checks below.
    expect(lines.length).toBeGreaterThan(5);
    expect(known.get('measure')).toContain('--softening');
  });

  it.each(lines)('$page: $line', ({ line }) => {
    const [, name, ...words] = line.split('|')[0].trim().split(/ +/);
    const options = known.get(name);
    expect(options, `the command ${name}`).toBeDefined();
    for (const word of words) if (word.startsWith('--')) expect(options).toContain(word);
  });
});

describe('layouts in the docs', () => {
  const layouts = [...fencesOf('docs/formats.md'), ...fencesOf('README.md')].filter(
    ({ language, text }) => language === 'json' && text.includes('"settlemark": "layout/1"'),
  );

  it('are layouts', () => {
    expect(layouts.length).toBeGreaterThanOrEqual(5);
    for (const { text } of layouts) parseLayout(text, 'formats.md');
  });

  it('have the sizes that the text beside them says', () => {
    const bytes = layouts.map(({ text }) => bodyBytes(parseLayout(text, 'formats.md')));
    // sizeof of the C structure on a machine with 8-byte alignment of doubles, as compiled with gcc.
    expect(bytes).toContain(48);
  });

  it('can be written and read again, each of them', async () => {
    const folder = mkdtempSync(join(tmpdir(), 'settlemark-docs-'));
    const count = 6;
    const numbers = (first: number) => Float64Array.from({ length: count }, (_, k) => first + k);
    const whole = Int32Array.from({ length: count }, (_, k) => 40 + k);
    try {
      for (const [k, { text }] of layouts.entries()) {
        const layout = parseLayout(text, 'formats.md');
        delete layout.parts; // One file is written.
        const { components, constants, comoving, units } = layout;
        const mass = numbers(1);
        if (constants?.mass !== undefined) mass.fill(constants.mass);
        // Of two components the first three bodies, and the others, whose masses are one.
        if (components !== undefined) mass.fill(2, 3);
        const component = Uint16Array.from({ length: count }, (_, i) => (i < 3 ? 0 : 1));
        const particles: Particles = {
          ...{ count, mass, x: numbers(2), y: numbers(-3.5), z: numbers(0.5) },
          ...{ vx: numbers(7), vy: numbers(-1), vz: numbers(0.25) },
          columns: {
            ...{ id: whole, group: whole, component, potential: numbers(-9) },
            density: numbers(11),
          },
          componentNames: components?.map(({ name }) => name) ?? ['1', '2'],
          time: 1.5,
          units: units === undefined ? null : UNIT_SYSTEMS[units],
          gravity: units === undefined ? (constants?.gravity ?? null) : UNIT_SYSTEMS[units].gravity,
          softening: constants?.softening ?? 0.5,
          frame:
            comoving === undefined
              ? { kind: 'physical' }
              : {
                  kind: 'comoving',
                  ...{ scaleFactor: 0.5, hubbleRate: 0.1, boxSize: 900 },
                  velocity: comoving.velocity,
                },
          origin: { file: 'made', format: 'made', mantissaBits: 53, remarks: [] },
        };
        const path = join(folder, `${k}.bin`);
        // The writer needs a value for everything; what the reader passes over is written as a gap.
        const written = {
          ...layout,
          header: layout.header.filter(({ name }) => !['partCount', 'totalCount'].includes(name)),
          fields: layout.fields.map((entry) => {
            if (isSkip(entry)) return entry;
            if (entry.name === 'colour') return { skip: fieldBytes(entry) };
            return entry.name === 'weight' ? { ...entry, name: 'mass' } : entry;
          }),
        };
        await writeRaw(path, particles, written);
        const named = join(folder, `${k}.json`);
        writeFileSync(named, JSON.stringify(layout));
        const columns = text.includes('"weight"') ? { mass: 'weight' } : {};
        const again = await readRaw(path, { layout: named, columns });
        expect(again.count, text).toBe(count);
        // Some have scales, so that the last digit may differ; single precision has seven.
        const near = (a: ArrayLike<number>, b: ArrayLike<number>) =>
          Array.from(a, (value, i) => expect(value / b[i], text).toBeCloseTo(1, 6));
        near(again.mass, mass);
        near(again.y, particles.y);
        near(again.vz, particles.vz);
      }
    } finally {
      rmSync(folder, { recursive: true });
    }
  });
});

describe('run files in the docs', () => {
  const files = fencesOf('docs/runs.md').filter(
    ({ language, text }) => language === 'json' && text.includes('"settlemark": "run/1"'),
  );

  it('are run files', () => {
    expect(files.length).toBeGreaterThanOrEqual(1);
    for (const { text } of files)
      expect(runFileSchema.safeParse(JSON.parse(text)).error?.message).toBeUndefined();
  });

  it('have all their keys in the table', () => {
    const page = read('docs/runs.md');
    for (const key of RUN_FILE_KEYS) expect(page, key).toContain(`\`${key}\``);
  });
});

describe('rules in the docs', () => {
  const rules = fencesOf('docs/gate.md').filter(({ text }) => text.includes('settlemark: rules/1'));

  it('are rules', async () => {
    expect(rules.length).toBeGreaterThanOrEqual(1);
    for (const { text } of rules) {
      const { rules: list } = await parseRules(text, 'gate.md');
      expect(list.length).toBeGreaterThan(0);
    }
  });

  it('have all keys, windows, statistics, bounds and names in the tables', async () => {
    const page = read('docs/gate.md');
    const { keysAt } = await import('../src/gate/rulesSchema.ts');
    const keys = ['', 'rules', 'rules.during', 'rules.statistic'].flatMap((at) =>
      keysAt(at === '' ? [] : at.split('.')),
    );
    const names = [...Object.keys(OF_SNAPSHOT), ...Object.keys(OF_RUN)];
    for (const key of [...keys, ...STATISTICS, ...names, ...Object.keys(BUILT_IN_RULES)])
      expect(page, key).toMatch(new RegExp(`\`[^\`]*\\b${key.replace('$', '\\$')}\\b[^\`]*\``));
    for (const name of Object.keys(VERDICT_SCALARS))
      expect(page, name).toMatch(new RegExp(`\`(verdict\\.)?${name.replaceAll('.', '\\.')}\``));
  });

  it('know the remarks of a record, and no others', () => {
    const table = read('docs/record.md').split('\n## Remarks')[1].split('\n## ')[0];
    const codes = table
      .split('\n')
      .filter((line) => line.startsWith('| `') && !/\| (verdict|compare): /.test(line))
      .flatMap((line) => [...line.split('|')[1].matchAll(/`([A-Za-z0-9.]+)`/g)])
      .map(([, code]) => code);
    expect(codes.length).toBeGreaterThan(30);
    expect([...REMARK_CODES].sort()).toEqual(codes.sort());
  });
});

describe('lists in the docs are complete', () => {
  const sources = (function list(folder: string): string[] {
    return readdirSync(join(ROOT, folder), { withFileTypes: true }).flatMap((entry) =>
      entry.isDirectory() ? list(`${folder}/${entry.name}`) : [`${folder}/${entry.name}`],
    );
  })('src')
    .map(read)
    .join('\n');
  const found = (pattern: RegExp, text: string) => [
    ...new Set([...text.matchAll(pattern)].map(([, code]) => code)),
  ];

  it('of error codes', () => {
    const page = read('docs/exit-codes.md');
    const inCode = found(/'((?:usage|input|unanswerable)\.[A-Za-z]+)'/g, sources);
    expect(inCode.length).toBeGreaterThan(40);
    for (const code of inCode) expect(page, code).toContain(`\`${code}\``);
    // The first row of usage codes are commander's own, under our prefix.
    const inDocs = found(/`((?:usage|input|unanswerable)\.[A-Za-z]+)`/g, page);
    const ofCommander = [
      'unknownOption',
      'unknownCommand',
      'missingArgument',
      'excessArguments',
      'optionMissingArgument',
      'invalidArgument',
    ];
    for (const code of inDocs) {
      if (!ofCommander.includes(code.replace('usage.', ''))) expect(inCode).toContain(code);
    }
  });

  it('of remarks', () => {
    const page = read('docs/record.md');
    const inCode = found(/\bcode: '([A-Za-z.]+)'/g, sources);
    expect(inCode.length).toBeGreaterThan(15);
    for (const code of inCode) expect(page, code).toContain(`\`${code}\``);
  });

  it('of unit systems, with their G', () => {
    const page = read('docs/record.md');
    for (const { name, gravity } of Object.values(UNIT_SYSTEMS)) {
      const row = new RegExp(`^\\| \`${name}\`.*\\| ([-0-9.e]+) \\|$`, 'm').exec(page);
      // Thirteen digits are printed: half a unit of the last is below 1e-12.
      expect(Math.abs(Number(row?.[1]) / gravity - 1), name).toBeLessThan(1e-12);
    }
  });

  it('of packages, with their versions', () => {
    const inDocs = new Map(
      read('docs/dependencies.md')
        .split('\n')
        .filter((line) => line.startsWith('|'))
        .map((line) => line.split('|').map((cell) => cell.trim().split(', ')))
        .flatMap(([, names, versions]) =>
          names.map((name, k) => [name, versions[k] ?? versions[0]]),
        ),
    );
    const manifest = JSON.parse(read('package.json')) as Record<string, Record<string, string>>;
    const pinned = { ...manifest['dependencies'], ...manifest['devDependencies'] };
    expect(Object.keys(pinned).length).toBeGreaterThan(10);
    for (const [name, version] of Object.entries(pinned))
      expect([name, inDocs.get(name)]).toEqual([name, version]);
  });

  it('of versions: the changelog begins with that of the package, and dates it', () => {
    const { version } = JSON.parse(read('package.json')) as { version: string };
    const [, top, date] = /^## (\S+) \((\d{4}-\d{2}-\d{2})\)$/m.exec(read('CHANGELOG.md')) ?? [];
    expect(top).toBe(version);
    expect(Number.isNaN(Date.parse(date))).toBe(false);
    expect(read('CHANGELOG.md')).toContain('### Numbers that change');
  });
});
