/**
 * What expansions lack where bodies have softening lengths of their own, as straight-line code.
 *
 * With e² = e_i² + e_j² a pair's potential is m/√(r² + e_i² + e_j²). The plain expansion (expansion.ts)
 * has the mean e² of both cells in its u. Let σ be half the difference of a body's e² from its cell's
 * mean. Then ∂/∂σ of a tensor D⁽ʲ⁾ is D⁽ʲ⁺¹⁾, so σ is a fourth coordinate beside the three of place:
 * multipoles M_{n,a} = Σ m yⁿ/n! σᵃ/a!, locals L_{k,b} = Σ (−1)^|n| M_{n,a} D⁽ᵃ⁺ᵇ⁾_{n+k}. The terms with
 * a + b ≥ 1 are here; the others are the plain expansion's, whose functions do not know of them.
 * M_{0,1} vanishes, since the mean is by mass.
 *
 * A pair's Clausius part is e² u^(−3/2) with e² the means plus 2σ_i + 2σ_j. The term 2σ_i gives
 * −2σ_i ∂φ/∂σ_i, which is taken where the locals are evaluated; the others give the locals
 * C_{k,b} = −soft2 Σ (−1)^|n| M_{n,a} D⁽¹⁺ᵃ⁺ᵇ⁾_{n+k} − 2 Σ a (−1)^|n| M_{n,a} D⁽ᵃ⁺ᵇ⁾_{n+k}.
 *
 * 1/r is harmonic, and errors of its expansion cancel all around; D⁽¹⁾ and the following are not. So
 * even powers of σ, which have one sign, are kept as far as they count in the mean, together with the
 * extent of the cells; products that scatter about 0, such as σ_i σ_j y, are left out.
 */
import { compile } from './compile.ts';
import { expansionOf } from './expansion.ts';
import { interactionCode } from './interaction.ts';
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

export interface SpreadExpansion {
  /** Reals a node of multipoles and of locals, in all: the plain ones come first. */
  readonly multipoles: number;
  readonly locals: number;
  /** Adds one body at (dx, dy, dz) from the centre, with σ = ds, to the multipoles at `at`. */
  readonly addBody: (
    M: Float64Array,
    at: number,
    m: number,
    dx: number,
    dy: number,
    dz: number,
    ds: number,
  ) => void;
  /** Adds a child's multipoles and mass, its centre and mean at (dx, dy, dz; ds) from the parent's. */
  readonly addChild: (
    M: Float64Array,
    parent: number,
    child: number,
    m: number,
    dx: number,
    dy: number,
    dz: number,
    ds: number,
  ) => void;
  /** Adds the source's field to the target's locals; arguments as of the plain expansion. */
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
  /** Adds a source cell's sums at a point, whose e² is wholly in `soft2`; arguments as of the plain expansion. */
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
  /** Adds the parent's locals to a child's, its centre and mean at (x, y, z; s) from the parent's. */
  readonly passDown: (
    L: Float64Array,
    parent: number,
    child: number,
    x: number,
    y: number,
    z: number,
    s: number,
  ) => void;
  readonly valueAt: ValueAt;
  readonly clausiusAt: ValueAt;
  /** Adds the gradient of {@link SpreadExpansion.valueAt} to `out[0..2]`. */
  readonly gradientAt: (
    L: Float64Array,
    at: number,
    x: number,
    y: number,
    z: number,
    s: number,
    out: Float64Array,
  ) => void;
}

type ValueAt = (L: Float64Array, at: number, x: number, y: number, z: number, s: number) => number;

/** A power of place and one of σ. */
interface Power {
  readonly n: Index;
  readonly a: number;
}

/** Highest power of σ. */
const HIGHEST = 4;
const CENTRE: Index = [0, 0, 0];
/** Highest order in place that goes with a power of σ. */
const orderWith = (p: number, c: number): number =>
  Math.max(0, c === 1 ? p - 2 : c === 2 ? Math.min(p - 2, 2) : 0);

const cache = new Map<number, SpreadExpansion>();

/** The terms with σ of an expansion of the order p. */
export function spreadExpansionOf(order: number): SpreadExpansion {
  let expansion = cache.get(order);
  if (!expansion) {
    expansion = writeSpreadExpansion(order);
    cache.set(order, expansion);
  }
  return expansion;
}

