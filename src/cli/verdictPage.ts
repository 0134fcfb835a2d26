/** The verdict on a run, as a page. */
import type { Verdict } from '../index.ts';
import { figure, short, wholeNumber } from './figure.ts';
import { printable, shorten, wrap } from './layout.ts';
import { asSentence, remarksText } from './remarks.ts';
import type { Paint } from './style.ts';

const WORDS: Record<Verdict['verdict'], string> = {
  settled: 'settled',
  relaxing: 'settled, and relaxing by encounters',
  oscillating: 'still oscillating',
  collapsing: 'collapsing',
  expanding: 'expanding',
  dispersing: 'dispersing',
  drifting: 'drifting',
  broken: 'broken: the energy was not kept',
  undecided: 'undecided',
};

const RATIO = { virialRatio: '2T/|U|', clausiusRatio: '2T/|W|' } as const;
const SETS = {
  whole: 'bodies',
  bound: 'bound bodies',
  pairsMerged: 'bodies, hard pairs as one',
} as const;
const NAME_WIDTH = 60;

export function verdictPage(verdict: Verdict, paint: Paint): string {
  const { ratio, audit, crossingTime } = verdict;
  const good = verdict.verdict === 'settled' || verdict.verdict === 'relaxing';
  const lines = [
    paint[good ? 'good' : 'warn'](WORDS[verdict.verdict]),
    ...verdict.evidence.map(({ text }) => wrap(asSentence(text), '  ')),
    '',
    ...rows([
      [
        'snapshots',
        `${wholeNumber(verdict.snapshots)} over ${short(verdict.span / crossingTime, 3)} crossing times of ${short(crossingTime, 3)}`,
      ],
      ...(verdict.settledAt === null
        ? []
        : ([
            ['settled at', `time ${figure(verdict.settledAt, verdict.settledAtError)}`],
            ['first to use', shorten(verdict.settledFrom ?? '', NAME_WIDTH)],
            [
              'independent',
              `${short(verdict.independentSnapshots ?? 0, 3)} of the snapshots after that; one every ${short(verdict.advisedSpacing ?? 0, 2)} would be`,
            ],
          ] as [string, string][])),
      [
        RATIO[ratio.kind],
        `${figure(ratio.mean, ratio.error)} of the ${SETS[ratio.set]}, mean over the ${good ? 'settled part' : 'second half'}`,
      ],
      ...meansOf(verdict),
      ...(verdict.convergenceRadius === null
        ? []
        : ([
            [
              'relaxed',
              `inside ${short(verdict.convergenceRadius, 3)} by the noise of its own bodies (Power et al. 2003)`,
            ],
          ] as [string, string][])),
      [
        'noise',
        ratio.noise === null
          ? 'not known'
          : `${short(ratio.noise)} (finite N, one realisation against another)`,
      ],
      [
        'energy',
        audit.energyDrift === null
          ? 'not judged'
          : `off by ${short(100 * audit.energyDrift)} % at most; below ${short(100 * audit.energyFloor)} % could not be seen`,
      ],
      ['momentum', `mean velocity off by ${short(audit.momentumDrift)} of the dispersion`],
      ['centre', `off its straight path by ${short(audit.centreDrift)} of the half-mass radius`],
    ]),
    ...(verdict.states.length > 1
      ? [
          '',
          ...verdict.states.map(
            ({ from, to, state }) => `  ${short(from, 4)} to ${short(to, 4)}: ${state}`,
          ),
        ]
      : []),
    ...(verdict.remarks.length > 0 ? ['', remarksText(verdict.remarks, paint)] : []),
  ];
  return `${lines.join('\n')}\n`;
}

const SHOWN = [
  ['halfMassRadius', 'r_h'],
  ['velocityDispersion', 'dispersion'],
] as const;

function meansOf({ means }: Verdict): [string, string][] {
  return SHOWN.flatMap(([key, name]) => {
    const found = means.find(({ quantity }) => quantity === key);
    if (found === undefined) return [];
    const { mean, error, trend, trendError } = found;
    const per = trend === null ? '' : `, ${figure(trend, trendError)} a crossing time`;
    return [[name, `${figure(mean, error)}${per}`] as [string, string]];
  });
}

function rows(list: readonly (readonly [string, string])[]): string[] {
  const width = Math.max(...list.map(([name]) => name.length));
  return list.map(([name, text]) =>
    wrap(printable(text), ' '.repeat(width + 4), `  ${name.padEnd(width)}  `),
  );
}
