/**
 * Direct sums over pairs of bodies, written once for each kernel, with and without accelerations.
 *
 * All sums are positive and without G: `phi` collects Σ m f(r) with f = 1/r unsoftened, `psi` the part
 * Σ m [f(r) − r |f′(r)|] by which the Clausius share r |f′| falls short of it (0 unsoftened), and
 * `ax ay az` Σ m g(r) (x_j − x_i) with g = |f′|/r.
 *
 * Where bodies have softening lengths of their own, `squares` holds their e² and a pair is softened by
 * e_i² + e_j² or, with the spline, by the larger; the number `softening` is then used by `atPoint` alone,
 * as the e² of the point. A pair at one point neither of which has a length is left out.
 */
import { compile } from './compile.ts';
import { SPLINE_SUPPORT, splineForce, splinePotential, type SofteningKernel } from './softening.ts';

/** Where sums go: one number a body of a branch; empty arrays where a sum is not wanted. */
export interface PairSums {
  readonly phi: Float64Array;
  readonly psi: Float64Array;
  readonly ax: Float64Array;
  readonly ay: Float64Array;
  readonly az: Float64Array;
}

type Columns = [x: Float64Array, y: Float64Array, z: Float64Array, mass: Float64Array];

export interface PairKernels {
  /** All pairs inside [begin, end), both ways; `base` is the body whose sums are at 0. Returns pairs at distance 0 left out. */
  readonly inside: (
    ...p: [
      ...Columns,
      begin: number,
      end: number,
      base: number,
      sums: PairSums,
      softening: number,
      squares: Float64Array,
    ]
  ) => number;
  /** All pairs of [a, aEnd) with [b, bEnd), both ways. */
  readonly between: (
    ...p: [
      ...Columns,
      a: number,
      aEnd: number,
      b: number,
      bEnd: number,
      base: number,
      sums: PairSums,
      softening: number,
      squares: Float64Array,
    ]
  ) => void;
  /** Sums for the targets [t, tEnd) of one set from the sources [s, sEnd) of another. */
  readonly onto: (
    ...p: [
      tx: Float64Array,
      ty: Float64Array,
      tz: Float64Array,
      t: number,
      tEnd: number,
      ...Columns,
      s: number,
      sEnd: number,
      base: number,
      sums: PairSums,
      softening: number,
      targetSquares: Float64Array,
      squares: Float64Array,
    ]
  ) => void;
  /** Adds to `out` (phi, psi, ax, ay, az) the sums at one point from [s, sEnd); a body at distance 0 is left out if unsoftened. Returns how many were. */
  readonly atPoint: (
    ...p: [
      px: number,
      py: number,
      pz: number,
      ...Columns,
      s: number,
      sEnd: number,
      out: Float64Array,
      softening: number,
      squares: Float64Array,
    ]
  ) => number;
}

/** Source text that turns r2 into f, and where wanted w and g. `s1` is ε² (Plummer) or h (spline). */
const KERNEL: Record<SofteningKernel, (withForce: boolean) => string> = {
  none: (withForce) => `const f=1/Math.sqrt(r2);${withForce ? 'const g=f*f*f;' : ''}`,
  plummer: (withForce) =>
    `const q=1/(r2+soft),f=Math.sqrt(q),w=soft*q*f;${withForce ? 'const g=q*f;' : ''}`,
  spline: (withForce) => `let f,w${withForce ? ',g' : ''};
    if(r2>=soft2){f=1/Math.sqrt(r2);w=0;${withForce ? 'g=f*f*f;' : ''}}
    else{const v=Math.sqrt(r2)/soft,k=splineForce(v);f=-splinePotential(v)/soft;
      w=f-v*v*k/soft;${withForce ? 'g=k/(soft2*soft);' : ''}}`,
};

/** The same where `ei` and `e[j]` are the e² of the two bodies. */
const KERNEL_OF_EACH: Record<SofteningKernel, (withForce: boolean) => string> = {
  none: KERNEL.none,
  plummer: (withForce) => `const soft=ei+e[j];${KERNEL.plummer(withForce)}`,
  spline: (withForce) =>
    `const ej=e[j],soft2=${SPLINE_SUPPORT ** 2}*(ei>ej?ei:ej);` +
    KERNEL.spline(withForce).replace('else{', 'else{const soft=Math.sqrt(soft2);'),
};

const cache = new Map<string, PairKernels>();

/**
 * The kernels for a softening; `softening` in their calls is {@link pairSofteningOf}.
 * @param each - bodies have lengths of their own
 */
export function pairKernelsOf(
  kernel: SofteningKernel,
  withForce: boolean,
  each = false,
): PairKernels {
  const key = `${kernel}${each ? 'Each' : ''}${withForce ? 'Force' : ''}`;
  let kernels = cache.get(key);
  if (!kernels) {
    kernels = writePairKernels(kernel, withForce, each, key);
    cache.set(key, kernels);
  }
  return kernels;
}

/** The number that pair kernels take for a softening length ε: ε², or the spline's support. */
export function pairSofteningOf(kernel: SofteningKernel, length: number): number {
  if (kernel === 'none') return 0;
  return kernel === 'plummer' ? length * length : SPLINE_SUPPORT * length;
}

