/** What external fields add to W and to the energy, and the Jacobi radius in their tide. */
import { CompensatedSum } from '../numerics/compensated.ts';
import { eigenvalues, externalAt, tidalTensor, type ExternalField } from '../models/external.ts';
import type { Particles, Remark } from '../snapshot/particles.ts';
import type { Balance, Vector } from './record.ts';

export interface ExternalFigures {
  /** The fields, as stated. */
  readonly fields: readonly ExternalField[];
  /** Σ m φ of the fields, each body's in full [mass · velocity²]. */
  readonly potential: number;
  /** Σ m (x − x_c)·a of the fields about the centre of mass [mass · velocity²]. */
  readonly clausius: number;
  /** T + U + Σ m φ, T about the mean velocity of the bodies [mass · velocity²]. */
  readonly energy: number;
  /** 2T/|W| with the fields' share in W; null if that sum is not below 0. */
  readonly clausiusRatio: number | null;
  /** (G m/(λ₁ − λ₂))^⅓, m of the bound bodies, λ of the tide at the centre of mass; null without a tide. */
  readonly jacobiRadius: number | null;
  /** Mass farther from the centre than that. */
  readonly massBeyond: number | null;
}

export interface ExternalInput {
  readonly particles: Particles;
  readonly gravity: number;
  readonly whole: Balance;
  readonly boundMass: number;
  readonly centreOfMass: Vector;
  readonly centre: Vector;
  readonly halfMassRadius: number;
}

/**
 * Sums over all bodies. For a circular orbit in a spherical field, or in the plane of a flat one, λ₂ of the
 * tidal tensor is −Ω², so that r_J is that of King 1962, AJ 67, 471: (m/3M)^⅓ R about a point mass.
 * On other orbits it is the value that a circular one at this place would have.
 */
export function externalFigures(
  fields: readonly ExternalField[],
  input: ExternalInput,
): ExternalFigures {
  const { particles, gravity, whole, boundMass, centreOfMass, centre } = input;
  const { mass, x, y, z, count } = particles;
  const potential = new CompensatedSum();
  const clausius = new CompensatedSum();
  const [cx, cy, cz] = centreOfMass;
  for (let i = 0; i < count; i++) {
    const [phi, ax, ay, az] = externalAt(fields, gravity, x[i], y[i], z[i]);
    potential.add(mass[i] * phi);
    clausius.add(mass[i] * ((x[i] - cx) * ax + (y[i] - cy) * ay + (z[i] - cz) * az));
  }
  const all = whole.clausius + clausius.value();
  const size = sizeOf(fields, centreOfMass, input.halfMassRadius);
  const [first, second] = eigenvalues(tidalTensor(fields, gravity, centreOfMass, size));
  const tide = first - second;
  const jacobiRadius = tide > 0 && boundMass > 0 ? Math.cbrt((gravity * boundMass) / tide) : null;
  return {
    fields,
    potential: potential.value(),
    clausius: clausius.value(),
    energy: whole.energy + potential.value(),
    clausiusRatio: all < 0 ? (2 * whole.kinetic) / -all : null,
    jacobiRadius,
    massBeyond: jacobiRadius === null ? null : beyond(particles, centre, jacobiRadius),
  };
}

/** A length over which the fields are smooth at a place. */
function sizeOf(fields: readonly ExternalField[], [x, y, z]: Vector, radius: number): number {
  const distances = fields
    .filter(({ form }) => form !== 'tide')
    .map(({ centre: [cx, cy, cz] = [0, 0, 0] }) => Math.hypot(x - cx, y - cy, z - cz))
    .filter((distance) => distance > 0);
  return distances.length > 0 ? Math.min(...distances) : radius > 0 ? radius : 1;
}

function beyond({ mass, x, y, z, count }: Particles, [cx, cy, cz]: Vector, radius: number): number {
  const sum = new CompensatedSum();
  for (let i = 0; i < count; i++) {
    if (Math.hypot(x[i] - cx, y[i] - cy, z[i] - cz) > radius) sum.add(mass[i]);
  }
  return sum.value();
}

/** What the fields change, in figures. */
export function externalRemark(figures: ExternalFigures): Remark {
  const { clausius, potential, energy, clausiusRatio, jacobiRadius, massBeyond } = figures;
  const short = (value: number | null) =>
    value === null ? 'none' : String(Number(value.toPrecision(5)));
  const jacobi =
    jacobiRadius === null
      ? ''
      : `; the Jacobi radius is ${short(jacobiRadius)}, and ${short(massBeyond)} of the mass lies beyond it`;
  return {
    code: 'externalField',
    text: `With the external fields 2T/|W| is ${short(clausiusRatio)} and the energy ${short(energy)}: they add ${short(clausius)} to W and ${short(potential)} to the energy${jacobi}.`,
    remedy:
      'Compare external.clausiusRatio with 1: the other figures, the bound set among them, are of the forces between the bodies alone.',
  };
}
