/**
 * The part of the expansions that carries the cost: derivative tensors, and multipoles → locals.
 *
 * Each is one long function with every intermediate in a local variable. Cut into shorter ones that
 * hand the tensors on in an array, the same work takes two to three times as long.
 */
import { compile } from './compile.ts';
import { indices, minus, nameOf, orderOf, plus, slot, type Index } from './multiIndex.ts';

export interface Interactions {
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

/** Source text of the parts of an interaction, for sources whose mass is `m`. */
export interface InteractionCode {
  /** Computes the tensors from x, y, z and soft2. */
  readonly tensors: string;
  readonly load: (prefix: string, base: string) => string;
  /** Adds to the locals at `base`; `opposite`: the tensors were made for the other direction. */
  readonly accumulate: (source: string, mass: string, base: string, opposite: boolean) => string;
  /** The value and the Clausius part at a point. */
  readonly value: string;
  readonly slope: string;
}

export function interactionCode(p: number, softened: boolean): InteractionCode {
  const momentList = indices(2, p);
  const values = indices(0, p);
  const slopes = softened ? indices(0, p - 1) : [];
  const tensors = tensorCode(p);
  const load = (prefix: string, base: string) =>
    momentList.map((n, at) => `const ${prefix}${nameOf(n)}=${slot('M', base, at)};`).join('');

  /**
   * Σ_n ± M_n D_{n+k} with the sign (−1)^|n|, or (−1)^|k| for the opposite direction; for the Clausius
   * part the tensors are −D⁽¹⁾.
   */
  const sumOf = (k: Index, tensor: string, source: string, mass: string, opposite: boolean) => {
    const highest = tensor === 'd0_' ? p : p - 1;
    const list = indices(0, highest - orderOf(k)).filter((n) => orderOf(n) !== 1);
    const text = list.map((n) => {
      const odd = (opposite ? orderOf(k) : orderOf(n)) % 2 === 1;
      const factor = orderOf(n) === 0 ? mass : `${source}${nameOf(n)}`;
      return `${odd === (tensor === 'd0_') ? '-' : '+'}${factor}*${tensor}${nameOf(plus(n, k))}`;
    });
    return `${tensor === 'd0_' ? '' : 'soft2*'}(${text.join('')})`;
  };
  const accumulate = (source: string, mass: string, base: string, opposite: boolean) =>
    [
      ...values.map((k) => sumOf(k, 'd0_', source, mass, opposite)),
      ...slopes.map((k) => sumOf(k, 'd1_', source, mass, opposite)),
    ]
      .map((sum, at) => `${slot('L', base, at)}+=${sum};`)
      .join('\n');
  const centre: Index = [0, 0, 0];
  return {
    tensors,
    load,
    accumulate,
    value: sumOf(centre, 'd0_', 'a', 'm', false),
    slope: softened ? sumOf(centre, 'd1_', 'a', 'm', false) : '',
  };
}

export function writeInteractions(p: number, softened: boolean, named: string): Interactions {
  const { tensors, load, accumulate, value, slope } = interactionCode(p, softened);
  return {
    interact: compile(
      `${named}interact`,
      ['tG', 'gt', 'L', 'lt', 'sG', 'gs', 'M', 'ms', 'soft2'],
      `const x=tG[gt]-sG[gs],y=tG[gt+1]-sG[gs+1],z=tG[gt+2]-sG[gs+2],m=sG[gs+3];` +
        `${tensors}${load('a', 'ms')}\n${accumulate('a', 'm', 'lt', false)}`,
    ),
    interactBoth: compile(
      `${named}interactBoth`,
      ['G', 'M', 'L', 'ga', 'ma', 'la', 'gb', 'mb', 'lb', 'soft2'],
      `const x=G[ga]-G[gb],y=G[ga+1]-G[gb+1],z=G[ga+2]-G[gb+2],massA=G[ga+3],massB=G[gb+3];` +
        `${tensors}${load('b', 'mb')}\n${accumulate('b', 'massB', 'la', false)}` +
        `${load('a', 'ma')}\n${accumulate('a', 'massA', 'lb', true)}`,
    ),
    pointValue: compile(
      `${named}pointValue`,
      ['G', 'g', 'M', 'ms', 'px', 'py', 'pz', 'soft2', 'out'],
      `const x=px-G[g],y=py-G[g+1],z=pz-G[g+2],m=G[g+3];${tensors}${load('a', 'ms')}` +
        `out[0]+=${value};` +
        (softened ? `out[1]+=${slope};` : ''),
    ),
  };
}

/** Code that computes all D⁽ʲ⁾_n with |n| + j ≤ p from x, y, z and soft2, named d<j>_<n>. */
function tensorCode(p: number): string {
  const lines = ['const u=x*x+y*y+z*z+soft2,inverse=1/u,d0_000=Math.sqrt(inverse);'];
  for (let j = 1; j <= p; j++) lines.push(`const d${j}_000=-${2 * j - 1}*inverse*d${j - 1}_000;`);
  for (let order = 1; order <= p; order++) {
    for (const n of indices(order, order)) {
      // Lowering the axis with the largest power keeps the recursion's second term rare.
      const axis = n.indexOf(Math.max(...n));
      const e: Index = [+(axis === 0), +(axis === 1), +(axis === 2)];
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
