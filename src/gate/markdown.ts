/** Results as Markdown, for a comment on a merge request or the summary of a job. */
import type { GateReportOptions, GateResult, RuleOutcome } from './judge.ts';
import { withError } from './numbers.ts';
import { outcomeWord, summaryText, whyText } from './summary.ts';

/** The result as Markdown: a heading, a table of the rules, and the remarks. */
export function gateToMarkdown(result: GateResult, options: GateReportOptions = {}): string {
  const { unreadable = [] } = options;
  const head = ['', 'rule', 'figure', 'must be', 'why'];
  const rows = result.outcomes.map((outcome) => [
    outcome.outcome === 'passes' ? 'passes' : `**${outcomeWord(outcome)}**`,
    plainText(outcome.name),
    plainText(valueText(outcome)),
    plainText(outcome.bound),
    plainText(whyText(outcome)),
  ]);
  const { snapshots, verdict } = result;
  const facts = [
    `${snapshots} snapshot${snapshots === 1 ? '' : 's'}`,
    ...(verdict === null ? [] : [`verdict: ${verdict}`]),
    ...(unreadable.length > 0 ? [`**${unreadable.length} could not be measured**`] : []),
  ];
  return [
    `### Settlemark gate ${plainText(summaryText(result, options))}`,
    '',
    facts.join(' · '),
    '',
    ...[head, head.map(() => '---'), ...rows].map((cells) => `| ${cells.join(' | ')} |`),
    ...unreadable.map(({ file, reason }) => `\n${plainText(file)}: ${plainText(reason)}`),
    ...result.remarks.map(({ code, text }) => `\n${plainText(text)} (\`${code}\`)`),
    '',
  ].join('\n');
}

/** The figure of a rule with its error, or what stands for one. */
function valueText({ value, error }: RuleOutcome): string {
  if (value === null) return '';
  return typeof value === 'number' ? withError(value, error) : String(value);
}

/** Text that Markdown shows as it is, in one line. */
function plainText(text: string): string {
  return text
    .replace(/\s+/g, ' ')
    .replace(/&/g, '&amp;')
    .replace(/</g, '&lt;')
    .replace(/([\\`*_[\]|#~])/g, '\\$1');
}
