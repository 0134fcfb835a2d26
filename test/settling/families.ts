/** Made series whose state is known: transients, drifts, waves, steps, with the noise of finite N. */
import type { Random } from '../../src/numerics/random.ts';
import type { State, Track } from '../../src/settling/rule.ts';

export interface Made {
  readonly track: Track;
  readonly wanted: State | 'not settled';
  /** When the transient has sunk into the noise [crossing times]; null if that is not asked. */
  readonly settledAt: number | null;
  readonly span: number;
}

export const FAMILIES = [
  'plain',
  'long memory',
  'damped wave',
  'monotone',
  'early step',
  'late step',
  'drift of r',
  'drift of the ratio',
  'core contraction',
  'wave',
  'slowly damped wave',
  'collapse',
  'expansion',
  'energy error',
  'small energy error',
  'short span',
] as const;
export type Family = (typeof FAMILIES)[number];

const TAU = 2 * Math.PI;
type Noise = 'white' | 'memory' | 'long memory' | 'breathing';

function timesOf(n: number, span: number, random: Random): Float64Array {
  const kind = random.uniform();
  const gaps = Array.from({ length: n - 1 }, (_, k) => {
    if (kind < 0.25) return 1;
    if (kind < 0.5) return Math.exp(0.5 * random.normal());
    if (kind < 0.75) return Math.exp(random.normal());
    return 1 + (4 * k) / Math.max(1, n - 2);
  });
  const total = gaps.reduce((sum, g) => sum + g, 0);
  const t = new Float64Array(n);
  for (let k = 1; k < n; k++) t[k] = t[k - 1] + (gaps[k - 1] * span) / total;
  return t;
}

/** Unit noise with memory τ, and a wave in it where a period is given: an Ornstein–Uhlenbeck process. */
function process(t: Float64Array, tau: number, period: number, random: Random): Float64Array {
  let re = random.normal();
  let im = random.normal();
  return t.map((time, k) => {
    if (k > 0) {
      const dt = time - t[k - 1];
      const a = tau > 0 ? Math.exp(-dt / tau) : 0;
      const phase = period > 0 ? (TAU * dt) / period : 0;
      const [c, s] = [a * Math.cos(phase), a * Math.sin(phase)];
      const fresh = Math.sqrt(1 - a * a);
      [re, im] = [
        c * re - s * im + fresh * random.normal(),
        s * re + c * im + fresh * random.normal(),
      ];
    }
    return re;
  });
}

function noiseOf(t: Float64Array, kind: Noise, random: Random): Float64Array {
  switch (kind) {
    case 'white':
      return process(t, 0, 0, random);
    case 'memory':
      return process(t, within(random, 0.1, 0.5), 0, random);
    case 'long memory':
      return process(t, 1.5, 0, random);
    case 'breathing':
      return process(t, within(random, 0.6, 1.5), within(random, 1.3, 1.9), random);
  }
}

const within = (random: Random, low: number, high: number): number =>
  low + (high - low) * random.uniform();
const sign = (random: Random): number => (random.uniform() < 0.5 ? -1 : 1);

