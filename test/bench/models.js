/** The sets of bodies of the benchmark: seeded, G = 1, of mass 1 and scale length 1. */
import { makeModel } from '../../dist/models/make.js';
import { Random } from '../../dist/numerics/random.js';
import { allocateColumn } from '../../dist/snapshot/particles.js';

const SEED = 1;
const CLUMP_DISTANCE = 10;
const DISC_HEIGHT = 0.01;
const MASS_DECADES = 6;
const FAR = 1e12;
const SOFTENING_LENGTH = 0.01;
export const NONE = { kernel: 'none', length: 0 };

/** Name → how to make the bodies, and the softening they are measured with. */
export const MODELS = {
  plummer: { make: plummer },
  hernquist: { make: (count) => sphere('hernquist', count, SEED) },
  jaffe: { make: jaffe },
  clumps: { make: clumps },
  disc: { make: disc },
  masses: { make: masses },
  outlier: { make: outlier },
  'plummer-softened': { make: plummer, softening: softenedBy('plummer') },
  'spline-softened': { make: plummer, softening: softenedBy('spline') },
};

export const softeningOf = (model) => MODELS[model].softening ?? NONE;

function softenedBy(kernel) {
  return { kernel, length: SOFTENING_LENGTH };
}

function sphere(model, count, seed) {
  return makeModel({ model, count, seed, masses: 'equal' });
}

function plummer(count) {
  return sphere('plummer', count, SEED);
}

/** Two Plummer spheres of half the bodies each, at rest, some scale lengths apart. */
function clumps(count) {
  const first = Math.ceil(count / 2);
  const halves = [sphere('plummer', first, SEED), sphere('plummer', count - first, SEED + 1)];
  const both = blank('two clumps', count);
  for (const name of ['x', 'y', 'z', 'vx', 'vy', 'vz']) {
    both[name].set(halves[0][name], 0);
    both[name].set(halves[1][name], first);
  }
  for (let i = first; i < count; i++) both.x[i] += CLUMP_DISTANCE;
  // Each has half the mass.
  for (const name of ['vx', 'vy', 'vz']) {
    for (let i = 0; i < count; i++) both[name][i] *= Math.SQRT1_2;
  }
  return both;
}

/** Masses independent of place, as many in each decade. */
function masses(count) {
  const particles = plummer(count);
  const random = new Random(SEED).family(2);
  let total = 0;
  for (let i = 0; i < count; i++) {
    particles.mass[i] = 10 ** (-MASS_DECADES * random.uniform());
    total += particles.mass[i];
  }
  for (let i = 0; i < count; i++) particles.mass[i] /= total;
  return particles;
}

/** One star has gone far away. */
function outlier(count) {
  const particles = plummer(count);
  const middle = count >> 1;
  particles.x[middle] = FAR;
  return particles;
}

/**
 * Jaffe's sphere without a cut: M(r) = r/(1 + r), φ = −ln(1 + 1/r). Source: Jaffe 1983, MNRAS 202, 995.
 * Speeds have ⟨v²⟩ = |φ|/2 at every place, which makes 2T = |U|; their distribution is uniform in v³,
 * simple and below the speed of escape, and not that of an equilibrium.
 */
function jaffe(count) {
  const particles = blank('jaffe', count);
  const random = new Random(SEED);
  const direction = new Float64Array(3);
  const { x, y, z, vx, vy, vz } = particles;
  for (let i = 0; i < count; i++) {
    const f = random.openUniform();
    const r = f / (1 - f);
    random.unitVector(direction);
    x[i] = r * direction[0];
    y[i] = r * direction[1];
    z[i] = r * direction[2];
    // A ball of radius V has ⟨v²⟩ = 3/5 V².
    const greatest = Math.sqrt((5 / 6) * Math.log1p(1 / r));
    const speed = greatest * Math.cbrt(random.uniform());
    random.unitVector(direction);
    vx[i] = speed * direction[0];
    vy[i] = speed * direction[1];
    vz[i] = speed * direction[2];
  }
  return particles;
}

/**
 * A disc with surface density ∝ e^(−R) and density across it ∝ e^(−|z|/h), on circles with the speed
 * that the mass within R would give if it were a sphere.
 */
function disc(count) {
  const particles = blank('thin disc', count);
  const random = new Random(SEED);
  const { x, y, z, vx, vy, vz } = particles;
  for (let i = 0; i < count; i++) {
    // R e^(−R) is the density of the sum of two exponential deviates.
    const radius = -Math.log(random.openUniform() * random.openUniform());
    const angle = 2 * Math.PI * random.uniform();
    const side = random.uniform() < 0.5 ? -1 : 1;
    const inside = 1 - (1 + radius) * Math.exp(-radius);
    const speed = Math.sqrt(inside / radius);
    x[i] = radius * Math.cos(angle);
    y[i] = radius * Math.sin(angle);
    z[i] = -side * DISC_HEIGHT * Math.log(random.openUniform());
    vx[i] = -speed * Math.sin(angle);
    vy[i] = speed * Math.cos(angle);
    vz[i] = 0;
  }
  return particles;
}

/** Columns to be filled, with equal masses. */
function blank(file, count) {
  const column = () => allocateColumn(count);
  const mass = column().fill(1 / count);
  return {
    count,
    mass,
    x: column(),
    y: column(),
    z: column(),
    vx: column(),
    vy: column(),
    vz: column(),
    columns: {},
    componentNames: [],
    time: 0,
    units: null,
    gravity: 1,
    softening: null,
    frame: { kind: 'physical' },
    origin: { file, format: 'made', mantissaBits: 53, remarks: [] },
  };
}
