/**
 * Cells of bodies with softening lengths of their own.
 *
 * With Plummer's kernel a pair is softened by e² = e_i² + e_j², so e² is to expansions what place is:
 * each cell has a mean, and bodies are off it by so much. Cells are cut by e² as they are cut by place.
 */
import {
  GEOMETRY,
  NODE_BEGIN,
  NODE_CHILD,
  NODE_CHILDREN,
  NODE_END,
  NODE_GREATEST,
  NODE_LEAST,
  NODE_MASS,
  NODE_MEAN,
  NODE_FARTHEST,
  NODE_VARIANCE,
  SPREAD,
  TOPOLOGY,
  type OrderedBodies,
} from './tree.ts';
import { splineSupportOf } from './softening.ts';

/** What softening means to the expansions of two cells about each other. */
export interface PairOfCells {
  /** ε² of the cells' means; 0 without Plummer's kernel. */
  soft2: number;
  /** Distance inside which the force of some pair is not Newtonian: a spline's support, else 0. */
  support: number;
  /** Variance of ε² over the pairs of bodies, and how far it is from its mean at most. */
  variance: number;
  farthest: number;
}

/** A pair of cells where one length holds for all bodies. */
export function pairOfCells({
  soft2,
  support,
}: Pick<PairOfCells, 'soft2' | 'support'>): PairOfCells {
  return { soft2, support, variance: 0, farthest: 0 };
}

/** Sets a pair to two cells of bodies with lengths of their own. */
export function meet(
  pair: PairOfCells,
  spreadA: Float64Array,
  slotA: number,
  spreadB: Float64Array,
  slotB: number,
  isPlummer: boolean,
): void {
  const a = slotA * SPREAD;
  const b = slotB * SPREAD;
  if (isPlummer) {
    pair.soft2 = spreadA[a + NODE_MEAN] + spreadB[b + NODE_MEAN];
    pair.variance = spreadA[a + NODE_VARIANCE] + spreadB[b + NODE_VARIANCE];
    pair.farthest = spreadA[a + NODE_FARTHEST] + spreadB[b + NODE_FARTHEST];
    return;
  }
  const greatestA = spreadA[a + NODE_GREATEST];
  const greatestB = spreadB[b + NODE_GREATEST];
  pair.support = splineSupportOf(greatestA > greatestB ? greatestA : greatestB);
}

/** Deviation of ε² over d² + ε² below which it is not felt even by the finest level. */
const NOT_FELT = 1e-9;

/** Whether the terms of the spread are worth their cost, for cells at a squared distance. */
export function isSpreadFelt({ soft2, farthest }: PairOfCells, distance2: number): boolean {
  return farthest > NOT_FELT * (distance2 + soft2);
}

/** Share of a radius that the root of a deviation of e² counts as, when a cell of two is chosen to be opened. */
const ROOT_AS_RADIUS = 0.5;

/** Whether a cell is at least as wide as another, in place and in e² taken together. */
export function isWider(
  a: number,
  radiusA: number,
  spreadA: Float64Array,
  b: number,
  radiusB: number,
  spreadB: Float64Array,
): boolean {
  const rootA = Math.sqrt(spreadA[a * SPREAD + NODE_FARTHEST]);
  const rootB = Math.sqrt(spreadB[b * SPREAD + NODE_FARTHEST]);
  return radiusA + ROOT_AS_RADIUS * rootA >= radiusB + ROOT_AS_RADIUS * rootB;
}

/** Mean, spread, least and greatest e² of a leaf from its bodies. Without mass the mean is the middle. */
export function gatherSpread(
  bodies: OrderedBodies,
  slot: number,
  topology: Uint32Array,
  spread: Float64Array,
): void {
  const { mass, squares } = bodies;
  const begin = topology[slot * TOPOLOGY + NODE_BEGIN];
  const end = topology[slot * TOPOLOGY + NODE_END];
  let least = Infinity;
  let greatest = 0;
  for (let i = begin; i < end; i++) {
    const e2 = squares[i];
    if (e2 < least) least = e2;
    if (e2 > greatest) greatest = e2;
  }
  // Relative to the least, so that equal lengths have exactly their own mean.
  let m = 0;
  let sum = 0;
  for (let i = begin; i < end; i++) {
    m += mass[i];
    sum += mass[i] * (squares[i] - least);
  }
  const mean = m > 0 ? least + sum / m : (least + greatest) / 2;
  let squares2 = 0;
  for (let i = begin; i < end; i++) squares2 += mass[i] * (squares[i] - mean) ** 2;
  store(spread, slot, mean, m > 0 ? squares2 / m : 0, least, greatest);
}

