/** The names that a rule may use: scalars of the record and of the verdict, and what is derived from them. */
import { recordColumns } from '../dynamics/recordColumns.ts';
import type { ExtraName } from '../dynamics/extras.ts';
import { QUANTITIES } from '../dynamics/registry.ts';
import { nearestName } from '../numerics/nearest.ts';
import type { SofteningKernel } from '../octree/softening.ts';
import type { RatioKind, SetName } from '../settling/series.ts';
import type { VerdictName } from '../settling/verdict.ts';
import { OF_RUN, OF_SNAPSHOT } from './derived.ts';
import { REMARK_CODES } from './remarkCodes.ts';

export type ValueType = 'number' | 'text' | 'boolean';

/** What a name in a rule means. */
export interface GateQuantity {
  /** In full: `whole.virialRatio`, `lagrangian[0.5]`, `verdict.audit.energyDrift`. */
  readonly name: string;
  /** Of every snapshot, or once of the run. */
  readonly of: 'snapshot' | 'run';
  readonly type: ValueType;
  /** Name after `--with` without which records do not hold it. */
  readonly extra: ExtraName | null;
  /** Mass fraction that must have been measured for it. */
  readonly fraction: number | null;
}

/** A name that means nothing here. */
export interface UnknownQuantity {
  readonly problem: string;
  readonly nearest: string | null;
}

/** Scalars of a verdict by path, and where their errors stand. */
export const VERDICT_SCALARS: Readonly<Record<string, readonly [ValueType, string | null]>> = {
  verdict: ['text', null],
  settledAt: ['number', 'settledAtError'],
  settledAtError: ['number', null],
  settledFrom: ['text', null],
  'ratio.kind': ['text', null],
  'ratio.set': ['text', null],
  'ratio.mean': ['number', 'ratio.error'],
  'ratio.error': ['number', null],
  'ratio.noise': ['number', null],
  crossingTime: ['number', null],
  span: ['number', null],
  snapshots: ['number', null],
  independentSnapshots: ['number', null],
  advisedSpacing: ['number', null],
  'audit.energyDrift': ['number', 'audit.energyFloor'],
  'audit.energyDriftAt': ['number', null],
  'audit.energyFloor': ['number', null],
  'audit.momentumDrift': ['number', null],
  'audit.centreDrift': ['number', null],
  'audit.angularMomentumDrift': ['number', null],
  'audit.massKept': ['boolean', null],
  'audit.particlesKept': ['boolean', null],
  'audit.largestStep.share': ['number', null],
  'audit.largestStep.at': ['number', null],
};

const VERDICTS = [
  'settled',
  'relaxing',
  'oscillating',
  'collapsing',
  'expanding',
  'dispersing',
  'drifting',
  'broken',
  'undecided',
] as const satisfies readonly VerdictName[];

/** The words that a text may be, where there are few. */
export const WORDS: Readonly<Record<string, readonly string[]>> = {
  verdict: VERDICTS,
  'verdict.ratio.kind': ['virialRatio', 'clausiusRatio'] satisfies RatioKind[],
  'verdict.ratio.set': ['whole', 'bound'] satisfies SetName[],
  'settings.softening.kernel': ['none', 'plummer', 'spline'] satisfies SofteningKernel[],
  'engine.origin': ['tree', 'direct', 'file'],
};

/** What is null for every run that has not settled. */
export const ONLY_IF_SETTLED: readonly string[] = [
  'verdict.settledAt',
  'verdict.settledAtError',
  'verdict.settledFrom',
  'verdict.independentSnapshots',
  'verdict.advisedSpacing',
  'settledAfterCrossingTimes',
];

/**
 * What a name means: `virialRatio` is short for `whole.virialRatio`; figures of the verdict may be named
 * with or without `verdict.` before them, unless the record has one of that name.
 */
export async function resolveQuantity(name: string): Promise<GateQuantity | UnknownQuantity> {
  const catalogue = await theCatalogue();
  const known = (full: string) => catalogue.scalars.get(full) ?? ofVerdict(full);
  const found = known(name) ?? known(`whole.${name}`) ?? ofVerdict(`verdict.${name}`);
  if (found !== null) return found;
  const member = /^(.*)\[([^\]]*)\]$/.exec(name);
  if (member !== null) return memberOf(catalogue, member[1], member[2]);
  if (catalogue.lists.has(name)) {
    const example = catalogue.lists.get(name)?.isByFraction === true ? '0.5' : '0';
    return { problem: `${name} is a list`, nearest: `${name}[${example}]` };
  }
  if (catalogue.scalars.has(`${name}.x`)) {
    return { problem: `${name} is a vector`, nearest: `${name}.x` };
  }
  return { problem: `unknown quantity "${name}"`, nearest: nearestQuantity(catalogue, name) };
}