function writeSpreadExpansion(p: number): SpreadExpansion {
  const powers = Array.from({ length: HIGHEST }, (_, c) =>
    indices(0, orderWith(p, c + 1)).map((n): Power => ({ n, a: c + 1 })),
  )
    .flat()
    .filter(({ n, a }) => a === 1 || orderOf(n) % 2 === 0);
  const moments = powers.filter(({ n, a }) => a > 1 || orderOf(n) > 0);
  // The plain expansion's: see there.
  const plainMoments = indices(2, p);
  const plainValues = indices(0, p);
  const plainSlopes = indices(0, p - 1);
  const key = ({ n, a }: Power) => `${nameOf(n)}s${a}`;
  const plain = (n: Index): Power => ({ n, a: 0 });
  const momentAt = new Map(
    [...plainMoments.map(plain), ...moments].map((power, at) => [key(power), at]),
  );
  // D⁽¹⁺ᶜ⁾ takes one order more than D⁽ᶜ⁾.
  const slopes = powers.filter(({ n, a }) => orderOf(n) <= Math.max(0, orderWith(p, a) - 1));
  const plainLocals = plainValues.length + plainSlopes.length;
  const valueAt = new Map(plainValues.map((n, at) => [key(plain(n)), at]));
  powers.forEach((power, at) => valueAt.set(key(power), plainLocals + at));
  const slopeAt = new Map(plainSlopes.map((n, at) => [key(plain(n)), plainValues.length + at]));
  slopes.forEach((power, at) => slopeAt.set(key(power), plainLocals + powers.length + at));
  const allPowers = [...plainValues.map(plain), ...powers];

  const sourceMoment = (power: Power, base: string) =>
    power.a === 0 && orderOf(power.n) === 0
      ? 'm'
      : slot('M', base, momentAt.get(key(power)) as number);

  const used = new Set<string>();
  const tensor = (j: number, n: Index) => {
    const name = `d${j}_${nameOf(n)}`;
    used.add(name);
    return name;
  };
  const sources = [plain(CENTRE), ...plainMoments.map(plain), ...moments];
  /** What the source adds to the locals at a power (k, b): L, and C if `withSlope`. */
  const fieldAt = ({ n: k, a: b }: Power, base: string, withSlope: boolean) => {
    const value: string[] = [];
    const own: string[] = [];
    const common: string[] = [];
    for (let a = 0; a + b <= HIGHEST; a++) {
      const c = a + b;
      if (c === 0 || (a === 1 && b > 0)) continue;
      const terms = (j: number, highest: number) =>
        sources
          .filter(({ n, a: its }) => its === a && orderOf(n) + orderOf(k) <= highest)
          .filter(({ n }) => c < 2 || (orderOf(n) % 2 === 0 && orderOf(k) % 2 === 0))
          .map((power) => {
            const sign = orderOf(power.n) % 2 === 1 ? '-' : '+';
            return `${sign}${sourceMoment(power, base)}*${tensor(j, plus(power.n, k))}`;
          })
          .join('');
      const sum = terms(c, orderWith(p, c));
      if (sum === '') continue;
      const name = `v${nameOf(k)}${b}${a}`;
      value.push(`const ${name}=${sum};`);
      if (a > 0) own.push(`-${2 * a}*${name}`);
      if (withSlope) common.push(terms(c + 1, Math.max(0, orderWith(p, c) - 1)));
    }
    const names = value.map((line) => line.slice(6, line.indexOf('=')));
    const from = common.join('');
    return {
      before: value.join(''),
      value: names.join('+'),
      slope: withSlope ? own.join('') + (from === '' ? '' : `-soft2*(${from})`) : '',
    };
  };
  const interactText = (() => {
    const lines: string[] = [];
    for (const power of allPowers) {
      const [v, s] = [valueAt.get(key(power)), slopeAt.get(key(power))];
      const { before, value, slope } = fieldAt(power, 'ms', s !== undefined);
      if (value === '' || v === undefined) continue;
      lines.push(`${before}${slot('L', 'lt', v)}+=${value};`);
      if (slope !== '' && s !== undefined) lines.push(`${slot('L', 'lt', s)}+=${slope};`);
    }
    return lines.join('\n');
  })();
  const atPoint = fieldAt(plain(CENTRE), 'ms', true);
  const tensors = tensorCode(used);

  const powersOf = (x: string, y: string, z: string, s: string) =>
    [x, y, z, s]
      .map((name, axis) =>
        Array.from({ length: axis < 3 ? p - 1 : HIGHEST - 1 }, (_, e) =>
          e === 0
            ? `const p${axis}2=${name}*${name};`
            : `const p${axis}${e + 2}=p${axis}${e + 1}*${name};`,
        ).join(''),
      )
      .join('');
  const monomial = ({ n, a }: Power, ...names: readonly [string, string, string, string]) => {
    const list = [...n, a].flatMap((e, axis) =>
      e === 0 ? [] : [e === 1 ? names[axis] : `p${axis}${e}`],
    );
    const whole = factorialOf(n) * [1, 1, 2, 6, 24][a];
    return [...list, ...(whole === 1 ? [] : [`${1 / whole}`])].join('*');
  };
  const shift = (from: Power, to: Power): Power => ({ n: minus(to.n, from.n), a: to.a - from.a });
  const isIn = (small: Power, large: Power) => within(small.n, large.n) && small.a <= large.a;
  const times = (value: string, factor: string) => (factor === '' ? value : `${value}*${factor}`);

  /** Σ over locals with powers of σ from (k, b) up, of L times powers of the shift. */
  const taylor = (to: Power, at: Map<string, number>, base: string) =>
    powers
      .filter((power) => at.has(key(power)) && isIn(to, power))
      .map((power) =>
        times(
          slot('L', base, at.get(key(power)) as number),
          monomial(shift(to, power), 'x', 'y', 'z', 's'),
        ),
      )
      .join('+');
  const passed = (power: Power, at: Map<string, number>) => {
    const [sum, to] = [taylor(power, at, 'parent'), at.get(key(power))];
    return sum === '' || to === undefined ? '' : `${slot('L', 'child', to)}+=${sum};`;
  };
  /** The same for the values with powers of σ; −2σ ∂φ/∂σ moves its origin in σ with them. */
  const passedOn = (power: Power) => {
    const name = `v${key(power)}`;
    const lower = slopeAt.get(key({ n: power.n, a: power.a - 1 }));
    return (
      `const ${name}=${taylor(power, valueAt, 'parent')};` +
      `${slot('L', 'child', valueAt.get(key(power)) as number)}+=${name};` +
      (lower === undefined ? '' : `${slot('L', 'child', lower)}-=2*s*${name};`)
    );
  };
  /** −2σ ∂φ/∂σ. */
  const ownSlope = powers
    .map((power) => {
      const value = slot('L', 'at', valueAt.get(key(power)) as number);
      return `-${2 * power.a}*${value}*${monomial(power, 'x', 'y', 'z', 's')}`;
    })
    .join('');
  const named = `spread${p}`;
  const place = ['x', 'y', 'z', 's'];
  const powersOfPlace = powersOf('x', 'y', 'z', 's');
  const gradient = (axis: number) => {
    const e: Index = [+(axis === 0), +(axis === 1), +(axis === 2)];
    return `out[${axis}]+=${taylor(plain(e), valueAt, 'at') || '0'};`;
  };

  return {
    multipoles: plainMoments.length + moments.length,
    locals: plainLocals + powers.length + slopes.length,
    addBody: compile(
      `${named}addBody`,
      ['M', 'at', 'm', 'dx', 'dy', 'dz', 'ds'],
      powersOf('dx', 'dy', 'dz', 'ds') +
        moments
          .map((power) => {
            const to = slot('M', 'at', momentAt.get(key(power)) as number);
            return `${to}+=m*${monomial(power, 'dx', 'dy', 'dz', 'ds')};`;
          })
          .join('\n'),
    ),
    addChild: compile(
      `${named}addChild`,
      ['M', 'parent', 'child', 'm', 'dx', 'dy', 'dz', 'ds'],
      powersOf('dx', 'dy', 'dz', 'ds') +
        moments
          .map((power) => {
            const sum = sources
              .filter((from) => isIn(from, power))
              .map((from) =>
                times(
                  sourceMoment(from, 'child'),
                  monomial(shift(from, power), 'dx', 'dy', 'dz', 'ds'),
                ),
              );
            return `${slot('M', 'parent', momentAt.get(key(power)) as number)}+=${sum.join('+')};`;
          })
          .join('\n'),
    ),
    interact: writeInteract(p, named, tensors, interactText),
    pointValue: compile(
      `${named}pointValue`,
      ['G', 'g', 'M', 'ms', 'px', 'py', 'pz', 'soft2', 'out'],
      `const x=px-G[g],y=py-G[g+1],z=pz-G[g+2];${tensors}
      ${atPoint.before}out[0]+=${atPoint.value};out[1]+=${atPoint.slope};`,
    ),
    passDown: compile(
      `${named}passDown`,
      ['L', 'parent', 'child', ...place],
      powersOfPlace +
        [
          ...plainValues.map((n) => passed(plain(n), valueAt)),
          ...powers.map(passedOn),
          ...allPowers.map((power) => passed(power, slopeAt)),
        ].join('\n'),
    ),
    valueAt: compile(
      `${named}valueAt`,
      ['L', 'at', ...place],
      `${powersOfPlace}return ${taylor(plain(CENTRE), valueAt, 'at')};`,
    ),
    clausiusAt: compile(
      `${named}clausiusAt`,
      ['L', 'at', ...place],
      `${powersOfPlace}return ${taylor(plain(CENTRE), slopeAt, 'at')}${ownSlope};`,
    ),
    gradientAt: compile(
      `${named}gradientAt`,
      ['L', 'at', ...place, 'out'],
      powersOfPlace + [0, 1, 2].map(gradient).join('\n'),
    ),
  };
}

