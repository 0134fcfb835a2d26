/**
 * External fields: potentials that are not those of the bodies, by closed forms.
 *
 * Sources: Plummer 1911, MNRAS 71, 460; Navarro, Frenk & White 1997, ApJ 490, 493; Miyamoto & Nagai 1975,
 * PASJ 27, 533; logarithmic: Binney & Tremaine 2008, Galactic Dynamics, section 2.3.2 (from memory).
 */
import { plummer } from './plummer.ts';

type Triple = readonly [number, number, number];

/** Lengths, masses and speeds in the units of the snapshot; `centre` is the origin if not given. */
export type ExternalField = { readonly centre?: Triple } & (
  | { readonly form: 'pointMass'; readonly mass: number }
  | { readonly form: 'plummer'; readonly mass: number; readonly scaleRadius: number }
  /** `mass` is that within the radius `within`; all of it has no end. */
  | {
      readonly form: 'nfw';
      readonly mass: number;
      readonly within: number;
      readonly scaleRadius: number;
    }
  /** ½ v² ln(r_c² + R² + z²/q²): circular speed `speed` far out. */
  | {
      readonly form: 'logarithmic';
      readonly speed: number;
      readonly coreRadius: number;
      readonly flattening?: number;
    }
  /** −GM/√(R² + (a + √(z² + b²))²), its plane z = 0. */
  | {
      readonly form: 'miyamotoNagai';
      readonly mass: number;
      readonly scaleLength: number;
      readonly scaleHeight: number;
    }
  /** a = T (x − centre), T symmetric: xx, yy, zz, xy, xz, yz. */
  | { readonly form: 'tide'; readonly tensor: readonly number[] }
);

/** Potential and acceleration at a point: φ, ax, ay, az. */
export type FieldValue = [phi: number, ax: number, ay: number, az: number];

/**
 * The sum of fields at a point.
 * @returns φ [velocity²], 0 far away where the field allows it, and the acceleration [velocity²/length]
 */
export function externalAt(
  fields: readonly ExternalField[],
  gravity: number,
  x: number,
  y: number,
  z: number,
): FieldValue {
  const sum: FieldValue = [0, 0, 0, 0];
  for (const field of fields) {
    const [cx, cy, cz] = field.centre ?? [0, 0, 0];
    const value = valueOf(field, gravity, x - cx, y - cy, z - cz);
    for (let k = 0; k < 4; k++) sum[k] += value[k];
  }
  return sum;
}

function valueOf(field: ExternalField, G: number, x: number, y: number, z: number): FieldValue {
  const r = Math.hypot(x, y, z);
  /** @param pull - acceleration inwards over r */
  const central = (phi: number, pull: number): FieldValue => [phi, -pull * x, -pull * y, -pull * z];
  switch (field.form) {
    case 'pointMass':
      return central((-G * field.mass) / r, (G * field.mass) / r ** 3);
    case 'plummer': {
      const { mass, scaleRadius: a } = field;
      const pull = (G * mass) / Math.hypot(r, a) ** 3;
      return central(((G * mass) / a) * plummer.potential(r / a), pull);
    }
    case 'nfw': {
      const { mass, within, scaleRadius: a } = field;
      const scale = (G * mass) / nfwMass(within / a);
      if (r === 0) return [-scale / a, 0, 0, 0];
      return central((-scale * Math.log1p(r / a)) / r, (scale * nfwMass(r / a)) / r ** 3);
    }
    case 'logarithmic': {
      const { speed, coreRadius, flattening: q = 1 } = field;
      const s = coreRadius ** 2 + x * x + y * y + (z / q) ** 2;
      const pull = speed ** 2 / s;
      return [0.5 * speed ** 2 * Math.log(s), -pull * x, -pull * y, (-pull * z) / q ** 2];
    }
    case 'miyamotoNagai': {
      const { mass, scaleLength: a, scaleHeight: b } = field;
      const height = Math.hypot(z, b);
      const s = Math.hypot(x, y, a + height);
      const pull = (G * mass) / s ** 3;
      const upwards = height === 0 ? 0 : (pull * z * (a + height)) / height;
      return [(-G * mass) / s, -pull * x, -pull * y, -upwards];
    }
    case 'tide': {
      const [xx, yy, zz, xy, xz, yz] = field.tensor;
      const ax = xx * x + xy * y + xz * z;
      const ay = xy * x + yy * y + yz * z;
      const az = xz * x + yz * y + zz * z;
      return [-(x * ax + y * ay + z * az) / 2, ax, ay, az];
    }
  }
}

/** ln(1 + x) − x/(1 + x), by its series where the two cancel. */
function nfwMass(x: number): number {
  if (x > 1e-3) return Math.log1p(x) - x / (1 + x);
  return x * x * (1 / 2 - x * (2 / 3 - x * (3 / 4 - (4 / 5) * x)));
}

/** Step of the differences over the distance to the nearest centre, or the size of the system. */
const STEP = 1e-4;

/**
 * Tidal tensor ∂a_i/∂x_j, by central differences of the acceleration (relative error 1e-8 of the largest).
 * @param size - a length over which the fields are smooth
 * @returns xx, yy, zz, xy, xz, yz [1/time²]
 */
export function tidalTensor(
  fields: readonly ExternalField[],
  gravity: number,
  at: Triple,
  size: number,
): number[] {
  const h = STEP * size;
  const column = (axis: number): number[] => {
    const moved = (by: number): FieldValue => {
      const p = [...at];
      p[axis] += by;
      return externalAt(fields, gravity, p[0], p[1], p[2]);
    };
    const [plus, minus] = [moved(h), moved(-h)];
    return [1, 2, 3].map((k) => (plus[k] - minus[k]) / (2 * h));
  };
  const [x, y, z] = [column(0), column(1), column(2)];
  return [x[0], y[1], z[2], (x[1] + y[0]) / 2, (x[2] + z[0]) / 2, (y[2] + z[1]) / 2];
}

/**
 * Eigenvalues of a symmetric 3×3 matrix, the largest first.
 * Source: Smith 1961, Communications of the ACM 4, 168 (from memory).
 */
export function eigenvalues([xx, yy, zz, xy, xz, yz]: readonly number[]): Triple {
  const mean = (xx + yy + zz) / 3;
  const [a, b, c] = [xx - mean, yy - mean, zz - mean];
  const p = Math.sqrt((a * a + b * b + c * c + 2 * (xy * xy + xz * xz + yz * yz)) / 6);
  if (p === 0) return [mean, mean, mean];
  const determinant = a * (b * c - yz * yz) - xy * (xy * c - yz * xz) + xz * (xy * yz - b * xz);
  const angle = Math.acos(Math.max(-1, Math.min(1, determinant / (2 * p ** 3)))) / 3;
  const first = mean + 2 * p * Math.cos(angle);
  const last = mean + 2 * p * Math.cos(angle + (2 * Math.PI) / 3);
  return [first, 3 * mean - first - last, last];
}
