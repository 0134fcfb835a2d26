/**
 * Cartesian expansions of 1/√(r² + ε²), as straight-line code written for each order.
 *
 * With multipoles M_n = Σ m yⁿ/n! about the source's centre of mass (so the dipole vanishes) and
 * D_n = ∂ⁿ 1/√(R² + ε²) at R = target − source, the field near the target's centre is
 * Σ_k L_k sᵏ/k! with L_k = Σ_n (−1)^|n| M_n D_{n+k} over |n| + |k| ≤ p. The tensors D come from the
 * recursion D⁽ʲ⁾_{n+e} = R_e D⁽ʲ⁺¹⁾_n + n_e D⁽ʲ⁺¹⁾_{n−e} with D⁽ʲ⁾_0 = (−1)ʲ (2j−1)!! u^(−j−1/2),
 * u = R² + ε² (McMurchie & Davidson 1978, J. Comput. Phys. 26, 218, for another kernel).
 *
 * Softened, every pair also carries ε² u^(−3/2) = −ε² D⁽¹⁾_0: the part by which the Clausius virial
 * differs from the potential. Its tensors −ε² D⁽¹⁾_n are by-products of the recursion, so a second
 * local expansion of order p − 1 gives it at little cost.
 */
import { compile } from './compile.ts';
import { writeInteractions, type Interactions } from './interaction.ts';
import {
  factorialOf,
  indices,
  minus,
  nameOf,
  orderOf,
  plus,
  slot,
  within,
  type Index,
} from './multiIndex.ts';

/** Highest order that expansions are written for: longer functions than its are no longer optimised. */
export const HIGHEST_ORDER = 6;

export interface Expansion extends Interactions {
  readonly order: number;
  /** Reals a node of multipoles: all M_n with 2 ≤ |n| ≤ p. */
  readonly multipoles: number;
  /** Reals a node of local coefficients: L_k with |k| ≤ p, and if softened as many again with |k| ≤ p − 1. */
  readonly locals: number;
  /** Adds one body at (dx, dy, dz) from the centre to the multipoles at `at`. */
  readonly addBody: (
    M: Float64Array,
    at: number,
    m: number,
    dx: number,
    dy: number,
    dz: number,
  ) => void;
  /** Adds a child's multipoles and mass, its centre at (dx, dy, dz) from the parent's. */
  readonly addChild: (
    M: Float64Array,
    parent: number,
    child: number,
    m: number,
    dx: number,
    dy: number,
    dz: number,
  ) => void;
  /** Adds the parent's locals to a child's, its centre at (x, y, z) from the parent's. */
  readonly passDown: (
    L: Float64Array,
    parent: number,
    child: number,
    x: number,
    y: number,
    z: number,
  ) => void;
  /** Σ m/√(r²+ε²) at (x, y, z) from the centre of the locals at `at`. */
  readonly valueAt: (L: Float64Array, at: number, x: number, y: number, z: number) => number;
  /** The same for the Clausius part, ε² Σ m u^(−3/2); 0 if not softened. */
  readonly clausiusAt: (L: Float64Array, at: number, x: number, y: number, z: number) => number;
  /** Gradient of {@link Expansion.valueAt}, written to `out[0..2]`. */
  readonly gradientAt: (
    L: Float64Array,
    at: number,
    x: number,
    y: number,
    z: number,
    out: Float64Array,
  ) => void;
}

const cache = new Map<string, Expansion>();

/** Expansion of the order p ≥ 1, with the Clausius part if `softened`. */
export function expansionOf(order: number, softened: boolean): Expansion {
  if (!Number.isInteger(order) || order < 1 || order > HIGHEST_ORDER) {
    throw new RangeError(`expansion order ${order} is not one of 1 to ${HIGHEST_ORDER}`);
  }
  const key = `${order}${softened ? 's' : ''}`;
  let expansion = cache.get(key);
  if (!expansion) {
    expansion = writeExpansion(order, softened);
    cache.set(key, expansion);
  }
  return expansion;
}

