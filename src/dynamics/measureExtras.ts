/** What `--with` asks for, measured: each extra's figures and what they let one say. */
import type { Forces } from '../octree/forces.ts';
import type { Octree } from '../octree/tree.ts';
import type { Crew } from '../parallel/crew.ts';
import type { Particles, Remark } from '../snapshot/particles.ts';
import { fieldOf, type BalanceResult } from './balance.ts';
import type { BoundSet } from './bound.ts';
import { extraRemarks } from './extraRemarks.ts';
import { inertiaFigures } from './inertia.ts';
import { radiiOfMass } from './lagrangian.ts';
import { cutLayers, spreadsOf, type LayeredSet } from './layers.ts';
import { pairFigures } from './pairs.ts';
import { findPeak } from './peak.ts';
import { profileFigures } from './profiles.ts';
import type { ExtraFigures, RecordSettings, Vector } from './record.ts';
import { radialToTangential, shellFigures } from './shells.ts';

export interface ExtraInput {
  readonly particles: Particles;
  readonly settings: RecordSettings;
  readonly forces: Forces;
  readonly tree: Octree;
  readonly whole: BalanceResult;
  readonly bound: BoundSet;
  readonly boundBalance: BalanceResult;
  readonly centre: Vector;
  readonly coulombLogarithm: number | null;
  /** Room for one number a body, overwritten. */
  readonly scratch: Float64Array;
}

export interface Extras {
  readonly figures: ExtraFigures;
  readonly remarks: readonly Remark[];
}

/** Measures the extras that the settings name; none cost nothing. */
export async function measureExtras(input: ExtraInput, crew: Crew): Promise<Extras> {
  const { particles, settings, forces, tree, whole } = input;
  const wanted = settings.with.value;
  const all = { bodies: particles, member: null };
  let figures: ExtraFigures = {};
  if (wanted.includes('inertia')) {
    figures = { ...figures, ...(await inertiaFigures(all, whole, fieldOf(forces), crew)) };
  }
  if (wanted.includes('shells') || wanted.includes('profiles')) {
    figures = { ...figures, ...(await byRadius(input, crew)) };
  }
  if (wanted.includes('pairs')) {
    const { error, exact } = settings;
    const pairInput = { particles, tree, forces, whole: whole.balance };
    const effort = { errorWanted: error.value, exact: exact.value };
    figures = { ...figures, ...(await pairFigures({ ...pairInput, ...effort }, crew)) };
  }
  const softened = forces.softening.kernel !== 'none';
  return { figures, remarks: extraRemarks(figures, whole.balance, softened) };
}

/** A set that holds at least this share of the mass stands for the system. */
const MAIN_SHARE = 0.5;

/** Shells and profiles: of the bound bodies where these are most of the mass, else of all. */
async function byRadius(input: ExtraInput, crew: Crew): Promise<ExtraFigures> {
  const { particles, settings, whole, bound, boundBalance, centre, scratch } = input;
  const isBound = boundBalance.balance.mass >= MAIN_SHARE * whole.balance.mass;
  const { frame, sums } = isBound ? boundBalance : whole;
  const layered: LayeredSet = {
    set: isBound ? bound.set : { bodies: particles, member: null },
    frame,
    angularMomentum: sums.angularMomentum,
    centre,
  };
  const set = isBound ? 'bound' : 'whole';
  const { value: asked, from } = settings.shells;
  const count = shellCount(asked, from === 'default', frame.heavy);
  const layers = await cutLayers(layered, count, scratch, crew);
  const spreads = await spreadsOf(layered, layers, crew);
  const wanted = settings.with.value;
  const shells = wanted.includes('shells')
    ? { shells: shellFigures(layers, spreads.shells, set), ...radialToTangential(spreads.all) }
    : {};
  if (!wanted.includes('profiles')) return shells;
  const { mass, squaredMass } = frame;
  const profiles = profileFigures({
    layers,
    spreads: spreads.shells,
    set,
    mass,
    squaredMass,
    gravity: settings.gravity.value,
    coulombLogarithm: input.coulombLogarithm,
    peak: await peakOf(layered, scratch, crew),
  });
  return { ...shells, profiles };
}

/** Unless asked for otherwise, shells have at least so many bodies. */
const FEWEST_A_SHELL = 20;

/** The number of shells: as asked, but never more than bodies, and fewer by default of few bodies. */
export function shellCount(asked: number, isDefault: boolean, bodies: number): number {
  const most = isDefault ? Math.floor(bodies / FEWEST_A_SHELL) : bodies;
  return Math.max(1, Math.min(asked, most));
}

/** Radii that the curve of the circular velocity is looked at. */
const PEAK_RADII = 256;

async function peakOf({ set, frame, centre }: LayeredSet, scratch: Float64Array, crew: Crew) {
  const steps = Math.min(PEAK_RADII, frame.heavy);
  const fractions = Array.from({ length: steps }, (_, k) => (k + 1) / steps);
  const radii = await radiiOfMass(set, centre, frame.mass, fractions, scratch, crew);
  return findPeak(fractions, radii, (frame.mass * frame.mass) / frame.squaredMass);
}
