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

/** A multi-index: powers of x, y and z. */
type Index = readonly [number, number, number];

const orderOf = ([i, j, k]: Index): number => i + j + k;
const factorial = (n: number): number => (n <= 1 ? 1 : n * factorial(n - 1));
const factorialOf = ([i, j, k]: Index): number => factorial(i) * factorial(j) * factorial(k);
const plus = (a: Index, b: Index): Index => [a[0] + b[0], a[1] + b[1], a[2] + b[2]];
const minus = (a: Index, b: Index): Index => [a[0] - b[0], a[1] - b[1], a[2] - b[2]];
const within = (a: Index, b: Index): boolean => a[0] <= b[0] && a[1] <= b[1] && a[2] <= b[2];
const nameOf = ([i, j, k]: Index): string => `${i}${j}${k}`;

/** All multi-indices with order from `low` to `high`, by order, x before y before z. */
function indices(low: number, high: number): Index[] {
  const list: Index[] = [];
  for (let order = low; order <= high; order++) {
    for (let i = order; i >= 0; i--) {
      for (let j = order - i; j >= 0; j--) list.push([i, j, order - i - j]);
    }
  }
  return list;
}

/** Highest order that expansions are written for: longer functions than its are no longer optimised. */
export const HIGHEST_ORDER = 6;

export interface Expansion {
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
  /** Adds the source's field to the target's locals. `gt`, `gs` index geometry, `ms` multipoles, `lt` locals. */
  readonly interact: (
    tG: Float64Array,
    gt: number,
    L: Float64Array,
    lt: number,
    sG: Float64Array,
    gs: number,
    sM: Float64Array,
    ms: number,
    soft2: number,
  ) => void;
  /** The same in both directions, for two cells of one tree. */
  readonly interactBoth: (
    G: Float64Array,
    M: Float64Array,
    L: Float64Array,
    ga: number,
    ma: number,
    la: number,
    gb: number,
    mb: number,
    lb: number,
    soft2: number,
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
  /** Adds to `out[0]` the source cell's Σ m/√(r²+ε²) at a point, and to `out[1]` the Clausius part. */
  readonly pointValue: (
    G: Float64Array,
    g: number,
    M: Float64Array,
    ms: number,
    x: number,
    y: number,
    z: number,
    soft2: number,
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
  const slot = (array: string, base: string, at: number) =>
    `${array}[${base}${at ? `+${at}` : ''}]`;
  const named = `order${p}${softened ? 'softened' : ''}`;

  /** Terms of L_k: the multipole's index and the tensor's, with sign (−1)^|n|. */
  const terms = (k: Index, highest: number) =>
    indices(0, highest - orderOf(k))
      .filter((n) => orderOf(n) !== 1)
      .map((n) => ({ n, d: plus(n, k), sign: orderOf(n) % 2 ? '-' : '+' }));

  const loadMoments = (prefix: string, array: string, base: string) =>
    momentList.map((n, at) => `const ${prefix}${nameOf(n)}=${slot(array, base, at)};`).join('');

  /** Code of all L_k for one direction; `flip` turns R into −R. */
  const accumulate = (source: string, mass: string, L: string, base: string, flip: boolean) => {
    const lines: string[] = [];
    const add = (k: Index, at: number, tensor: string, highest: number, negate: boolean) => {
      const sum = terms(k, highest)
        .map(({ n, d, sign }) => {
          const odd = flip && orderOf(d) % 2 === 1;
          const positive = (sign === '+') !== odd;
          const factor = orderOf(n) === 0 ? mass : `${source}${nameOf(n)}`;
          return `${positive !== negate ? '+' : '-'}${factor}*${tensor}${nameOf(d)}`;
        })
        .join('');
      return `${slot(L, base, at)}+=${softScale(tensor)}(${sum});`;
    };
    for (const k of localList)
      lines.push(add(k, localAt.get(nameOf(k)) as number, 'd0_', p, false));
    for (const k of clausiusList) {
      lines.push(add(k, clausiusAt.get(nameOf(k)) as number, 'd1_', p - 1, true));
    }
    return lines.join('\n');
  };
  const softScale = (tensor: string) => (tensor === 'd1_' ? 'soft2*' : '');
  const tensors = tensorCode(p);

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
    interact: compile(
      `${named}interact`,
      ['tG', 'gt', 'L', 'lt', 'sG', 'gs', 'sM', 'ms', 'soft2'],
      `const x=tG[gt]-sG[gs],y=tG[gt+1]-sG[gs+1],z=tG[gt+2]-sG[gs+2],m=sG[gs+3];` +
        `${tensors}${loadMoments('a', 'sM', 'ms')}\n${accumulate('a', 'm', 'L', 'lt', false)}`,
    ),
    interactBoth: compile(
      `${named}interactBoth`,
      ['G', 'M', 'L', 'ga', 'ma', 'la', 'gb', 'mb', 'lb', 'soft2'],
      `const x=G[ga]-G[gb],y=G[ga+1]-G[gb+1],z=G[ga+2]-G[gb+2],massA=G[ga+3],massB=G[gb+3];` +
        `${tensors}${loadMoments('b', 'M', 'mb')}\n${accumulate('b', 'massB', 'L', 'la', false)}` +
        `${loadMoments('a', 'M', 'ma')}\n${accumulate('a', 'massA', 'L', 'lb', true)}`,
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
    pointValue: compile(
      `${named}pointValue`,
      ['G', 'g', 'M', 'ms', 'px', 'py', 'pz', 'soft2', 'out'],
      `const x=px-G[g],y=py-G[g+1],z=pz-G[g+2],m=G[g+3];${tensors}${loadMoments('a', 'M', 'ms')}
      out[0]+=${pointSum(p, 'd0_', terms, false)};
      ${softened ? `out[1]+=soft2*(${pointSum(p - 1, 'd1_', terms, true)});` : ''}`,
    ),
  };
}

function pointSum(
  highest: number,
  tensor: string,
  terms: (k: Index, highest: number) => { n: Index; d: Index; sign: string }[],
  negate: boolean,
): string {
  return terms([0, 0, 0], highest)
    .map(({ n, d, sign }) => {
      const positive = (sign === '+') !== negate;
      const factor = orderOf(n) === 0 ? 'm' : `a${nameOf(n)}`;
      return `${positive ? '+' : '-'}${factor}*${tensor}${nameOf(d)}`;
    })
    .join('');
}

/** Code that computes all D⁽ʲ⁾_n with |n| + j ≤ p from x, y, z and soft2, named d<j>_<n>. */
function tensorCode(p: number): string {
  const lines = ['const u=x*x+y*y+z*z+soft2,inverse=1/u,d0_000=Math.sqrt(inverse);'];
  for (let j = 1; j <= p; j++) lines.push(`const d${j}_000=-${2 * j - 1}*inverse*d${j - 1}_000;`);
  for (let order = 1; order <= p; order++) {
    for (const n of indices(order, order)) {
      // Lowering the axis with the largest power keeps the recursion's second term rare.
      const axis = n.indexOf(Math.max(...n));
      const e = [0, 0, 0].map((_, a) => (a === axis ? 1 : 0)) as unknown as Index;
      const once = minus(n, e);
      for (let j = 0; j + order <= p; j++) {
        let code = `${'xyz'[axis]}*d${j + 1}_${nameOf(once)}`;
        if (once[axis] > 0) code += `+${once[axis]}*d${j + 1}_${nameOf(minus(once, e))}`;
        lines.push(`const d${j}_${nameOf(n)}=${code};`);
      }
    }
  }
  return lines.join('');
}
