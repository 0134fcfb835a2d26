/** One record as a page for people. */
import {
  recordUnits,
  unitText,
  yearsPerTimeUnit,
  type MeasureRecord,
  type Selection,
  type UnitSystem,
} from '../index.ts';
import { duration, figure, short, vectorText, wholeNumber, yearsText } from './figure.ts';
import { columns, signRoom } from './columns.ts';
import { extrasBlocks } from './extrasTable.ts';
import { PAGE_WIDTH, shorten, wrap } from './layout.ts';
import { isSoftened, noiseOf, ratioWords } from './ratioWords.ts';
import { remarksText } from './remarks.ts';
import { NO_PAINT, type Paint } from './style.ts';
import { unitOf } from './unitOf.ts';

/** The page of a record; no line is wider than 80 columns, and it ends with a line break. */
export function recordTable(record: MeasureRecord, paint: Paint = NO_PAINT): string {
  const units = recordUnits(record);
  const parts = [
    heading(record, paint),
    ratio(record, paint),
    energies(record, units, paint),
    radii(record, units, paint),
    scalars(record, units),
    frame(record, units),
    ...extrasBlocks(record, units, paint),
    engine(record, paint),
    // What softening does to the ratio stands beside the ratio already.
    remarksText(
      record.remarks.filter(({ code }) => code !== 'softenedRatio'),
      paint,
    ),
  ];
  return `${parts.filter((part) => part !== '').join('\n\n')}\n`;
}

function heading(record: MeasureRecord, paint: Paint): string {
  const { gravity, units, softening } = record.settings;
  const { kernel, length, support, ofBodies } = softening.value;
  const lengthUnit = unitText({ mass: 0, length: 1, time: 0 }, recordUnits(record));
  const softened =
    kernel === 'none'
      ? `no softening (${softening.from})`
      : `${kernel} softening ${
          ofBodies === undefined
            ? withUnit(short(length, 6), lengthUnit)
            : `of each body, ${short(ofBodies.least, 6)} to ${withUnit(short(ofBodies.greatest, 6), lengthUnit)}`
        }${support === null ? '' : `, Newtonian beyond ${short(support, 6)}`} (${softening.from})`;
  const time =
    record.time === null
      ? 'time not stated'
      : `time ${withUnit(short(record.time, 8), unitText(TIME, recordUnits(record)))}`;
  const said = `units ${units.value} (${units.from}), G\u00a0=\u00a0${short(gravity.value, 9)} (${gravity.from})`;
  const facts = `${bodies(record.whole.particles)}, ${time}, ${said}, ${softened}`;
  const run =
    record.runFile === null ? '' : `\n${wrap(`with the run file ${record.runFile}`, '  ')}`;
  const { selection } = record;
  const chosen = selection === undefined ? '' : `\n${wrap(selectionText(selection), '  ')}`;
  return `${paint.strong(shorten(record.file, PAGE_WIDTH))}\n${wrap(facts, '  ')}${chosen}${run}`;
}

/** `selected of 5,000: component dark, within 2 of (1, 0, 0)` */
function selectionText({ only, group, within, about, of }: Selection): string {
  const parts = [
    only === null ? null : `component ${only}`,
    group === null ? null : `group ${group}`,
    within === null || about === null
      ? null
      : `within ${short(within, 6)} of (${about.map((value) => short(value, 6)).join(', ')})`,
  ];
  return `selected of ${wholeNumber(of)}: ${parts.filter((part) => part !== null).join(', ')}`;
}

const TIME = { mass: 0, length: 0, time: 1 } as const;

function ratio(record: MeasureRecord, paint: Paint): string {
  const { name, figure: text, words, tone } = ratioWords(record);
  const lines = [paint.strong(`${name}  ${text}`), `  ${paint[tone](words)}`];
  if (isSoftened(record)) {
    const { potential, clausius, virialRatio } = record.whole;
    const share = potential === 0 ? null : Math.abs(clausius / potential);
    lines.push(
      wrap(
        `With softened forces 2T/|W| is the ratio that is 1 in equilibrium; 2T/|U| is ${figure(virialRatio)} here and would be |W/U| = ${figure(share)}.`,
        '  ',
      ),
    );
  }
  return lines.join('\n');
}

type Sets = 'whole' | 'bound';

function energies(record: MeasureRecord, units: UnitSystem, paint: Paint): string {
  const { whole, bound } = record;
  const same = bound.particles === whole.particles;
  const sets: Sets[] = same ? ['whole'] : ['whole', 'bound'];
  const row = (label: string, cell: (name: Sets) => string): string[] => [
    label,
    ...sets.map((name) => signRoom(cell(name))),
  ];
  const softened = isSoftened(record);
  const rows = [
    ['', ...(same ? [' all bodies (all are bound)'] : [' all bodies', ' bound bodies'])],
    row('bodies', (name) => wholeNumber(record[name].particles)),
    row('mass', (name) => figure(record[name].mass)),
    row('T', (name) => figure(record[name].kinetic)),
    // Without softening the two are one.
    row(softened ? 'U' : 'U = W', (name) =>
      figure(record[name].potential, record[name].potentialError),
    ),
    ...(softened
      ? [row('W', (name) => figure(record[name].clausius, record[name].clausiusError))]
      : []),
    row('T + U', (name) => figure(record[name].energy, record[name].potentialError)),
    row('2T/|U|', (name) => figure(record[name].virialRatio, noiseOf(record, name))),
    ...(softened
      ? [row('2T/|W|', (name) => figure(record[name].clausiusRatio, noiseOf(record, name)))]
      : []),
  ];
  const table = columns(rows, ['left', 'left', 'left'], '  ').split('\n');
  // Beside the labels they would make the lines of two sets too wide for a page.
  const [mass, energy] = ['whole.mass', 'whole.kinetic'].map((key) => unitOf(key, units));
  const unitLine = mass === '' ? [] : [paint.faint(`  masses in ${mass}, energies in ${energy}`)];
  return [paint.faint(table[0]), ...table.slice(1), ...unitLine].join('\n');
}

