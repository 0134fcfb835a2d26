/**
 * Profiles by radius: density, enclosed mass, circular and escape velocity, local relaxation time.
 *
 * Densities are means over the middle half of each shell of equal number, dispersions over all of it;
 * enclosed mass, circular and escape velocity are at the radii that halve the bodies of each shell.
 * Sources: textbook forms; relaxation time of Binney & Tremaine 2008, eq. 7.106 (from memory); errors
 * from the scatter of numbers and masses by radius, docs/methods.md.
 */
import { LAYERS, ofShell, type Layers, type Spread } from './layers.ts';
import type { Peak } from './peak.ts';
import type { Shells } from './shells.ts';
import { localRelaxationTime } from './times.ts';

type Figures = readonly (number | null)[];

/** Figures from the innermost shell outward; null where a shell has none. */
export interface Profiles {
  /** Which bodies the profiles are of. */
  readonly set: Shells['set'];
  /** Radii that hold a quarter, half and three quarters of each shell's bodies. */
  readonly inner: readonly number[];
  readonly radii: readonly number[];
  readonly outer: readonly number[];
  readonly density: Figures;
  readonly densityErrors: Figures;
  readonly enclosedMass: Figures;
  readonly enclosedMassErrors: Figures;
  readonly circularVelocity: Figures;
  readonly circularVelocityErrors: Figures;
  readonly escapeVelocity: Figures;
  readonly escapeVelocityErrors: Figures;
  readonly relaxationTime: Figures;
  readonly relaxationTimeErrors: Figures;
  readonly peakVelocity: number | null;
  readonly peakVelocityError: number | null;
  readonly peakRadius: number | null;
  readonly peakRadiusError: number | null;
}

export interface ProfileInput {
  readonly layers: Layers;
  readonly spreads: readonly Spread[];
  readonly set: Shells['set'];
  /** Mass of the set and Σm². */
  readonly mass: number;
  readonly squaredMass: number;
  readonly gravity: number;
  readonly coulombLogarithm: number | null;
  readonly peak: Peak | null;
}

/** Of fewer effective bodies, (Σm)²/Σm², a shell's dispersion says nothing. */
const FEWEST = 3;

/** Number of layers inside the radius that halves shell k. */
const middle = (k: number) => LAYERS * (k + 1 / 2);

interface Figure {
  readonly value: number;
  readonly error: number;
}

/** All profiles of the record. */
export function profileFigures(input: ProfileInput): Profiles {
  const { layers, spreads, gravity, peak, mass } = input;
  // The middle half of a shell: what is far from its middle radius would blur a steep profile.
  const border = (quarters: number) =>
    spreads.map((_, k) => layers.outer[LAYERS * k + (quarters * LAYERS) / 4 - 1]);
  const [inner, radii, outer] = [border(1), border(2), border(3)];
  const each = (figureOf: (k: number) => Figure | null) => radii.map((_, k) => figureOf(k));
  const values = (figures: (Figure | null)[]) => figures.map((figure) => figure?.value ?? null);
  const errors = (figures: (Figure | null)[]) => figures.map((figure) => figure?.error ?? null);
  const density = each((k) => densityOf(input, inner[k], outer[k], k));
  const enclosed = each((k) => enclosedIn(input, k));
  const circular = each((k) => circularAt(enclosed[k], radii[k], gravity));
  const escape = each((k) => escapeFrom(input, radii[k], k));
  const relaxation = each((k) => relaxationIn(input, density[k], k));
  const peakVelocity = peak === null ? null : Math.sqrt(gravity * mass * peak.height);
  return {
    set: input.set,
    inner,
    radii,
    outer,
    density: values(density),
    densityErrors: errors(density),
    enclosedMass: values(enclosed),
    enclosedMassErrors: errors(enclosed),
    circularVelocity: values(circular),
    circularVelocityErrors: errors(circular),
    escapeVelocity: values(escape),
    escapeVelocityErrors: errors(escape),
    relaxationTime: values(relaxation),
    relaxationTimeErrors: errors(relaxation),
    peakVelocity,
    peakVelocityError:
      peak === null || peakVelocity === null
        ? null
        : (peakVelocity * peak.heightError) / (2 * peak.height),
    peakRadius: peak === null ? null : peak.radius,
    peakRadiusError: peak === null ? null : peak.radiusError,
  };
}

