/** Findings that a user should see beside the figures, each with a remedy. */
import type { Forces } from '../octree/forces.ts';
import { PROMISED_SIGMAS } from '../octree/forces.ts';
import type { Particles, Remark } from '../snapshot/particles.ts';
import { UNIT_SYSTEMS } from '../snapshot/units.ts';
import { FEWEST_FOR_NOISE } from './balance.ts';
import type { BoundSet } from './bound.ts';
import type { Duplicates } from './duplicates.ts';
import { fileForceRemarks } from './fileForceRemarks.ts';
import type { FileForces } from './fileForces.ts';
import type { CentreMethod, MeasureRecord } from './record.ts';
import type { SetFrame } from './sums.ts';
import { LEAST_LAMBDA } from './times.ts';

/** All that findings are made from; figures as they will stand in the record. */
export interface Findings {
  readonly particles: Particles;
  readonly record: Omit<MeasureRecord, 'remarks' | 'engine'>;
  readonly frame: SetFrame;
  readonly forces: Forces;
  readonly bound: BoundSet;
  readonly centreAsked: CentreMethod;
  readonly largestMass: number;
  readonly duplicates: Duplicates;
  readonly coincident: readonly (readonly [number, number])[];
  /** What potentials and accelerations of the file are, if they were looked at. */
  readonly fileForces: FileForces | null;
}

const WIDE_MASS_SPECTRUM = 0.1;
const BULK_MOTION = 0.1;
const UNBOUND_SHARE = 1e-3;
const SCALE_OFF = 100;

/** Remarks of the reader first, then findings from what is gravest to what is merely good to know. */
export function findRemarks(findings: Findings): Remark[] {
  const remarks: Remark[] = [...findings.particles.origin.remarks];
  for (const find of FINDERS) remarks.push(...find(findings));
  return remarks;
}

type Finder = (findings: Findings) => Remark[];

const FINDERS: readonly Finder[] = [
  noRatio,
  errorPromise,
  inFileForces,
  coincidentBodies,
  duplicateIds,
  precision,
  scale,
  dominantBody,
  noNoise,
  softeningOfBodies,
  softeningTooLarge,
  softenedRatio,
  unbound,
  bulkMotion,
  massSpectrum,
  tracers,
  centre,
  relaxation,
];

function noRatio({ record, frame }: Findings): Remark[] {
  const { whole } = record;
  if (whole.virialRatio === null) {
    const reason =
      frame.heavy < 2
        ? `U is 0, since ${frame.heavy === 1 ? 'only one body has' : 'no body has'} mass`
        : 'U is 0';
    return [
      {
        code: 'noRatio',
        text: `There is no virial ratio: ${reason}.`,
        remedy: 'Give a snapshot of at least two bodies with mass, apart from each other.',
      },
    ];
  }
  if (whole.kinetic > 0) return [];
  return [
    {
      code: 'cold',
      text: 'T is 0: no body moves against the others, so the system is about to collapse.',
      remedy: 'Check that velocities were written, or read this as a cold start.',
    },
  ];
}

function errorPromise({ forces, record }: Findings): Remark[] {
  const { error } = record.settings;
  if (forces.origin === 'file') return []; // How far the file is off is not ours to mend.
  const reached = (PROMISED_SIGMAS * forces.potentialError) / Math.abs(forces.potentialEnergy);
  if (!(reached > error.value)) return [];
  return [
    {
      code: 'errorNotReached',
      text: `The relative error of U is only known to be below ${short(reached)}, not ${short(error.value)} as asked.`,
      remedy:
        forces.origin === 'direct'
          ? 'Use a larger --error: these are direct sums, which double precision bounds.'
          : 'Use --exact for direct sums, or a larger --error.',
    },
  ];
}

function inFileForces({ fileForces, record, forces }: Findings): Remark[] {
  if (fileForces === null) return [];
  const { gravity, softening } = record.settings;
  return fileForceRemarks({
    fit: fileForces,
    gravity: gravity.value,
    softened: softening.value.kernel !== 'none',
    used: forces.origin === 'file',
  });
}

function coincidentBodies({ forces, coincident }: Findings): Remark[] {
  if (forces.coincidentPairs === 0) return [];
  const named = coincident.map(([a, b]) => `${a} and ${b}`).join(', ');
  const more = forces.coincidentPairs > coincident.length ? ', …' : '';
  return [
    {
      code: 'coincidentBodies',
      text: `${count(forces.coincidentPairs, 'pair')} of bodies lie at one point and are left out of U (index ${named}${more}).`,
      remedy:
        'State the softening of the run, or use --coincident refuse to treat this as an error.',
    },
  ];
}

function duplicateIds({ duplicates }: Findings): Remark[] {
  if (duplicates.count === 0) return [];
  return [
    {
      code: 'duplicateIds',
      text: `${count(duplicates.count, 'body', 'bodies')} share an id with another, the first at index ${duplicates.firstIndex} (id ${duplicates.firstId}).`,
      remedy: 'Look whether the snapshot was written twice or joined from overlapping parts.',
    },
  ];
}

