/** A distribution function as a table, and speeds drawn from it at any radius. */
import type { Random } from '../numerics/random.ts';
import { logDistribution, NegativeDistribution } from './inversion.ts';
import type { Profile, Well } from './model.ts';

/** Step of ln r_Q where the profile bends; it grows outside, where power laws reign. */
const STEP = 0.02;
/** Share of the distance to an edge by which nodes go near it, and how near in ln r they come. */
const EDGE_SHARE = 0.04;
const EDGE_GAP = 1e-6;
/** One body in 2^53 is drawn nearer to the centre than the radius of this mass fraction, or farther out. */
const LAST_FRACTION = 2 ** -53;
/** Below this radius squares of lengths leave the range of doubles. */
export const LEAST_RADIUS = 1e-120;
/** How far in ln r the table goes beyond the farthest body: r_Q beyond that have a share below e^−20. */
const BEYOND = 40;

/** A density in ln r_Q to draw from: its values at the nodes, between which it is a power law. */
class Proposal {
  private readonly nodes: Float64Array;
  private readonly weight: Float64Array;
  /** Integral from each node outwards. */
  private readonly outside: Float64Array;
  /** d ln weight/d ln r_Q from node k to node k + 1. */
  private readonly slope: Float64Array;

  /** @param nodes - ln r_Q, ascending */
  constructor(nodes: Float64Array, weight: Float64Array) {
    this.nodes = nodes;
    this.weight = weight;
    this.outside = new Float64Array(nodes.length);
    this.slope = new Float64Array(nodes.length);
    for (let k = nodes.length - 2; k >= 0; k--) {
      const width = nodes[k + 1] - nodes[k];
      this.slope[k] = Math.log(weight[k + 1] / weight[k]) / width;
      this.outside[k] = this.outside[k + 1] + this.partOf(k, width);
    }
  }

  /** Integral from x outwards, x in cell `first`. */
  beyond(first: number, x: number): number {
    return this.outside[first + 1] + this.partOf(first, this.nodes[first + 1] - x);
  }

  /** The x in cell `first` or farther out from which the integral outwards is `part`. */
  placeOf(part: number, first: number): number {
    const cell = cellOfPart(this.outside, part, first, this.nodes.length - 1);
    return this.nodes[cell + 1] - this.reachOf(cell, part - this.outside[cell + 1]);
  }

  /** Integral of the weight over the `reach` before node `cell` + 1. */
  private partOf(cell: number, reach: number): number {
    const slope = this.slope[cell];
    const end = this.weight[cell + 1];
    return slope === 0 ? end * reach : (-end * Math.expm1(-slope * reach)) / slope;
  }

  /** The inverse of {@link partOf}. */
  private reachOf(cell: number, part: number): number {
    const slope = this.slope[cell];
    const scaled = part / this.weight[cell + 1];
    return slope === 0 ? scaled : -Math.log1p(-slope * scaled) / slope;
  }
}

export class DistributionFunction {
  private readonly well: Well;
  /** ln r_Q, ascending. */
  private readonly nodes: Float64Array;
  /** f v_c², and the same times the root of the depth below r_Q; the latter null in a well without bottom. */
  private readonly plain: Proposal;
  private readonly rooted: Proposal | null;

  /**
   * @param profile - density, and @param well - the well of all mass, in the same units
   * @param anisotropyRadius - r_a of Osipkov and Merritt; Infinity for isotropic velocities
   * @throws NegativeDistribution if f is negative somewhere
   */
  constructor(profile: Profile, well: Well, anisotropyRadius = Infinity) {
    this.well = well;
    this.nodes = nodesOf(profile, well, anisotropyRadius);
    const plain = new Float64Array(this.nodes.length);
    const rooted = new Float64Array(this.nodes.length);
    for (let k = this.nodes.length - 1; k >= 0; k--) {
      const r = Math.exp(this.nodes[k]);
      const logValue = logDistribution(profile, well, anisotropyRadius, r);
      if (Number.isNaN(logValue)) throw new NegativeDistribution(r);
      plain[k] = Math.exp(logValue) * (well.enclosedMass(r) / r);
      rooted[k] = plain[k] * Math.sqrt(well.depthBelow(r));
    }
    this.plain = new Proposal(this.nodes, plain);
    const hasBottom = well.depthBelow(profile.scales[0]) < Infinity;
    this.rooted = hasBottom ? new Proposal(this.nodes, rooted) : null;
  }

