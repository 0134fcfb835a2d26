/** JUnit XML, read and validated by libxml2; Markdown; the sentence on the whole. */
import { readFileSync } from 'node:fs';
import { XmlDocument, XsdValidator, type XmlElement } from 'libxml2-wasm';
import { describe, expect, it } from 'vitest';
import { gateToJunit } from '../../src/gate/junit.ts';
import { judgeRules, type GateResult } from '../../src/gate/judge.ts';
import { gateToMarkdown } from '../../src/gate/markdown.ts';
import type { Rule } from '../../src/gate/rules.ts';
import { stateOf, summaryText } from '../../src/gate/summary.ts';
import { madeSeries } from './made.ts';

const XSD = readFileSync(new URL('./junit.xsd', import.meta.url), 'utf8');
const at = new Date(Date.UTC(2026, 0, 2, 3, 4, 5, 678));
// Everything that XML, Markdown or a terminal could take amiss.
const NASTY = 'a<b> & "c" \u0000\u0007\u001b[31m ]]> | `d` \ud800 \uffff\nnext ± ü';

const RULES: Rule[] = [
  { name: 'good', quantity: 'virialRatio', atMost: 1.5 },
  { name: NASTY, quantity: 'virialRatio', atMost: 0.5, message: NASTY },
  { name: 'warning', quantity: 'virialRatio', atMost: 0.5, severity: 'warn' },
  { name: 'open', quantity: 'virialRatio', atMost: 1 },
  { name: 'good', quantity: 'virialRatio', atLeast: 0.5 },
];
const result = (rules: Rule[] = RULES, set = 'set & <one>'): Promise<GateResult> =>
  judgeRules({ name: set, rules }, madeSeries([{}]));

/** Parses and validates; libxml2 throws for what is wrong. */
function read<T>(xml: string, look: (document: XmlDocument) => T): T {
  const schema = XmlDocument.fromString(XSD);
  const validator = XsdValidator.fromDoc(schema);
  const document = XmlDocument.fromString(xml);
  try {
    validator.validate(document);
    return look(document);
  } finally {
    document.dispose();
    validator.dispose();
    schema.dispose();
  }
}

const attribute = (document: XmlDocument, path: string, name: string) =>
  document.find(path).map((node) => (node as XmlElement).attr(name)?.value);

describe('JUnit XML', () => {
  it('is valid, and counts what it holds', async () => {
    const xml = gateToJunit(await result(), { at });
    read(xml, (document) => {
      const of = (name: string) => attribute(document, '/testsuites/testsuite', name)[0];
      expect(of('name')).toBe('set & <one>');
      expect(of('timestamp')).toBe('2026-01-02T03:04:05');
      const counted = ['failure', 'error', 'skipped'].map(
        (kind) => document.find(`//testcase/${kind}`).length,
      );
      expect(counted).toEqual([1, 0, 2]);
      expect(['failures', 'errors', 'skipped', 'tests'].map(of)).toEqual(['1', '0', '2', '5']);
      const names = attribute(document, '//testcase', 'name');
      expect(new Set(names).size).toBe(5);
      expect(names).toContain('good (2)');
      const [message] = attribute(document, '//failure', 'message');
      expect(message).toContain('a<b> & "c" ');
      expect(message).toContain('1.000 ± 0.010');
      // eslint-disable-next-line no-control-regex
      expect(xml).not.toMatch(/[\u0000-\u0009\u000b-\u001f]/);
    });
  });

  it('has what cannot be told as a failure if strict, and unreadable snapshots as errors', async () => {
    const unreadable = [{ file: 'run/7.bin', reason: NASTY }];
    read(gateToJunit(await result(), { at, strict: true, unreadable }), (document) => {
      expect(document.find('//testcase/failure').length).toBe(2);
      expect(attribute(document, '/testsuites/testsuite', 'name')).toEqual([
        'set & <one>',
        'snapshots',
      ]);
      expect(attribute(document, '//testcase[error]', 'name')).toEqual(['run/7.bin']);
    });
  });

  it('has a suite for every set', async () => {
    const sets = ['a', 'b'].map((name) => ({ name, rules: RULES.slice(0, 1) }));
    const both = await judgeRules(sets, madeSeries([{}]));
    read(gateToJunit(both), (document) => {
      expect(attribute(document, '/testsuites/testsuite', 'id')).toEqual(['0', '1']);
      expect(document.find('//testcase').length).toBe(2);
    });
  });

  it('would not be valid otherwise: the schema refuses what is wrong', async () => {
    const xml = gateToJunit(await result(), { at });
    for (const [from, to] of [
      ['tests="5"', 'tests="-5"'],
      [' hostname="localhost"', ''],
      ['    <properties/>\n', ''],
      ['<system-out/>', '<output/>'],
      ['03:04:05', '03:04:05Z'],
    ]) {
      expect(xml).toContain(from);
      expect(() => read(xml.replace(from, to), () => null), to).toThrow();
    }
  });
});

describe('Markdown', () => {
  it('has a row a rule, whatever the names are', async () => {
    const page = gateToMarkdown(await result());
    const rows = page.split('\n').filter((line) => line.startsWith('|'));
    expect(rows).toHaveLength(RULES.length + 2);
    // Cells are parted by bars that no backslash goes before.
    for (const row of rows) expect(row.match(/(?<!\\)\|/g)).toHaveLength(6);
    expect(rows[3]).toContain('**fails**');
    expect(rows[3]).toContain('a&lt;b>');
    expect(rows[4]).toContain('**warns**');
    expect(rows[5]).toContain('**cannot tell**');
  });
});

describe('the sentence on the whole', () => {
  it('names what does not pass', async () => {
    expect(summaryText(await result(RULES.slice(0, 1)))).toBe('passed: its one rule');
    const short = RULES.filter(({ name }) => name !== NASTY);
    expect(summaryText(await result(short))).toBe(
      'passed: 1 warns (warning), 1 cannot be told (open)',
    );
    expect(summaryText(await result(short), { strict: true })).toMatch(/^failed: /);
    expect(summaryText(await result())).toMatch(/^failed: 1 of 5 rules fails \(a<b>/);
  });

  it('never calls passed what was not read or has no verdict', async () => {
    const good = await result(RULES.slice(0, 1));
    expect(stateOf(good)).toBe('passed');
    expect(stateOf(good, { unreadable: [{ file: 'x', reason: 'y' }] })).toBe('not answered');
    const verdict = await result([{ quantity: 'verdict', oneOf: ['settled'] }]);
    expect(stateOf(verdict)).toBe('not answered');
    expect(stateOf(verdict, { strict: true })).toBe('failed');
  });
});