/** Rounding of single precision against the size and speed of the system itself. */
function precision({ particles, record, frame }: Findings): Remark[] {
  const bits = particles.origin.mantissaBits;
  const { halfMassRadius, velocityDispersion } = record;
  if (bits >= 53 || halfMassRadius === 0) return [];
  const unit = 2 ** -bits;
  const far = Math.hypot(frame.frame[0], frame.frame[1], frame.frame[2]) + halfMassRadius;
  const fast = Math.hypot(frame.frame[3], frame.frame[4], frame.frame[5]) + velocityDispersion;
  const position = (far * unit) / halfMassRadius;
  const velocity = velocityDispersion > 0 ? (fast * unit) / velocityDispersion : 0;
  const spacing = Math.cbrt(1 / Math.max(1, frame.particles));
  if (position < 0.01 * spacing && velocity < 1e-5) return [];
  return [
    {
      code: 'float32Limits',
      text: `The file holds ${bits === 24 ? 'single' : 'half'} precision: positions are rounded to ${short(position)} of the half-mass radius, velocities to ${short(velocity)} of the dispersion.`,
      remedy: 'Write double precision, or write positions and velocities about the centre of mass.',
    },
  ];
}

/** A ratio far from 1 by orders of magnitude means wrong units more often than dynamics. */
function scale({ record }: Findings): Remark[] {
  const ratio = record.whole.virialRatio;
  if (ratio === null || ratio === 0 || (ratio < SCALE_OFF && ratio > 1 / SCALE_OFF)) return [];
  const implied = record.settings.gravity.value * ratio;
  const fits = Object.values(UNIT_SYSTEMS).find(
    ({ gravity }) => Math.abs(Math.log(implied / gravity)) < Math.LN2,
  );
  const hint = fits ? `, close to that of ${fits.name} (${short(fits.gravity)})` : '';
  return [
    {
      code: 'unitsUnlikely',
      text: `2T/|U| is ${short(ratio)}; it would be 1 with G = ${short(implied)}${hint}.`,
      remedy: fits
        ? `Check the units; if they are these, use --units ${fits.name}.`
        : 'Check --units and --gravity; if they are right, the system is far from equilibrium.',
    },
  ];
}

function dominantBody({ largestMass, frame }: Findings): Remark[] {
  if (frame.heavy < 3 || !(largestMass > 0.5 * frame.mass)) return [];
  return [
    {
      code: 'dominantBody',
      text: `One body holds ${percent(largestMass / frame.mass)} of the mass, so r_v, the effective number, crossing and relaxation times and the noise do not describe this system.`,
      remedy:
        'Take the orbital period of the heaviest pair as the unit of time, and average over many.',
    },
  ];
}

function noNoise({ record, frame, largestMass }: Findings): Remark[] {
  const { noise, virialRatio, kinetic } = record.whole;
  if (noise !== null || virialRatio === null || kinetic === 0) return [];
  if (largestMass > 0.5 * frame.mass && frame.heavy > 2) return []; // said by dominantBody
  return [
    {
      code: 'noNoise',
      text: `There is no noise of the ratio: ${short(record.effectiveNumber)} effective bodies are too few for statistics (at least ${FEWEST_FOR_NOISE}).`,
      remedy: 'Average the ratio over many orbits instead of judging one moment.',
    },
  ];
}

function softeningOfBodies({ particles, record }: Findings): Remark[] {
  const { value, from } = record.settings.softening;
  const { kernel, length, ofBodies } = value;
  if (from === 'default' && particles.origin.hasMoreSoftening === true) {
    return [
      {
        code: 'softeningUnused',
        text: 'The file has softening lengths of single bodies, and they are not used.',
        remedy:
          'Use them with --softening column, or state one length with --softening (0 for none).',
      },
    ];
  }
  if (ofBodies === undefined || kernel !== 'plummer') return [];
  if (ofBodies.least !== ofBodies.greatest || length === 0) return [];
  return [
    {
      code: 'softeningOfPairs',
      text: `All bodies have the softening length ${short(ofBodies.least)}, so that each pair has ${short(length)}: squares of two lengths add up.`,
      remedy: `If the run softens pairs by ${short(ofBodies.least)}, state that with --softening in place of "column".`,
    },
  ];
}

function softeningTooLarge({ record }: Findings): Remark[] {
  const { length, ofBodies } = record.settings.softening.value;
  const { coreRadius } = record;
  if (coreRadius === null || !(length > coreRadius)) return [];
  return [
    {
      code: 'softeningLarge',
      text: `The softening length ${short(length)}${ofBodies === undefined ? '' : ' of a typical pair'} is larger than the core radius ${short(coreRadius)}: the core is shaped by it.`,
      remedy: 'Trust nothing inside about three softening lengths, or run with a smaller one.',
    },
  ];
}