export function make(family: Family, n: number, random: Random): Made {
  let span = within(random, 10, 40);
  let t = timesOf(n, span, random);
  const bodies = 10 ** within(random, 2.5, 5);
  const sigmaQ = 0.55 / Math.sqrt(bodies);
  const sigmaR = 0.8 / Math.sqrt(bodies);
  const kinds: Noise[] = ['white', 'memory', 'breathing', 'breathing'];
  const kind = family === 'long memory' ? 'long memory' : kinds[Math.floor(4 * random.uniform())];
  const ratio = noiseOf(t, kind, random).map((x) => 1 + sigmaQ * x);
  const logHalf = noiseOf(t, kind, random).map((x) => sigmaR * x);
  const add = (x: Float64Array, of: (time: number) => number) =>
    x.forEach((_, k) => (x[k] += of(t[k])));
  let wanted: Made['wanted'] = 'settled';
  let settledAt: number | null = null;
  let energyError: Float64Array | null = null;
  let logInner: Float64Array | null = null;
  let relaxationTime: number | null = null;
  const stretch = (to: number) => {
    t = t.map((time) => (time * to) / span);
    span = to;
  };
  switch (family) {
    case 'plain':
    case 'long memory':
      break;
    case 'damped wave':
    case 'monotone': {
      const least = Math.max(sigmaQ, 0.02);
      const size = within(random, 0.1, 0.6);
      const tau = Math.max(0.3, (within(random, 0.08, 0.45) * span) / Math.log(size / least));
      const period = within(random, 0.8, 2);
      const phase = TAU * random.uniform();
      const envelope = (time: number) => size * Math.exp(-time / tau);
      if (family === 'damped wave') {
        add(ratio, (time) => envelope(time) * Math.cos((TAU * time) / period + phase));
        add(logHalf, (time) => 0.5 * envelope(time) * Math.sin((TAU * time) / period + phase));
      } else {
        const way = sign(random);
        add(ratio, (time) => way * envelope(time));
        add(logHalf, (time) => 0.5 * envelope(time));
      }
      settledAt = Math.max(0, tau * Math.log(size / least));
      break;
    }
    case 'early step': {
      const at = within(random, 0.15, 0.5) * span;
      const size = within(random, 0.1, 0.3) * sign(random);
      add(random.uniform() < 0.5 ? ratio : logHalf, (time) => (time < at ? size : 0));
      settledAt = at;
      break;
    }
    case 'late step': {
      const at = within(random, 0.75, 0.95) * span;
      const size = within(random, 0.1, 0.3) * sign(random);
      add(ratio, (time) => (time > at ? size : 0));
      add(logHalf, (time) => (time > at ? -size : 0));
      wanted = 'not settled';
      break;
    }
    case 'drift of r': {
      const size = within(random, 0.1, 0.4) * sign(random);
      add(logHalf, (time) => (size * time) / span);
      wanted = 'drifting';
      break;
    }
    case 'drift of the ratio': {
      const size = within(random, 0.06, 0.2) * sign(random);
      add(ratio, (time) => (size * time) / span);
      wanted = 'drifting';
      break;
    }
    case 'core contraction': {
      const total = within(random, 0.15, 0.6);
      relaxationTime = span * within(random, 0.5, 3);
      const sigma = 1.2 / Math.sqrt(Math.max(bodies, 3000));
      logInner = noiseOf(t, kind, random).map((x, k) => sigma * x - (total * t[k]) / span);
      wanted = 'relaxing';
      break;
    }
    case 'wave':
    case 'slowly damped wave': {
      const slow = family === 'slowly damped wave';
      const size = slow ? within(random, 0.15, 0.5) : within(random, 0.08, 0.4);
      const tau = slow ? within(random, 0.8, 3) * span : Infinity;
      const period = within(random, 0.8, 2.5);
      const phase = TAU * random.uniform();
      add(ratio, (time) => size * Math.exp(-time / tau) * Math.cos((TAU * time) / period + phase));
      add(
        logHalf,
        (time) => 0.4 * size * Math.exp(-time / tau) * Math.sin((TAU * time) / period + phase),
      );
      wanted = 'oscillating';
      break;
    }
    case 'collapse': {
      const size = within(random, 0.6, 1);
      const whole = span;
      ratio.forEach((_, k) => (ratio[k] *= 0.1 + (0.6 * t[k]) / whole));
      add(logHalf, (time) => Math.log(1 - 0.85 * size * (time / whole) ** 2));
      stretch(Math.max(within(random, 1.5, 5), 6.2));
      wanted = 'collapsing';
      break;
    }
    case 'expansion': {
      const level = within(random, 1.3, 2.5);
      const rate = within(random, 0.1, 0.3);
      ratio.forEach((_, k) => (ratio[k] *= level));
      add(logHalf, (time) => Math.log(1 + rate * time));
      wanted = 'expanding';
      break;
    }
    case 'energy error': {
      const size = within(random, 0.03, 0.3) * sign(random);
      const power = within(random, 0.5, 2);
      energyError = t.map((time) => size * (time / span) ** power);
      wanted = 'broken';
      break;
    }
    case 'small energy error': {
      const size = within(random, -0.005, 0.005);
      energyError = t.map((time) => (size * time) / span);
      break;
    }
    case 'short span':
      stretch(within(random, 2, 3.9));
      wanted = 'undecided';
      break;
  }
  const effectiveNumber = family === 'core contraction' ? Math.max(bodies, 3000) : bodies;
  return {
    track: { time: t, ratio, logHalf, logInner, energyError, effectiveNumber, relaxationTime },
    wanted,
    settledAt,
    span,
  };
}