function radii(record: MeasureRecord, units: UnitSystem, paint: Paint): string {
  const { lagrangian, boundLagrangian, whole, bound } = record;
  const unit = unitText({ mass: 0, length: 1, time: 0 }, units);
  const hasBound = bound.particles !== whole.particles && boundLagrangian.radii.length > 0;
  const rows = lagrangian.fractions.map((fraction, i) => [
    `${short(fraction * 100, 6)} %`,
    signRoom(figure(lagrangian.radii[i] ?? null, lagrangian.errors[i] ?? null)),
    ...(hasBound
      ? [signRoom(figure(boundLagrangian.radii[i] ?? null, boundLagrangian.errors[i] ?? null))]
      : []),
  ]);
  const head = [
    'within',
    ` radius${unit === '' ? '' : ` [${unit}]`}, all mass`,
    ...(hasBound ? [' bound mass'] : []),
  ];
  const table = columns([head, ...rows], ['right', 'left', 'left'], '  ').split('\n');
  return [paint.faint(table[0]), ...table.slice(1)].join('\n');
}

function scalars(record: MeasureRecord, units: UnitSystem): string {
  const { relaxation } = record;
  const half = record.lagrangian.fractions.indexOf(0.5);
  const lnText =
    relaxation.coulombLogarithm === null
      ? ''
      : `  lnΛ ${short(relaxation.coulombLogarithm, 4)}, γ ${short(relaxation.coulombFactor, 4)}`;
  const years = yearsPerTimeUnit(units);
  const time = (value: number | null): string =>
    figure(value) + (value === null || years === null ? '' : `  = ${yearsText(value * years)}`);
  const rows: [label: string, text: string][] = [
    [
      labelled('half-mass radius', 'halfMassRadius', units),
      figure(record.halfMassRadius, record.lagrangian.errors[half] ?? null),
    ],
    [labelled('virial radius', 'virialRadius', units), figure(record.virialRadius)],
    [labelled('core radius', 'coreRadius', units), figure(record.coreRadius)],
    [labelled('dispersion, 1-D', 'velocityDispersion', units), figure(record.velocityDispersion)],
    [labelled('crossing time', 'crossingTime', units), time(record.crossingTime)],
    [labelled('relaxation time', 'relaxation.time', units), time(relaxation.time) + lnText],
    [labelled('moment of inertia', 'momentOfInertia', units), figure(record.momentOfInertia)],
    [labelled('its rate', 'momentOfInertiaRate', units), figure(record.momentOfInertiaRate)],
    ...acceleration(record, units),
    ['effective number', figure(record.effectiveNumber)],
  ];
  return columns(
    rows.map(([label, text]) => [label, signRoom(text)]),
    ['left', 'left'],
    '  ',
  );
}

/** Of the moment of inertia, if it was asked for. */
function acceleration(record: MeasureRecord, units: UnitSystem): [label: string, text: string][] {
  const key = 'momentOfInertiaAcceleration';
  const { [key]: value, momentOfInertiaAccelerationNoise: noise } = record;
  if (value === undefined) return [];
  const text = `${figure(value, noise)}${noise === null ? '' : ' (finite N)'}, 0 in equilibrium`;
  return [[labelled('d²I/dt²', key, units), text]];
}

function frame(record: MeasureRecord, units: UnitSystem): string {
  const { frame: found, halfMassRadius, velocityDispersion, whole } = record;
  const momentum = whole.mass * halfMassRadius * velocityDispersion;
  const rows = [
    [
      labelled('centre of mass', 'frame.centreOfMass', units),
      vectorText(found.centreOfMass, halfMassRadius),
    ],
    [
      labelled(`centre (${found.centreMethod})`, 'frame.centre', units),
      vectorText(found.centre, halfMassRadius),
    ],
    [
      labelled('mean velocity', 'frame.meanVelocity', units),
      vectorText(found.meanVelocity, velocityDispersion),
    ],
    [
      labelled('angular momentum', 'frame.angularMomentum', units),
      vectorText(found.angularMomentum, momentum),
    ],
  ];
  return columns(
    rows.map(([label, text]) => [label, signRoom(text)]),
    ['left', 'left'],
    '  ',
  );
}

function engine(record: MeasureRecord, paint: Paint): string {
  const { origin, order, errorMeasured, errorWanted, threads, seconds } = record.engine;
  const how = {
    tree: `tree walked cell by cell, order ${order}`,
    direct: 'direct sum over all pairs',
    file: 'U and W from the file',
  }[origin];
  const exact =
    origin === 'file'
      ? `U within ${short(errorMeasured)} of our own sum`
      : `U to ${short(errorMeasured)} of itself (asked for ${short(errorWanted)})`;
  const text = `${how}; ${exact}; ${threads}\u00a0thread${threads === 1 ? '' : 's'}, ${duration(seconds.total)}`;
  return paint.faint(wrap(text, '  '));
}

/** `virial radius [pc]`: a label and the unit that the registry's dimension has in these units. */
function labelled(label: string, key: string, units: UnitSystem): string {
  const unit = unitOf(key, units);
  return unit === '' ? label : `${label} [${unit}]`;
}

function withUnit(text: string, unit: string): string {
  return unit === '' ? text : `${text} ${unit}`;
}

function bodies(count: number): string {
  return `${wholeNumber(count)} ${count === 1 ? 'body' : 'bodies'}`;
}