/** Up to this order one function does the plain terms and those with σ; a longer one is no longer optimised. */
const TOGETHER = 5;

function writeInteract(
  p: number,
  named: string,
  tensors: string,
  sums: string,
): SpreadExpansion['interact'] {
  const write = (name: string, before: string) =>
    compile<SpreadExpansion['interact']>(
      `${named}${name}`,
      ['tG', 'gt', 'L', 'lt', 'sG', 'gs', 'M', 'ms', 'soft2'],
      `const x=tG[gt]-sG[gs],y=tG[gt+1]-sG[gs+1],z=tG[gt+2]-sG[gs+2],m=sG[gs+3];${before}\n${sums}`,
    );
  if (p <= TOGETHER) {
    const code = interactionCode(p, true);
    const further = Array.from({ length: Math.max(0, HIGHEST + 1 - p) }, (_, k) => {
      const j = p + k + 1;
      return `const d${j}_000=-${2 * j - 1}*inverse*d${j - 1}_000;`;
    });
    const plain = code.load('a', 'ms') + code.accumulate('a', 'm', 'lt', false);
    return write('interact', `${code.tensors}${further.join('')}${plain}`);
  }
  const { interact } = expansionOf(p, true);
  const rest = write('interactRest', tensors);
  return (tG, gt, L, lt, sG, gs, M, ms, soft2) => {
    interact(tG, gt, L, lt, sG, gs, M, ms, soft2);
    rest(tG, gt, L, lt, sG, gs, M, ms, soft2);
  };
}