  /**
   * Speed at radius r in the coordinates in which f is isotropic: the radial velocity is that of an
   * isotropic vector of this length, the tangential one that over √(1 + r²/r_a²) (Merritt 1985).
   *
   * At r the density in ln r_Q is f v_c² √(ψ(r) − ψ(r_Q)), v_c² = M/r at r_Q. A proposal that does not know
   * r serves all radii, and rejection leaves what is wanted: one has √(ψ(0) − ψ(r_Q)) for the root, which
   * is good near the bottom of a well; the other has none, which is good far above it, and where there is
   * no bottom.
   */
  drawSpeed(r: number, random: Random): number {
    const { nodes, well } = this;
    const last = nodes.length - 1;
    const x = Math.log(r);
    if (x >= nodes[last]) return 0;
    const first = cellAbove(nodes, x, last);
    const start = Math.max(x, nodes[0]);
    const depth = well.depthBelow(r);
    const whole = well.potentialDrop(r, nodes[last] - x);
    const isDeep = this.rooted !== null && depth < whole;
    const proposal = isDeep ? this.rooted : this.plain;
    const all = proposal.beyond(first, start);
    if (Number.isNaN(all)) throw new RangeError(`the distribution function at r = ${r} is NaN`);
    const potential = well.potential(r);
    for (;;) {
      const at = proposal.placeOf(all * random.openUniform(), first);
      const chance = random.uniform();
      // ψ(r) − ψ(r_Q) over its bound; rounding is of no weight here, but would be for slow bodies.
      const share = isDeep
        ? 1 - depth / well.depthBelow(Math.exp(at))
        : (well.potential(Math.exp(at)) - potential) / whole;
      if (chance * chance < share) return Math.sqrt(2 * well.potentialDrop(r, Math.max(0, at - x)));
    }
  }
}

function nodesOf(profile: Profile, well: Well, anisotropyRadius: number): Float64Array {
  const bends = [...profile.scales, ...well.scales, anisotropyRadius].filter(Number.isFinite);
  const bendsBegin = Math.log(Math.min(...bends)) - 2;
  const bendsEnd = Math.log(Math.max(...bends)) + 2;
  const edge = Math.log(profile.edge);
  const begin = Math.log(Math.max(LEAST_RADIUS, profile.radiusOfMass(LAST_FRACTION)));
  const end =
    edge < Infinity ? edge - EDGE_GAP : Math.log(profile.radiusOfMass(1 - LAST_FRACTION)) + BEYOND;
  const nodes = [];
  for (let x = begin; x < end;) {
    nodes.push(x);
    const away = Math.max(0, bendsBegin - x, x - bendsEnd);
    x += Math.min(STEP * (1 + away / 3), EDGE_SHARE * (edge - x));
  }
  nodes.push(end);
  return Float64Array.from(nodes);
}

/** The last cell whose lower node is not above x; 0 for x below all. */
function cellAbove(nodes: Float64Array, x: number, last: number): number {
  let low = 0;
  let high = last;
  while (high - low > 1) {
    const middle = (low + high) >>> 1;
    if (nodes[middle] <= x) low = middle;
    else high = middle;
  }
  return low;
}

/** The cell of [first, last) in which the integral from outside reaches `part`. */
function cellOfPart(outside: Float64Array, part: number, first: number, last: number): number {
  let low = first;
  let high = last;
  while (high - low > 1) {
    const middle = (low + high) >>> 1;
    if (outside[middle] > part) low = middle;
    else high = middle;
  }
  return low;
}
