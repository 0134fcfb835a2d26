/** The registry as text: dimensions in words, and the table of quantities for the docs. */
import type { Dimension } from '../snapshot/units.ts';
import { QUANTITIES, type Quantity } from './registry.ts';

const SUPERSCRIPTS: Readonly<Record<string, string>> = {
  '-': '⁻',
  1: '',
  2: '²',
  3: '³',
};

/** `mass length² time⁻²`; empty for a pure number. */
export function dimensionText({ mass, length, time }: Dimension): string {
  return Object.entries({ mass, length, time })
    .filter(([, power]) => power !== 0)
    .map(([name, power]) => name + exponentText(power))
    .join(' ');
}

function exponentText(power: number): string {
  if (power === -1) return '⁻¹';
  return [...String(power)].map((digit) => SUPERSCRIPTS[digit] ?? `^${digit}`).join('');
}

const KINDS: Readonly<Record<Quantity['kind'], string>> = {
  number: 'number',
  integer: 'whole number',
  vector: '3 numbers',
  list: 'list',
  integers: 'list of whole numbers',
  ids: 'list of ids',
};

/** All quantities as a table in Markdown, one row each, in the order of the registry. */
export function quantityTable(): string {
  const rows = QUANTITIES.map((quantity) => [
    `\`${quantity.key}\``,
    KINDS[quantity.kind],
    dimensionText(quantity.dimension) || '1',
    quantity.nullable ? 'yes' : '',
    quantity.extra === null ? '' : `\`${quantity.extra}\``,
    quantity.error === null ? '' : `\`${quantity.error}\``,
    quantity.text,
    quantity.source,
  ]);
  const head = ['key', 'kind', 'dimension', 'null?', '--with', 'error in', 'meaning', 'source'];
  return [head, head.map(() => '---'), ...rows]
    .map((cells) => `| ${cells.map((cell) => cell.replaceAll('|', '\\|')).join(' | ')} |`)
    .join('\n');
}