function softenedRatio({ record }: Findings): Remark[] {
  const { potential, clausius } = record.whole;
  const { kernel } = record.settings.softening.value;
  if (kernel === 'none' || potential === 0) return [];
  const gap = 1 - clausius / potential;
  if (!(gap > 1e-3)) return [];
  return [
    {
      code: 'softenedRatio',
      text: `Softening makes |W| smaller than |U| by ${percent(gap)}: in equilibrium 2T/|W| is 1 and 2T/|U| is ${short(1 - gap)}.`,
      remedy: 'Judge equilibrium by 2T/|W|.',
    },
  ];
}

function unbound({ record, bound }: Findings): Remark[] {
  const remarks: Remark[] = [];
  const { whole } = record;
  const lost = whole.mass > 0 ? 1 - record.bound.mass / whole.mass : 0;
  if (whole.virialRatio === null) return remarks;
  if (record.bound.particles === 0) {
    remarks.push({
      code: 'nothingBound',
      text: 'No body is bound to the others: the system is dispersing, or units or G are wrong.',
      remedy: 'Check --units, --gravity and the unit of velocity.',
    });
  } else if (lost > UNBOUND_SHARE) {
    const share = percent(lost);
    remarks.push({
      code: 'unboundMass',
      text: `${share} of the mass (${count(whole.particles - record.bound.particles, 'body', 'bodies')}) is not bound and raises the ratio of the whole.`,
      remedy: 'Judge equilibrium by the bound set.',
    });
  }
  if (!bound.settled) {
    remarks.push({
      code: 'boundSetUnsettled',
      text: `The bound set still changed after ${bound.rounds} rounds of unbinding.`,
      remedy: 'Treat the bound set as a rough one: the system is barely bound.',
    });
  }
  return remarks;
}

function bulkMotion({ record, frame }: Findings): Remark[] {
  const speed = Math.hypot(frame.frame[3], frame.frame[4], frame.frame[5]);
  const { velocityDispersion } = record;
  if (!(speed > BULK_MOTION * velocityDispersion) || frame.heavy < 2 || velocityDispersion === 0) {
    return [];
  }
  return [
    {
      code: 'bulkMotion',
      text: `The system moves as a whole at ${short(speed)}, ${short(speed / velocityDispersion)} times its velocity dispersion; T is about the mean velocity.`,
      remedy: 'Nothing to do for the figures here; other tools may count this motion as heat.',
    },
  ];
}

function massSpectrum({ record, frame }: Findings): Remark[] {
  const { effectiveNumber, settings } = record;
  const share = effectiveNumber / Math.max(1, frame.heavy);
  if (!(share < WIDE_MASS_SPECTRUM) || settings.coulombFactor.from !== 'default') return [];
  return [
    {
      code: 'wideMassSpectrum',
      text: `Masses are so unequal that ${frame.heavy} bodies count as ${short(effectiveNumber)}; the factor 0.11 in the Coulomb logarithm is for equal masses.`,
      remedy: 'Use --coulomb-factor 0.02 (Giersz & Heggie 1996) for a wide spectrum of masses.',
    },
  ];
}

function tracers({ frame }: Findings): Remark[] {
  const massless = frame.particles - frame.heavy;
  if (massless === 0) return [];
  return [
    {
      code: 'tracers',
      text: `${count(massless, 'body', 'bodies')} without mass take no part in T, U, radii and dispersions.`,
      remedy: 'Nothing to do if they are meant as tracers.',
    },
  ];
}

function centre({ centreAsked, record }: Findings): Remark[] {
  const used = record.frame.centreMethod;
  if (used === centreAsked) {
    if (record.coreRadius !== null) return [];
    return [
      {
        code: 'noCoreRadius',
        text: 'There is no core radius: it needs the densities of at least eight bodies.',
        remedy: 'Nothing to do for so few bodies.',
      },
    ];
  }
  return [
    {
      code: 'centreFallback',
      text: `There are too few bodies for a centre by ${centreAsked}; the centre of ${used} is used, and there is no core radius.`,
      remedy: 'Use --centre mass for systems of a few bodies.',
    },
  ];
}

function relaxation({ record, frame }: Findings): Remark[] {
  if (record.relaxation.time !== null) return [];
  const factor = record.relaxation.coulombFactor;
  if (factor * frame.heavy > LEAST_LAMBDA) {
    const { length } = record.settings.softening.value;
    return [
      {
        code: 'noRelaxationTime',
        text: `There is no relaxation time: with a softening length of ${short(length)} and a half-mass radius of ${short(record.halfMassRadius)} encounters are softened away.`,
        remedy: 'Nothing to do if the run is meant to be collisionless; else check --softening.',
      },
    ];
  }
  return [
    {
      code: 'noRelaxationTime',
      text: `There is no relaxation time: with N = ${frame.heavy} and a Coulomb factor of ${factor} encounters are not many and weak.`,
      remedy: 'Follow the orbits of so few bodies one by one.',
    },
  ];
}

/** A figure for a sentence. */
function short(value: number): string {
  return String(Number(value.toPrecision(3)));
}

function percent(share: number): string {
  return `${short(100 * share)} %`;
}

function count(n: number, one: string, many = `${one}s`): string {
  return `${n} ${n === 1 ? one : many}`;
}
