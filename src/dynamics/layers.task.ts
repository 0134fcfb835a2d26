/**
 * Sums over bodies by radius, chunk by chunk: each job writes its chunk's rows, which are then added in
 * chunk order, so that the same bits come out for any number of threads.
 */
import type { TakeJob } from '../parallel/crew.ts';
import { SUM_CHUNK, type Bodies } from './sums.task.ts';

export interface LayerRound {
  readonly bodies: Bodies;
  /** 1 for the bodies that belong to the set; null for all. Bodies without mass never do. */
  readonly member: Uint8Array | null;
  readonly centre: Float64Array;
  /** Mean velocity of the set. */
  readonly velocity: Float64Array;
  /** Unit vector of the axis of rotation, or three zeros if there is none. */
  readonly axis: Float64Array;
  /** Squared radii between layers, ascending; one layer more than numbers. */
  readonly edges2: Float64Array;
  readonly partial: Float64Array;
}

/** Numbers a layer of {@link sumStreams}: bodies, Σm, Σm², Σm v_r, Σm v_φ, Σm/r, Σm/r². */
export const STREAM_SUMS = 7;

export function sumStreams(round: LayerRound, takeJob: TakeJob): void {
  const { mass } = round.bodies;
  const layerOf = motionIn(round);
  eachChunk(round, takeJob, (i, row) => {
    const at = layerOf(i) * STREAM_SUMS;
    const m = mass[i];
    row[at] += 1;
    row[at + 1] += m;
    row[at + 2] += m * m;
    row[at + 3] += m * motion[1];
    row[at + 4] += m * motion[2];
    if (motion[0] > 0) {
      row[at + 5] += m / motion[0];
      row[at + 6] += m / motion[0] / motion[0];
    }
  });
}

export interface SpreadRound extends LayerRound {
  /** Mean radial and azimuthal velocity of each layer. */
  readonly streams: Float64Array;
}

/**
 * Numbers a layer of {@link sumSpreads}, with a = (v_r − ⟨v_r⟩)², b = (v_φ − ⟨v_φ⟩)² and t the tangential
 * square about the streaming: Σm a, Σm t, Σm²a, Σm²b, Σm²t, Σm²a², Σm²t², Σm²a t. One more row of the
 * same length has all layers together with their streaming, v_r² for a and v_t² for t, and 0 for b.
 */
export const SPREAD_SUMS = 8;

export function sumSpreads(round: SpreadRound, takeJob: TakeJob): void {
  const { streams } = round;
  const { mass } = round.bodies;
  const all = (round.edges2.length + 1) * SPREAD_SUMS;
  const layerOf = motionIn(round);
  eachChunk(round, takeJob, (i, row) => {
    const layer = layerOf(i);
    const at = layer * SPREAD_SUMS;
    const m = mass[i];
    const m2 = m * m;
    const radial = motion[1];
    const azimuthal = motion[2];
    const tangential2 = motion[3];
    const d = radial - streams[2 * layer];
    const e = azimuthal - streams[2 * layer + 1];
    const a = d * d;
    const b = e * e;
    const t = Math.max(0, tangential2 - azimuthal * azimuthal) + b;
    row[at] += m * a;
    row[at + 1] += m * t;
    row[at + 2] += m2 * a;
    row[at + 3] += m2 * b;
    row[at + 4] += m2 * t;
    row[at + 5] += m2 * a * a;
    row[at + 6] += m2 * t * t;
    row[at + 7] += m2 * a * t;
    const r = radial * radial;
    row[all] += m * r;
    row[all + 1] += m * tangential2;
    row[all + 2] += m2 * r;
    row[all + 4] += m2 * tangential2;
    row[all + 5] += m2 * r * r;
    row[all + 6] += m2 * tangential2 * tangential2;
    row[all + 7] += m2 * r * tangential2;
  });
}

/** Of the body looked at last: radius, v_r, v_φ, and the square of the velocity across the radius. */
const motion = new Float64Array(4);

/** Fills {@link motion} with body i's and returns its layer. */
function motionIn({ bodies, centre, velocity, axis, edges2 }: LayerRound): (i: number) => number {
  const { x, y, z, vx, vy, vz } = bodies;
  const [cx, cy, cz] = centre;
  const [cvx, cvy, cvz] = velocity;
  const [nx, ny, nz] = axis;
  return (i) => {
    const dx = x[i] - cx;
    const dy = y[i] - cy;
    const dz = z[i] - cz;
    const ux = vx[i] - cvx;
    const uy = vy[i] - cvy;
    const uz = vz[i] - cvz;
    const r2 = dx * dx + dy * dy + dz * dz;
    let low = 0;
    let high = edges2.length;
    while (low < high) {
      const mid = (low + high) >>> 1;
      if (edges2[mid] <= r2) low = mid + 1;
      else high = mid;
    }
    const r = Math.sqrt(r2);
    motion[0] = r;
    if (!(r > 0)) {
      // At the centre every direction is as good as another.
      motion[1] = ux;
      motion[2] = 0;
      motion[3] = uy * uy + uz * uz;
      return low;
    }
    motion[1] = (ux * dx + uy * dy + uz * dz) / r;
    const wx = ny * dz - nz * dy;
    const wy = nz * dx - nx * dz;
    const wz = nx * dy - ny * dx;
    const arm = Math.sqrt(wx * wx + wy * wy + wz * wz);
    motion[2] = arm > 0 ? (ux * wx + uy * wy + uz * wz) / arm : 0;
    // |d × u|/r loses no digits to a difference of squares.
    const lx = dy * uz - dz * uy;
    const ly = dz * ux - dx * uz;
    const lz = dx * uy - dy * ux;
    motion[3] = (lx * lx + ly * ly + lz * lz) / r2;
    return low;
  };
}

function eachChunk(
  { bodies, member, partial }: LayerRound,
  takeJob: TakeJob,
  add: (i: number, row: Float64Array) => void,
): void {
  const { count, mass } = bodies;
  const width = partial.length / Math.ceil(count / SUM_CHUNK);
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    const row = partial.subarray(job * width, (job + 1) * width);
    const end = Math.min(count, (job + 1) * SUM_CHUNK);
    for (let i = job * SUM_CHUNK; i < end; i++) {
      if (mass[i] === 0 || (member !== null && member[i] === 0)) continue;
      add(i, row);
    }
  }
}