/** The same for a node from its children, which must have theirs already. */
export function joinSpread(
  slot: number,
  geometry: Float64Array,
  topology: Uint32Array,
  spread: Float64Array,
): void {
  const first = topology[slot * TOPOLOGY + NODE_CHILD];
  const last = first + topology[slot * TOPOLOGY + NODE_CHILDREN];
  let least = Infinity;
  let greatest = 0;
  for (let child = first; child < last; child++) {
    least = Math.min(least, spread[child * SPREAD + NODE_LEAST]);
    greatest = Math.max(greatest, spread[child * SPREAD + NODE_GREATEST]);
  }
  let m = 0;
  let sum = 0;
  for (let child = first; child < last; child++) {
    const mc = geometry[child * GEOMETRY + NODE_MASS];
    m += mc;
    sum += mc * (spread[child * SPREAD + NODE_MEAN] - least);
  }
  const mean = m > 0 ? least + sum / m : (least + greatest) / 2;
  let squares2 = 0;
  for (let child = first; child < last; child++) {
    const mc = geometry[child * GEOMETRY + NODE_MASS];
    const c = child * SPREAD;
    squares2 += mc * (spread[c + NODE_VARIANCE] + (spread[c + NODE_MEAN] - mean) ** 2);
  }
  store(spread, slot, mean, m > 0 ? squares2 / m : 0, least, greatest);
}

function store(
  spread: Float64Array,
  slot: number,
  mean: number,
  variance: number,
  least: number,
  greatest: number,
): void {
  const s = slot * SPREAD;
  spread[s + NODE_MEAN] = mean;
  spread[s + NODE_VARIANCE] = variance;
  spread[s + NODE_FARTHEST] = Math.max(greatest - mean, mean - least);
  spread[s + NODE_LEAST] = least;
  spread[s + NODE_GREATEST] = greatest;
}

/** Bodies whose e² differ by less than this share of their sum need not be told apart however near they are. */
const NEARLY_EQUAL = 0.4;
/**
 * Range of e² over h², and variance over h⁴, with h half the width of a cell, above which the cell is cut
 * by e² rather than by place. Cells meet at some five h: there the spread would spoil their expansions.
 */
const WIDE_RANGE = 3;
const WIDE_VARIANCE = 0.3;
/** The same range for a cell that is small enough to be a leaf. */
const WIDE_IN_LEAF = 20;

/** Spread of the e² of some bodies. */
export interface Spread {
  readonly least: number;
  readonly greatest: number;
  /** By mass. */
  readonly variance: number;
}

export function spreadOf(
  squares: Float64Array,
  mass: Float64Array,
  begin: number,
  end: number,
): Spread {
  const origin = squares[begin];
  let least = origin;
  let greatest = origin;
  let m = 0;
  let first = 0;
  let second = 0;
  for (let i = begin; i < end; i++) {
    const e2 = squares[i];
    if (e2 < least) least = e2;
    if (e2 > greatest) greatest = e2;
    const d = e2 - origin;
    m += mass[i];
    first += mass[i] * d;
    second += mass[i] * d * d;
  }
  return { least, greatest, variance: m > 0 ? second / m - (first / m) ** 2 : 0 };
}

/**
 * The e² at which to cut a cell in two; NaN if it is to be cut by place.
 * @param half - half width of the cell
 * @param isFew - its bodies would fit into a leaf
 */
export function whereToCut(
  { least, greatest, variance }: Spread,
  half: number,
  isFew: boolean,
): number {
  const range = greatest - least;
  if (!(range > NEARLY_EQUAL * (greatest + least))) return NaN;
  const h2 = half * half;
  const isWide = isFew
    ? range > WIDE_IN_LEAF * h2
    : range > WIDE_RANGE * h2 || variance > WIDE_VARIANCE * h2 * h2;
  if (!isWide) return NaN;
  const middle = least + range / 2;
  return middle < greatest ? middle : least;
}

/**
 * Spreads that a level of the walk bears, as variance of ε² over u² and largest deviation over u, with
 * u = d² + ε². What is left out of an expansion goes with these: in the second power the extent of the
 * cells beyond its second order, and the fifth power.
 */
export function spreadLimits(tolerance: number): {
  readonly varianceLimit: number;
  readonly farthestLimit: number;
} {
  return { varianceLimit: 50 * tolerance, farthestLimit: Math.min(1, 4 * tolerance ** 0.2) };
}