/** Code for the tensors named, and for those that their recursion needs; see expansion.ts. */
function tensorCode(wanted: ReadonlySet<string>): string {
  const lines: string[] = [];
  const done = new Set<string>();
  const need = (j: number, n: Index): string => {
    const name = `d${j}_${nameOf(n)}`;
    if (done.has(name)) return name;
    done.add(name);
    if (orderOf(n) === 0) {
      const below = j === 0 ? 'Math.sqrt(inverse)' : `-${2 * j - 1}*inverse*${need(j - 1, n)}`;
      lines.push(`const ${name}=${below};`);
      return name;
    }
    const axis = n.indexOf(Math.max(...n));
    const e: Index = [+(axis === 0), +(axis === 1), +(axis === 2)];
    const once = minus(n, e);
    let code = `${'xyz'[axis]}*${need(j + 1, once)}`;
    if (once[axis] > 0) code += `+${once[axis]}*${need(j + 1, minus(once, e))}`;
    lines.push(`const ${name}=${code};`);
    return name;
  };
  for (const name of wanted) {
    const [, j, n] = /^d(\d)_(\d{3})$/.exec(name) as unknown as [string, string, string];
    need(Number(j), [...n].map(Number) as unknown as Index);
  }
  return `const u=x*x+y*y+z*z+soft2,inverse=1/u;${lines.join('')}`;
}
