/** Findings in what `--with` adds. */
import type { Remark } from '../snapshot/particles.ts';
import type { Balance, ExtraFigures } from './record.ts';

/**
 * 2T_r/T_t beyond which many systems of radial orbits are unstable, and how sharp that is. Source:
 * Polyachenko & Shukhman 1981 (from memory); exceptions both ways are known.
 */
const RADIAL_LIMIT = 1.7;
const RADIAL_LIMIT_WIDTH = 0.25;

/** Remarks on the extras, gravest first. */
export function extraRemarks(figures: ExtraFigures, whole: Balance, softened: boolean): Remark[] {
  return [
    ...hardPairs(figures, whole, softened),
    ...radialOrbits(figures),
    ...thinShells(figures),
    ...velocityPeak(figures),
  ];
}

function hardPairs(
  { hardPairs: number, hardPairsEnergy: energy, pairsMerged: merged }: ExtraFigures,
  whole: Balance,
  softened: boolean,
): Remark[] {
  if (merged === undefined || number === undefined) return [];
  if (number === null) {
    return [
      {
        code: 'noHardPairs',
        text:
          whole.kinetic > 0
            ? 'Hard pairs were not counted: the bodies around a pair are too few to have a temperature.'
            : 'Hard pairs were not counted: nothing moves, so there is no temperature to compare with.',
        remedy: 'Nothing to do; pairsMerged is the balance of the whole.',
      },
    ];
  }
  if (number === 0) return [];
  const name = softened ? '2T/|W|' : '2T/|U|';
  const ratio = softened ? merged.clausiusRatio : merged.virialRatio;
  const share = merged.potential === 0 ? null : (energy ?? 0) / Math.abs(merged.potential);
  const pairs = number === 1 ? '1 hard pair has' : `${number} hard pairs have`;
  const ofWhat = share === null ? '' : `, ${short(100 * share)} % of |U| without them`;
  const each = ratio === null ? '' : ` With each as one body ${name} is ${short(ratio, 4)}.`;
  return [
    {
      code: 'hardPairs',
      text: `${pairs} a binding energy of ${short(energy ?? 0)}${ofWhat}.${each}`,
      remedy: 'Judge equilibrium by pairsMerged: a hard pair swings about its own balance.',
    },
  ];
}

function radialOrbits({
  shells,
  radialToTangential: ratio,
  radialToTangentialError: error,
}: ExtraFigures): Remark[] {
  if (shells === undefined || ratio === undefined) return [];
  if (ratio === null) {
    const moves = shells.radialDispersion.some((s) => s !== null && s > 0);
    return [
      {
        code: 'noRadialToTangential',
        text: `There is no 2T_r/T_t: ${moves ? 'all motion is along the radius' : 'nothing moves across the radius'}.`,
        remedy: moves ? 'Expect a radial-orbit instability.' : 'Nothing to do for a cold start.',
      },
    ];
  }
  if (!(ratio - (error ?? 0) > RADIAL_LIMIT - RADIAL_LIMIT_WIDTH)) return [];
  return [
    {
      code: 'radialOrbits',
      text: `2T_r/T_t is ${short(ratio)} ± ${short(error ?? 0, 2)}: systems above ${RADIAL_LIMIT} ± ${RADIAL_LIMIT_WIDTH} tend to be unstable, become bars and change their profile.`,
      remedy: 'Watch the shape in time; this is a caution, since exceptions are known both ways.',
    },
  ];
}

/** Lists of figures of which some are null, each for the same few reasons. */
function thinShells({ shells, profiles }: ExtraFigures): Remark[] {
  const lists = [
    ...(shells
      ? [shells.radialVelocity, shells.radialDispersion, shells.anisotropy, shells.rotation]
      : []),
    ...(profiles ? [profiles.density, profiles.circularVelocity, profiles.escapeVelocity] : []),
  ];
  const isMissing = lists.some((list) => list.some((figure) => figure === null));
  if (!isMissing) return [];
  return [
    {
      code: 'thinShells',
      text: 'Some figures of shells cannot be told: shells of fewer than three effective bodies or of no thickness, or bodies without radial motion or without any rotation.',
      remedy: 'Ask for fewer shells with --shells, unless the bodies are few or cold by intent.',
    },
  ];
}

function velocityPeak({ profiles }: ExtraFigures): Remark[] {
  if (profiles === undefined) return [];
  if (profiles.peakRadius === null) {
    return [
      {
        code: 'noVelocityPeak',
        text: 'The circular velocity has no greatest value: it falls from the innermost bodies on, or they are too few.',
        remedy: 'Nothing to do for a heavy central body, a steep cusp or a few bodies.',
      },
    ];
  }
  if (profiles.peakRadiusError !== null) return [];
  return [
    {
      code: 'velocityPeakEdge',
      text: 'The circular velocity is greatest near the edge, or too few bodies show its peak: the radius is that of one body and has no error.',
      remedy: 'Take the radius as a rough one.',
    },
  ];
}

function short(value: number, digits = 3): string {
  return String(Number(value.toPrecision(digits)));
}
