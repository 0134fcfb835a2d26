/**
 * Results as JUnit XML, which servers of continuous integration read: one suite a set of rules, one test
 * case a rule. Only what both common schemas of the format allow is written, in the order that they ask for.
 */
import type { GateReportOptions, GateResult, RuleOutcome } from './judge.ts';
import { withError } from './numbers.ts';
import { whyText } from './summary.ts';

/** The result as an XML document in UTF-8. */
export function gateToJunit(result: GateResult, options: GateReportOptions = {}): string {
  const { at = new Date(), unreadable = [], strict = false } = options;
  const sets = [...new Set(result.outcomes.map(({ set }) => set))];
  const suites = sets.map((set) =>
    suite(
      set,
      result.outcomes.filter((outcome) => outcome.set === set).map((one) => ruleCase(one, strict)),
    ),
  );
  if (unreadable.length > 0) {
    suites.push(
      suite(
        'snapshots',
        unreadable.map(({ file, reason }) => ({
          kind: 'error' as const,
          name: file,
          className: 'settlemark.snapshots',
          message: reason,
        })),
      ),
    );
  }
  const stamp = at.toISOString().slice(0, 19);
  return [
    '<?xml version="1.0" encoding="UTF-8"?>',
    '<testsuites>',
    ...suites.flatMap((each, id) => suiteLines(each, id, stamp)),
    '</testsuites>',
    '',
  ].join('\n');
}

type Kind = 'passed' | 'failure' | 'skipped' | 'error';

interface Case {
  readonly kind: Kind;
  readonly name: string;
  readonly className: string;
  readonly message: string;
}

interface Suite {
  readonly name: string;
  readonly cases: readonly Case[];
}

/** Names of cases are made unique: servers follow a case from run to run by its name. */
function suite(name: string, cases: readonly Case[]): Suite {
  const seen = new Map<string, number>();
  return {
    name,
    cases: cases.map((one) => {
      const count = (seen.get(one.name) ?? 0) + 1;
      seen.set(one.name, count);
      return count === 1 ? one : { ...one, name: `${one.name} (${count})` };
    }),
  };
}

function ruleCase(outcome: RuleOutcome, strict: boolean): Case {
  const { set, name, subject, bound, severity } = outcome;
  const kinds: Record<RuleOutcome['outcome'], Kind> = {
    passes: 'passed',
    fails: severity === 'fail' ? 'failure' : 'skipped',
    cannotTell: strict && severity === 'fail' ? 'failure' : 'skipped',
  };
  const word = {
    passes: '',
    fails: severity === 'fail' ? 'fails' : 'warning',
    cannotTell: 'cannot tell',
  };
  return {
    kind: kinds[outcome.outcome],
    name,
    className: `settlemark.${set}`,
    message: `${word[outcome.outcome]}: ${subject} must be ${bound}; ${whyText(outcome)}${figureText(outcome)}`,
  };
}

function figureText({ value, error, snapshots, from, to }: RuleOutcome): string {
  if (typeof value !== 'number') return '';
  const times =
    from === null ? '' : from === to ? ` at time ${from}` : ` from time ${from} to ${to}`;
  return ` [${withError(value, error)}, ${snapshots} snapshot${snapshots === 1 ? '' : 's'}${times}]`;
}

function suiteLines({ name, cases }: Suite, id: number, stamp: string): string[] {
  const count = (kind: Kind) => cases.filter((one) => one.kind === kind).length;
  const head = attributes({
    name,
    package: 'settlemark',
    id,
    timestamp: stamp,
    hostname: 'localhost', // The schema wants one; the machine's own is nobody's business.
    tests: cases.length,
    failures: count('failure'),
    errors: count('error'),
    skipped: count('skipped'),
    time: 0,
  });
  return [
    `  <testsuite${head}>`,
    '    <properties/>',
    ...cases.flatMap(caseLines),
    '    <system-out/>',
    '    <system-err/>',
    '  </testsuite>',
  ];
}

function caseLines({ kind, name, className, message }: Case): string[] {
  const head = attributes({ name, classname: className, time: 0 });
  if (kind === 'passed') return [`    <testcase${head}/>`];
  const said = kind === 'skipped' ? { message } : { message, type: `settlemark.${kind}` };
  const inner = kind === 'skipped' ? '/>' : `>${escaped(message)}</${kind}>`;
  return [`    <testcase${head}>`, `      <${kind}${attributes(said)}${inner}`, '    </testcase>'];
}

const attributes = (list: Readonly<Record<string, string | number>>): string =>
  Object.entries(list)
    .map(([name, value]) => ` ${name}="${escaped(String(value))}"`)
    .join('');

const ENTITIES: Readonly<Record<string, string>> = {
  '&': '&amp;',
  '<': '&lt;',
  '>': '&gt;',
  '"': '&quot;',
  '\t': ' ',
  '\n': ' ',
  '\r': ' ',
};

/** Text for XML 1.0: what it does not allow at all (most control characters, lone surrogates) becomes U+FFFD. */
function escaped(text: string): string {
  return (
    text
      .replace(/\p{Surrogate}/gu, '\ufffd')
      // eslint-disable-next-line no-control-regex
      .replace(/[\u0000-\u0008\u000b\u000c\u000e-\u001f\ufffe\uffff]/g, '\ufffd')
      .replace(/[&<>"\t\n\r]/g, (character) => ENTITIES[character])
  );
}