function writeExpansion(p: number, softened: boolean): Expansion {
  const momentList = indices(2, p);
  const momentAt = new Map(momentList.map((n, at) => [nameOf(n), at]));
  const localList = indices(0, p);
  const clausiusList = softened ? indices(0, p - 1) : [];
  const localAt = new Map(localList.map((n, at) => [nameOf(n), at]));
  const clausiusAt = new Map(clausiusList.map((n, at) => [nameOf(n), localList.length + at]));
  const locals = localList.length + clausiusList.length;
  const named = `order${p}${softened ? 'softened' : ''}`;

  const powers = (x: string, y: string, z: string, highest: number) => {
    const lines: string[] = [];
    for (const [axis, name] of [
      [0, x],
      [1, y],
      [2, z],
    ] as const) {
      for (let e = 2; e <= highest; e++) {
        lines.push(`const p${axis}${e}=${e === 2 ? name : `p${axis}${e - 1}`}*${name};`);
      }
    }
    return lines.join('');
  };
  const monomial = ([i, j, k]: Index, x: string, y: string, z: string) => {
    const factors = [
      [i, x, 0],
      [j, y, 1],
      [k, z, 2],
    ] as const;
    const list = factors.flatMap(([e, name, axis]) =>
      e === 0 ? [] : [e === 1 ? name : `p${axis}${e}`],
    );
    return list.length ? list.join('*') : '1';
  };
  const over = (n: Index) => (factorialOf(n) === 1 ? '' : `*${1 / factorialOf(n)}`);
  /** Σ_{|n| ≤ highest − |k|} L_{k+n} sⁿ/n!. */
  const taylor = (k: Index, at: Map<string, number>, base: string, highest: number) =>
    indices(0, highest - orderOf(k))
      .map((n) => {
        const value = slot('L', base, at.get(nameOf(plus(k, n))) as number);
        return orderOf(n) === 0 ? value : `${value}*${monomial(n, 'x', 'y', 'z')}${over(n)}`;
      })
      .join('+');

  return {
    order: p,
    multipoles: momentList.length,
    locals,
    addBody: compile(
      `${named}addBody`,
      ['M', 'at', 'm', 'dx', 'dy', 'dz'],
      powers('dx', 'dy', 'dz', p) +
        momentList
          .map((n, at) => `${slot('M', 'at', at)}+=m*${monomial(n, 'dx', 'dy', 'dz')}${over(n)};`)
          .join('\n'),
    ),
    addChild: compile(
      `${named}addChild`,
      ['M', 'parent', 'child', 'm', 'dx', 'dy', 'dz'],
      powers('dx', 'dy', 'dz', p) +
        momentList
          .map((n, at) => {
            const sum = [[0, 0, 0] as Index, ...momentList]
              .filter((k) => within(k, n))
              .map((k) => {
                const rest = minus(n, k);
                const value =
                  orderOf(k) === 0 ? 'm' : slot('M', 'child', momentAt.get(nameOf(k)) as number);
                return orderOf(rest) === 0
                  ? value
                  : `${value}*${monomial(rest, 'dx', 'dy', 'dz')}${over(rest)}`;
              });
            return `${slot('M', 'parent', at)}+=${sum.join('+')};`;
          })
          .join('\n'),
    ),
    passDown: compile(
      `${named}passDown`,
      ['L', 'parent', 'child', 'x', 'y', 'z'],
      powers('x', 'y', 'z', p) +
        localList
          .map(
            (k) =>
              `${slot('L', 'child', localAt.get(nameOf(k)) as number)}+=${taylor(k, localAt, 'parent', p)};`,
          )
          .join('\n') +
        clausiusList
          .map(
            (k) =>
              `${slot('L', 'child', clausiusAt.get(nameOf(k)) as number)}+=${taylor(k, clausiusAt, 'parent', p - 1)};`,
          )
          .join('\n'),
    ),
    valueAt: compile(
      `${named}valueAt`,
      ['L', 'at', 'x', 'y', 'z'],
      `${powers('x', 'y', 'z', p)}return ${taylor([0, 0, 0], localAt, 'at', p)};`,
    ),
    clausiusAt: compile(
      `${named}clausiusAt`,
      ['L', 'at', 'x', 'y', 'z'],
      softened
        ? `${powers('x', 'y', 'z', p)}return ${taylor([0, 0, 0], clausiusAt, 'at', p - 1)};`
        : 'return 0;',
    ),
    gradientAt: compile(
      `${named}gradientAt`,
      ['L', 'at', 'x', 'y', 'z', 'out'],
      powers('x', 'y', 'z', p) +
        (
          [
            [1, 0, 0],
            [0, 1, 0],
            [0, 0, 1],
          ] as const
        )
          .map((k, axis) => `out[${axis}]=${taylor(k, localAt, 'at', p)};`)
          .join('\n'),
    ),
    ...writeInteractions(p, softened, named),
  };
}