/** All names that are no members of lists, in full, in the order of record and verdict. */
export async function quantityNames(): Promise<string[]> {
  const { scalars } = await theCatalogue();
  return [
    ...scalars.keys(),
    ...Object.keys(VERDICT_SCALARS).map((key) => (key === 'verdict' ? key : `verdict.${key}`)),
  ];
}

interface Catalogue {
  readonly scalars: ReadonlyMap<string, GateQuantity>;
  readonly lists: ReadonlyMap<
    string,
    { readonly isByFraction: boolean; readonly extra: ExtraName | null }
  >;
}

let catalogue: Promise<Catalogue> | null = null;
const theCatalogue = (): Promise<Catalogue> => (catalogue ??= makeCatalogue());

async function makeCatalogue(): Promise<Catalogue> {
  const extras = new Map(QUANTITIES.map(({ key, extra }) => [key, extra]));
  const ofBranch = new Map(QUANTITIES.map(({ key, extra }) => [key.split('.')[0], extra]));
  const scalars = new Map<string, GateQuantity>();
  const add = (name: string, type: ValueType, extra: ExtraName | null = null) =>
    scalars.set(name, { name, of: 'snapshot', type, extra, fraction: null });
  for (const { name, type } of await recordColumns([])) {
    if (name === 'remarks') continue;
    const extra = extras.get(name.replace(/\.[xyz]$/, '')) ?? ofBranch.get(name.split('.')[0]);
    add(name, type === 'integer' ? 'number' : type, extra ?? null);
  }
  for (const name of Object.keys(OF_SNAPSHOT)) add(name, 'number');
  for (const name of Object.keys(OF_RUN)) {
    scalars.set(name, { name, of: 'run', type: 'number', extra: null, fraction: null });
  }
  const keys = new Set(QUANTITIES.map(({ key }) => key));
  const lists = new Map<string, { isByFraction: boolean; extra: ExtraName | null }>();
  for (const { key, kind, extra } of QUANTITIES) {
    if (kind !== 'list' && kind !== 'integers') continue;
    const set = key.split('.').slice(0, -1).join('.');
    const isByFraction = keys.has(`${set}.fractions`);
    if (key === `${set}.fractions`) continue;
    lists.set(key === `${set}.radii` && isByFraction ? set : key, { isByFraction, extra });
  }
  return { scalars, lists };
}

function ofVerdict(name: string): GateQuantity | null {
  const path = name === 'verdict' ? name : name.replace(/^verdict\./, '');
  if (!name.startsWith('verdict') || !Object.hasOwn(VERDICT_SCALARS, path)) return null;
  const [type] = VERDICT_SCALARS[path];
  const full = path === 'verdict' ? path : `verdict.${path}`;
  return { name: full, of: 'run', type, extra: null, fraction: null };
}

function memberOf(
  { lists }: Catalogue,
  list: string,
  member: string,
): GateQuantity | UnknownQuantity {
  if (list === 'remarks') return remarkOf(member);
  const found = lists.get(list);
  if (found === undefined) {
    const nearest = nearestName(list, [...lists.keys(), 'remarks']);
    return {
      problem: `unknown list "${list}"`,
      nearest: nearest === null ? null : `${nearest}[${member}]`,
    };
  }
  const { isByFraction, extra } = found;
  const value = member.trim() === '' ? NaN : Number(member);
  const isGood = isByFraction ? value > 0 && value < 1 : Number.isInteger(value) && value >= 0;
  if (!isGood) {
    return {
      problem: `${list}[${member}] names no member; expected ${isByFraction ? 'a mass fraction between 0 and 1' : 'a number from 0 on'} in the brackets`,
      nearest: `${list}[${isByFraction ? '0.5' : '0'}]`,
    };
  }
  return {
    name: `${list}[${value}]`,
    of: 'snapshot',
    type: 'number',
    extra,
    fraction: isByFraction ? value : null,
  };
}

function remarkOf(code: string): GateQuantity | UnknownQuantity {
  if (REMARK_CODES.includes(code)) {
    const name = `remarks[${code}]`;
    return { name, of: 'snapshot', type: 'boolean', extra: null, fraction: null };
  }
  const nearest = nearestName(code, REMARK_CODES);
  return {
    problem: `unknown remark "${code}"`,
    nearest: nearest === null ? null : `remarks[${nearest}]`,
  };
}

/** Short names as people write them count as near, too. */
function nearestQuantity({ scalars, lists }: Catalogue, name: string): string | null {
  const shorts = [...scalars.keys()]
    .filter((key) => key.startsWith('whole.'))
    .map((key) => key.slice('whole.'.length));
  const ofRun = Object.keys(VERDICT_SCALARS);
  return nearestName(name, [
    ...shorts,
    ...scalars.keys(),
    ...ofRun,
    ...ofRun.map((key) => `verdict.${key}`),
    ...lists.keys(),
  ]);
}
