/** One record as a page for people. */
import {
  findQuantity,
  UNIT_SYSTEMS,
  unitText,
  yearsPerTimeUnit,
  type MeasureRecord,
  type UnitSystem,
} from '../index.ts';
import { duration, figure, short, vectorText, wholeNumber, yearsText } from './figure.ts';
import { columns, PAGE_WIDTH, shorten, signRoom, wrap } from './layout.ts';
import { isSoftened, ratioWords } from './ratioWords.ts';
import { remarksText } from './remarks.ts';
import { NO_PAINT, type Paint } from './style.ts';

/** The page of a record; no line is wider than 80 columns, and it ends with a line break. */
export function recordTable(record: MeasureRecord, paint: Paint = NO_PAINT): string {
  const units = unitSystemOf(record);
  const parts = [
    heading(record, paint),
    ratio(record, paint),
    energies(record, units, paint),
    radii(record, units, paint),
    scalars(record, units),
    frame(record, units),
    engine(record, paint),
    remarksText(record.remarks, paint),
  ];
  return `${parts.filter((part) => part !== '').join('\n\n')}\n`;
}

function unitSystemOf(record: MeasureRecord): UnitSystem {
  const known = UNIT_SYSTEMS as Readonly<Record<string, UnitSystem>>;
  const name = record.settings.units.value;
  return Object.hasOwn(known, name) ? known[name] : UNIT_SYSTEMS.natural;
}

function heading(record: MeasureRecord, paint: Paint): string {
  const { gravity, units, softening } = record.settings;
  const { kernel, length, support } = softening.value;
  const lengthUnit = unitText({ mass: 0, length: 1, time: 0 }, unitSystemOf(record));
  const softened =
    kernel === 'none'
      ? `no softening (${softening.from})`
      : `${kernel} softening ${withUnit(short(length, 6), lengthUnit)}${
          support === null ? '' : `, Newtonian beyond ${short(support, 6)}`
        } (${softening.from})`;
  const time =
    record.time === null
      ? 'time not stated'
      : `time ${withUnit(short(record.time, 8), unitText(TIME, unitSystemOf(record)))}`;
  const from =
    units.from === gravity.from ? `(${units.from})` : `(${units.from}; G from ${gravity.from})`;
  const facts = `${bodies(record.whole.particles)}, ${time}, units ${units.value} with G = ${short(gravity.value, 9)} ${from}, ${softened}`;
  return `${paint.strong(shorten(record.file, PAGE_WIDTH))}\n${wrap(facts, '  ')}`;
}

const TIME = { mass: 0, length: 0, time: 1 } as const;

function ratio(record: MeasureRecord, paint: Paint): string {
  const { name, figure: text, words, tone } = ratioWords(record);
  const lines = [`${paint.strong(`${name}  ${text}`)}${words ? `   ${paint[tone](words)}` : ''}`];
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

function energies(record: MeasureRecord, units: UnitSystem, paint: Paint): string {
  const { whole, bound } = record;
  const same = bound.particles === whole.particles;
  const sets = same ? [whole] : [whole, bound];
  const row = (label: string, cell: (set: typeof whole) => string): string[] => [
    label,
    ...sets.map((set) => signRoom(cell(set))),
  ];
  const rows = [
    ['', ...(same ? [' all bodies (all are bound)'] : [' all bodies', ' bound bodies'])],
    row('bodies', (set) => wholeNumber(set.particles)),
    row(labelled('mass', 'whole.mass', units), (set) => figure(set.mass)),
    row(labelled('T', 'whole.kinetic', units), (set) => figure(set.kinetic)),
    row(labelled('U', 'whole.potential', units), (set) =>
      figure(set.potential, set.potentialError),
    ),
    row(labelled('W', 'whole.clausius', units), (set) => figure(set.clausius, set.clausiusError)),
    row(labelled('T + U', 'whole.energy', units), (set) => figure(set.energy, set.potentialError)),
    row('2T/|U|', (set) => figure(set.virialRatio, set.noise)),
    row('2T/|W|', (set) => figure(set.clausiusRatio, set.noise)),
  ];
  const table = columns(rows, ['left', 'left', 'left'], '  ').split('\n');
  return [paint.faint(table[0]), ...table.slice(1)].join('\n');
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
    ['effective number', figure(record.effectiveNumber)],
  ];
  return columns(
    rows.map(([label, text]) => [label, signRoom(text)]),
    ['left', 'left'],
    '  ',
  );
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
    file: 'potentials from the file',
  }[origin];
  const text = `${how}; U to ${short(errorMeasured)} (asked for ${short(errorWanted)}); ${threads} thread${threads === 1 ? '' : 's'}, ${duration(seconds.total)}`;
  return paint.faint(wrap(text, '  '));
}

/** `T [Msun (km/s)²]`: a label and the unit that the registry's dimension has in these units. */
function labelled(label: string, key: string, units: UnitSystem): string {
  const quantity = findQuantity(key);
  const unit = quantity === undefined ? '' : unitText(quantity.dimension, units);
  return unit === '' ? label : `${label} [${unit}]`;
}

function withUnit(text: string, unit: string): string {
  return unit === '' ? text : `${text} ${unit}`;
}

function bodies(count: number): string {
  return `${wholeNumber(count)} ${count === 1 ? 'body' : 'bodies'}`;
}
