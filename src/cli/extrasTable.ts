/** What `--with` adds to a record, as blocks of its page. */
import type { HardestPairs, MeasureRecord, UnitSystem } from '../index.ts';
import { columns, signRoom } from './columns.ts';
import { figure, NONE, short, significant, wholeNumber } from './figure.ts';
import { shorten, wrap } from './layout.ts';
import { isSoftened } from './ratioWords.ts';
import type { Paint } from './style.ts';
import { unitOf } from './unitOf.ts';

/** The blocks of the extras that the record has, each without a line break at its end. */
export function extrasBlocks(record: MeasureRecord, units: UnitSystem, paint: Paint): string[] {
  return [
    shells(record, units, paint),
    profiles(record, units, paint),
    pairs(record, units, paint),
  ].filter((block) => block !== '');
}

/** Digits of figures that stand in tables without their errors. */
const DIGITS = 4;
const brief = (value: number | null): string =>
  value === null ? NONE : significant(value, DIGITS);

function table(
  title: string,
  head: readonly string[],
  rows: readonly (readonly string[])[],
  foot: string,
  paint: Paint,
): string {
  const cells = [head, ...rows].map((row) => row.map(signRoom));
  const lines = columns(
    cells,
    head.map(() => 'left'),
    '  ',
  ).split('\n');
  return [title, paint.faint(lines[0]), ...lines.slice(1), paint.faint(foot)].join('\n');
}

function shells(record: MeasureRecord, units: UnitSystem, paint: Paint): string {
  const { shells: found, radialToTangential, radialToTangentialError } = record;
  if (found === undefined) return '';
  const pair = (values: Figures, errors: Figures, k: number) => figure(values[k], errors[k]);
  const rows = found.outer.map((outer, k) => [
    brief(outer),
    pair(found.radialVelocity, found.radialVelocityErrors, k),
    brief(found.radialDispersion[k]),
    pair(found.anisotropy, found.anisotropyErrors, k),
    pair(found.rotation, found.rotationErrors, k),
  ]);
  const head = ['out to', 'mean v_r', 'σ_r', 'β', 'rotation'];
  const ratio = figure(radialToTangential ?? null, radialToTangentialError ?? null);
  const foot = [
    ...unitNote(units, ['shells.outer', 'shells.radialVelocity'], ['radii', 'velocities']),
    `  2T_r/T_t of all: ${ratio}, 1 for isotropic velocities`,
  ].join('\n');
  return table(titleOf('Motion', record, found.set, paint), head, rows, foot, paint);
}

type Figures = readonly (number | null)[];

function profiles(record: MeasureRecord, units: UnitSystem, paint: Paint): string {
  const { profiles: found } = record;
  if (found === undefined) return '';
  const rows = found.radii.map((radius, k) => [
    brief(radius),
    figure(found.density[k], found.densityErrors[k]),
    brief(found.enclosedMass[k]),
    brief(found.circularVelocity[k]),
    brief(found.escapeVelocity[k]),
    brief(found.relaxationTime[k]),
  ]);
  const head = ['radius', 'density', 'mass inside', 'v_circ', 'v_esc', 'relaxation'];
  const keys = ['radii', 'density', 'enclosedMass', 'circularVelocity', 'relaxationTime'];
  const peak = figure(found.peakVelocity, found.peakVelocityError);
  const foot = [
    ...unitNote(
      units,
      keys.map((key) => `profiles.${key}`),
      ['radii', 'densities', 'masses', 'velocities', 'times'],
    ),
    ...(found.peakRadius === null
      ? []
      : [
          wrap(
            `v_circ is greatest, ${peak}, at ${figure(found.peakRadius, found.peakRadiusError)}`,
            '  ',
          ),
        ]),
  ].join('\n');
  return table(titleOf('Profiles', record, found.set, paint), head, rows, foot, paint);
}

function titleOf(
  what: string,
  record: MeasureRecord,
  set: 'whole' | 'bound',
  paint: Paint,
): string {
  const some = record.bound.particles < record.whole.particles && set === 'bound';
  const of = some ? 'bound bodies' : 'all bodies';
  return paint.strong(`${what} in shells of equal number, ${of}`);
}

function unitNote(
  units: UnitSystem,
  keys: readonly string[],
  words: readonly string[],
): readonly string[] {
  const said = keys
    .map((key, k) => ({ word: words[k], unit: unitOf(key, units) }))
    .filter(({ unit }) => unit !== '')
    .map(({ word, unit }) => `${word} in ${unit}`);
  return said.length === 0 ? [] : [wrap(said.join(', '), '  ')];
}

function pairs(record: MeasureRecord, units: UnitSystem, paint: Paint): string {
  const { hardPairs, hardPairsEnergy, hardestPairs: hardest, pairsMerged: merged } = record;
  if (hardest === undefined || merged === undefined) return '';
  if (typeof hardPairs !== 'number') return paint.strong(`Hard pairs  ${NONE}`);
  if (hardPairs === 0) return paint.strong('Hard pairs  none');
  const softened = isSoftened(record);
  const ratio = softened ? merged.clausiusRatio : merged.virialRatio;
  const energy = withUnit(brief(hardPairsEnergy ?? null), unitOf('hardPairsEnergy', units));
  const title = `${paint.strong(`Hard pairs  ${wholeNumber(hardPairs)}`)}, binding energy ${energy} in all`;
  const listed = hardest.first.length;
  const foot = [
    ...unitNote(units, ['hardestPairs.semiMajorAxes', 'hardestPairs.energies'], ['a', 'energies']),
    ...(listed < hardPairs ? [`  the ${listed} hardest of ${wholeNumber(hardPairs)}`] : []),
    `  With each pair as one body ${softened ? '2T/|W|' : '2T/|U|'} is ${figure(ratio, merged.noise)}`,
  ].join('\n');
  const head = [hasIds(hardest) ? 'ids' : 'index', 'a', 'e', 'energy', 'energy/kT'];
  return table(title, head, pairRows(hardest), foot, paint);
}

/** Longer ids, of which there are few, are shown without their middle. */
const ID_WIDTH = 11;

const hasIds = ({ firstIds }: HardestPairs): boolean => firstIds.length > 0;

function pairRows(hardest: HardestPairs): string[][] {
  const name = (index: number, id: number | string) =>
    shorten(String(hasIds(hardest) ? id : index), ID_WIDTH);
  return hardest.first.map((first, k) => [
    `${name(first, hardest.firstIds[k])}, ${name(hardest.second[k], hardest.secondIds[k])}`,
    brief(hardest.semiMajorAxes[k]),
    short(hardest.eccentricities[k], 3),
    brief(hardest.energies[k]),
    figure(hardest.hardness[k], hardest.hardnessErrors[k]),
  ]);
}

function withUnit(text: string, unit: string): string {
  return unit === '' ? text : `${text} ${unit}`;
}