function writePairKernels(
  kernel: SofteningKernel,
  force: boolean,
  each: boolean,
  key: string,
): PairKernels {
  const soft = kernel !== 'none';
  const open = `const {phi,psi,ax,ay,az}=sums${each ? '' : ',soft2=soft*soft'};`;
  const start =
    `const xi=X[i],yi=Y[i],zi=Z[i]${each ? ',ei=E[i]' : ''};let s=0` +
    (soft ? ',t=0' : '') +
    (force ? ',bx=0,by=0,bz=0;' : ';');
  const distance = 'const dx=x[j]-xi,dy=y[j]-yi,dz=z[j]-zi,r2=dx*dx+dy*dy+dz*dz;';
  const eval_ = (each ? KERNEL_OF_EACH : KERNEL)[kernel](force);
  const leave = each
    ? 'if(r2+ei+e[j]===0){left++;continue;}'
    : soft
      ? ''
      : 'if(r2===0){left++;continue;}';
  const take =
    'const mj=mass[j];s+=mj*f;' +
    (soft ? 't+=mj*w;' : '') +
    (force ? 'const gj=mj*g;bx+=gj*dx;by+=gj*dy;bz+=gj*dz;' : '');
  const give =
    'phi[j-base]+=mi*f;' +
    (soft ? 'psi[j-base]+=mi*w;' : '') +
    (force ? 'const gi=mi*g;ax[j-base]-=gi*dx;ay[j-base]-=gi*dy;az[j-base]-=gi*dz;' : '');
  const store =
    'phi[i-base]+=s;' +
    (soft ? 'psi[i-base]+=t;' : '') +
    (force ? 'ax[i-base]+=bx;ay[i-base]+=by;az[i-base]+=bz;' : '');
  const own = (code: string) =>
    code
      .replaceAll('X[', 'x[')
      .replaceAll('Y[', 'y[')
      .replaceAll('Z[', 'z[')
      .replaceAll('E[', 'e[');
  const outside = <F>(name: string, parameters: string[], body: string): F =>
    compileWithSpline<F>(`${key}${name}`, parameters, body);
  // Two bodies share one division where only the potential is wanted: a sixth to a quarter faster.
  const pairwise = kernel === 'none' && !force;
  const taken = each ? ['notUsed', 'e'] : ['soft'];

  return {
    inside: outside(
      'Inside',
      ['x', 'y', 'z', 'mass', 'begin', 'end', 'base', 'sums', ...taken],
      `${open}let left=0;
      for(let i=begin;i<end;i++){${own(start)}const mi=mass[i];
        let j=i+1;
        ${pairwise ? `for(;j+1<end;j+=2){${TWO_DISTANCES}if(r*q===0)break;${TAKE_TWO}}` : ''}
        for(;j<end;j++){${distance}${leave}${eval_}${take}${give}}
        ${store}}
      return left;`,
    ),
    between: outside(
      'Between',
      ['x', 'y', 'z', 'mass', 'a', 'aEnd', 'b', 'bEnd', 'base', 'sums', ...taken],
      `${open}
      for(let i=a;i<aEnd;i++){${own(start)}const mi=mass[i];let j=b;
        ${pairwise ? `for(;j+1<bEnd;j+=2){${TWO_DISTANCES}${TAKE_TWO}}` : ''}
        for(;j<bEnd;j++){${distance}${eval_}${take}${give}}
        ${store}}`,
    ),
    onto: outside(
      'Onto',
      [
        ...['X', 'Y', 'Z', 't0', 't1', 'x', 'y', 'z', 'mass', 'a', 'b', 'base', 'sums'],
        ...(each ? ['notUsed', 'E', 'e'] : ['soft']),
      ],
      `${open}
      for(let i=t0;i<t1;i++){${start}let j=a;
        ${pairwise ? `for(;j+1<b;j+=2){${TWO_DISTANCES}s+=(mass[j]*q+mass[j+1]*r)/(r*q);}` : ''}
        for(;j<b;j++){${distance}${eval_}${take}}
        ${store}}`,
    ),
    atPoint: outside(
      'AtPoint',
      [
        ...['xi', 'yi', 'zi', 'x', 'y', 'z', 'mass', 'a', 'b', 'out'],
        ...(each ? ['ei', 'e'] : ['soft']),
      ],
      `${each ? '' : 'const soft2=soft*soft;'}let left=0,s=0${soft ? ',t=0' : ''}${force ? ',bx=0,by=0,bz=0' : ''};
      for(let j=a;j<b;j++){${distance}${leave}${eval_}${take}}
      out[0]+=s;${soft ? 'out[1]+=t;' : ''}${force ? 'out[2]+=bx;out[3]+=by;out[4]+=bz;' : ''}
      return left;`,
    ),
  };
}

const TWO_DISTANCES = `const dx=x[j]-xi,dy=y[j]-yi,dz=z[j]-zi,ex=x[j+1]-xi,ey=y[j+1]-yi,ez=z[j+1]-zi,
  r=Math.sqrt(dx*dx+dy*dy+dz*dz),q=Math.sqrt(ex*ex+ey*ey+ez*ez);`;

const TAKE_TWO = `const mj=mass[j],mk=mass[j+1],t=1/(r*q),f=t*q,h=t*r;
  s+=mj*f+mk*h;phi[j-base]+=mi*f;phi[j+1-base]+=mi*h;`;

/** Compiles a kernel that may call the spline's two functions. */
function compileWithSpline<F>(name: string, parameters: string[], body: string): F {
  const outer = compile<(potential: typeof splinePotential, force: typeof splineForce) => F>(
    `make${name}`,
    ['splinePotential', 'splineForce'],
    `return function ${name}(${parameters.join(',')}){\n${body}\n}`,
  );
  return outer(splinePotential, splineForce);
}