/** Mass over volume of the middle half; the mass in a given volume scatters as a binomial number does. */
function densityOf(
  { layers, mass }: ProfileInput,
  inner: number,
  outer: number,
  k: number,
): Figure | null {
  let own = 0;
  let own2 = 0;
  for (let layer = (k + 1 / 4) * LAYERS; layer < (k + 3 / 4) * LAYERS; layer++) {
    own += layers.mass[layer];
    own2 += layers.squaredMass[layer];
  }
  const volume =
    (4 / 3) * Math.PI * (outer - inner) * (outer * outer + outer * inner + inner * inner);
  if (!(volume > 0) || !(own > 0)) return null;
  return { value: own / volume, error: Math.sqrt(own2 * Math.max(0, 1 - own / mass)) / volume };
}

/** Mass inside the radius that halves shell k; f = M(r)/M scatters by f² Σ_out m² + (1 − f)² Σ_in m². */
function enclosedIn({ layers, mass, squaredMass }: ProfileInput, k: number): Figure {
  let inside = 0;
  let inside2 = 0;
  for (let layer = 0; layer < middle(k); layer++) {
    inside += layers.mass[layer];
    inside2 += layers.squaredMass[layer];
  }
  const f = inside / mass;
  const variance = (1 - f) ** 2 * inside2 + f * f * (squaredMass - inside2);
  return { value: inside, error: Math.sqrt(Math.max(0, variance)) };
}

function circularAt(enclosed: Figure | null, radius: number, gravity: number): Figure | null {
  if (enclosed === null || !(radius > 0) || !(enclosed.value > 0)) return null;
  const value = Math.sqrt((gravity * enclosed.value) / radius);
  return { value, error: (value * enclosed.error) / (2 * enclosed.value) };
}

/**
 * √(2G [M(r)/r + Σ m/r_i outside r]): φ averaged over the sphere of radius r. It scatters as a sum over
 * bodies of mass over radius or, inside r, over r.
 */
function escapeFrom(
  { layers, gravity, mass }: ProfileInput,
  radius: number,
  k: number,
): Figure | null {
  if (!(radius > 0)) return null;
  const isInside = (layer: number) => layer < middle(k) || layers.mass[layer] === 0;
  const seen = Array.from(layers.mass, (m, layer) =>
    isInside(layer) ? 1 / radius : layers.inverse[layer] / m,
  );
  const depth = seen.reduce((sum, g, layer) => sum + g * layers.mass[layer], 0);
  const variance = seen.reduce((sum, g, layer) => {
    const spread = isInside(layer)
      ? 0
      : Math.max(0, layers.inverseSquare[layer] / layers.mass[layer] - g * g);
    return sum + ((g - depth / mass) ** 2 + spread) * layers.squaredMass[layer];
  }, 0);
  const value = Math.sqrt(2 * gravity * depth);
  return { value, error: (gravity * Math.sqrt(variance)) / value };
}

/** Local relaxation time with m = Σm²/Σm, the mass of field bodies that encounters feel. */
function relaxationIn(
  { layers, spreads, gravity, coulombLogarithm }: ProfileInput,
  density: Figure | null,
  k: number,
): Figure | null {
  if (coulombLogarithm === null || density === null || !(density.value > 0)) return null;
  const mass = ofShell(layers.mass, k);
  const squaredMass = ofShell(layers.squaredMass, k);
  const share = squaredMass / (mass * mass);
  if (!(share * FEWEST <= 1)) return null;
  const { radial, tangential, radial2, tangential2, radial4, tangential4, mixed4 } = spreads[k];
  const sum = radial + tangential;
  if (!(sum > 0)) return null;
  // Two of the three components have means taken out that come from the same bodies.
  const square = sum / (3 * mass * (1 - (2 / 3) * share));
  const perMass = sum / mass;
  const variance =
    radial4 +
    2 * mixed4 +
    tangential4 -
    2 * perMass * (radial2 + tangential2) +
    perMass ** 2 * squaredMass;
  const value = localRelaxationTime(
    Math.sqrt(square),
    squaredMass / mass,
    density.value,
    gravity,
    coulombLogarithm,
  );
  const ofDispersion = (1.5 * Math.sqrt(Math.max(0, variance))) / sum;
  return { value, error: value * Math.hypot(ofDispersion, density.error / density.value) };
}
