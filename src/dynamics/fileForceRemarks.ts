/** Findings in the potentials and accelerations that a simulation wrote. */
import type { Remark } from '../snapshot/particles.ts';
import type { ColumnFit, FileForces } from './fileForces.ts';
import { SAME_GRAVITY } from './forcesFromFile.ts';
import { knownGravityNear } from './knownGravity.ts';

/** Left over by the fit, over the forces: beyond it the file and we do not speak of the same forces. */
const MUCH_MISFIT = 0.03;
/** A scale off 1 is told if it is off by so many of its σ. */
const SIGMAS = 5;

export interface FileForceFindings {
  readonly fit: FileForces;
  /** G that our own sums were done with. */
  readonly gravity: number;
  readonly softened: boolean;
  /** True if U and W were taken from the file, false if it was only compared. */
  readonly used: boolean;
}

export function fileForceRemarks(findings: FileForceFindings): Remark[] {
  return [
    ...partly(findings),
    ...otherGravity(findings),
    ...conventions(findings),
    ...offset(findings),
    ...misfit(findings),
  ];
}

/** What is taken from the file if it does not have all. */
function partly({ fit, softened, used }: FileForceFindings): Remark[] {
  if (!used || (fit.potential && (fit.acceleration || !softened))) return [];
  const text = fit.potential
    ? 'The file has potentials but no accelerations: U is that of the file, and W our own sum, since forces are softened.'
    : fit.acceleration
      ? 'The file has accelerations but no potentials: W is that of the file, and U our own sum.'
      : 'One body alone has no forces to take from the file.';
  return [
    {
      code: 'forcesPartly',
      text,
      remedy: 'Write both columns, or leave out --forces file.',
    },
  ];
}

const isOff = ({ scale, scaleError }: ColumnFit): boolean =>
  scale > 0 && Math.abs(scale - 1) > Math.max(SAME_GRAVITY, SIGMAS * scaleError);

function otherGravity({ fit, gravity }: FileForceFindings): Remark[] {
  const { potential, acceleration } = fit;
  if (potential && isOff(potential)) {
    const both = acceleration !== null && agree(potential, acceleration);
    return [
      withGravity(both ? 'potentials and accelerations' : 'potentials', potential, gravity),
      ...(acceleration && !both && isOff(acceleration) ? [withUnit(acceleration)] : []),
    ];
  }
  if (acceleration && isOff(acceleration)) {
    return [
      potential ? withUnit(acceleration) : withGravity('accelerations', acceleration, gravity),
    ];
  }
  return [];
}

function agree(a: ColumnFit, b: ColumnFit): boolean {
  return Math.abs(a.scale / b.scale - 1) <= SAME_GRAVITY;
}

function withGravity(what: string, { scale, scaleError }: ColumnFit, gravity: number): Remark {
  const found = gravity * scale;
  const known = knownGravityNear(found, scaleError / scale);
  const hint = known ? `, that of ${known.words}` : '';
  return {
    code: 'forcesGravity',
    text: `The ${what} in the file are those of G = ${figure(found, gravity * scaleError)}${hint}, where G = ${short(gravity, 6)} is used.`,
    remedy: known
      ? `If the file is right, use ${known.remedy}.`
      : `Check --units and --gravity, or the scale of these columns; if the file is right, use --gravity ${short(found, 6)}.`,
  };
}

/** pc/(km/s) in Myr: what a unit of time made of others is off the round one. Source: IAU 2015 B3. */
const TIME_OFF = 0.9777922216808;
const UNITS: readonly { readonly factor: number; readonly words: string }[] = [
  { factor: TIME_OFF, words: 'km/s a Myr against (km/s)²/pc, or a Gyr against (km/s)²/kpc' },
  { factor: TIME_OFF ** 2, words: 'pc/Myr² against (km/s)²/pc, or kpc/Gyr² against (km/s)²/kpc' },
];

/** Accelerations that are off alone are in another unit: G would change the potentials too. */
function withUnit({ scale, scaleError }: ColumnFit): Remark {
  const tolerance = Math.max(0.002, 3 * (scaleError / scale));
  const unit = UNITS.flatMap(({ factor, words }) => [
    { factor: 1 / factor, words },
    { factor, words: `${words}, the other way round` },
  ]).find(({ factor }) => Math.abs(Math.log(scale / factor)) < tolerance);
  return {
    code: 'forcesGravity',
    text: `The accelerations in the file are ${figure(scale, scaleError)} times ours while the potentials agree: they are in another unit${unit ? ` (${unit.words})` : ''}.`,
    remedy: `Give accelerations in the unit of velocity squared over that of length, for instance by a scale of ${short(1 / scale, 6)} in the layout.`,
  };
}

function conventions({ fit, used }: FileForceFindings): Remark[] {
  const { potential, acceleration } = fit;
  const taken = used ? 'are used' : 'are compared';
  const remarks: Remark[] = [];
  if (potential?.flipped) {
    remarks.push({
      code: 'potentialSign',
      text: `The potentials in the file grow inwards, as binding energies do; they ${taken} with the other sign.`,
      remedy: 'Nothing to do; a scale of -1 in the layout would say so for good.',
    });
  }
  if (acceleration?.flipped) {
    remarks.push({
      code: 'accelerationSign',
      text: `The accelerations in the file point away from the mass; they ${taken} with the other sign.`,
      remedy: 'Check the sign in the code that wrote them, or state a scale of -1 in the layout.',
    });
  }
  if (potential?.selfTerm) {
    remarks.push({
      code: 'potentialSelfTerm',
      text: `The potentials in the file hold that of each body at its own place, which belongs to no pair; they ${taken} without it.`,
      remedy: 'Nothing to do; other tools may count it in U.',
    });
  }
  return remarks;
}

function offset({ fit }: FileForceFindings): Remark[] {
  const { potential } = fit;
  if (!potential || potential.offset === 0) return [];
  const { offset: share, offsetSoftening: length } = potential;
  return [
    {
      code: 'potentialOffset',
      text: `The potentials in the file differ from our own by a constant of ${short(share)} times their mean size, which is no self term at the softening stated.`,
      remedy:
        length === null
          ? 'Check the softening, and whether the potentials vanish far away.'
          : `State the softening: a self term at a length of ${short(length)} would explain it.`,
    },
  ];
}

function misfit({ fit }: FileForceFindings): Remark[] {
  const names = (['potential', 'acceleration'] as const).filter(
    (name) => (fit[name]?.misfit ?? 0) > MUCH_MISFIT,
  );
  if (names.length === 0) return [];
  const parts = names.map((name) => `${short(100 * (fit[name]?.misfit ?? 0))} % of ${name}`);
  return [
    {
      code: 'forcesDiffer',
      text: `Our own sums do not explain the forces in the file: ${parts.join(' and ')} is left over.`,
      remedy:
        'Check --softening and its kernel, external fields, and whether forces and positions were written at one time.',
    },
  ];
}

/** Errors below this share of a figure do not show in its six digits. */
const NO_ERROR = 1e-6;

/** A figure to where its error begins, two digits of that shown. */
function figure(value: number, error: number): string {
  if (!(error > NO_ERROR * Math.abs(value))) return short(value, 6);
  const digits = Math.floor(Math.log10(Math.abs(value))) - Math.floor(Math.log10(error)) + 2;
  return `${short(value, Math.max(1, digits))} ± ${short(error, 2)}`;
}

function short(value: number, digits = 3): string {
  return String(Number(value.toPrecision(digits)));
}
