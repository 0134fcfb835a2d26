/** Facts about a snapshot in the metadata of an Arrow schema, under keys that begin with `settlemark.`. */
import { InputError } from '../../errors.ts';
import { nearestName } from '../../numerics/nearest.ts';
import { VELOCITY_FORMS, type Frame, type VelocityForm } from '../particles.ts';
import { checkUnits, ownUnits, UNITS_KEYS, type RefuseUnits } from '../ownUnits.ts';
import { UNIT_SYSTEMS, type UnitSystem } from '../units.ts';

export interface SnapshotFacts {
  readonly time: number | null;
  readonly gravity: number | null;
  readonly units: UnitSystem | null;
  readonly softening: number | null;
  readonly frame: Frame;
}

const KEY = {
  time: 'settlemark.time',
  gravity: 'settlemark.gravity',
  units: 'settlemark.units',
  softening: 'settlemark.softening',
  scaleFactor: 'settlemark.scaleFactor',
  hubbleRate: 'settlemark.hubbleRate',
  boxSize: 'settlemark.boxSize',
  velocity: 'settlemark.velocity',
} as const;

/** Whether a key of the metadata is one of those that are read here. */
export function isFact(key: string): boolean {
  return (Object.values(KEY) as string[]).includes(key);
}

const OWN_UNIT_TEXTS = ['mass', 'length', 'velocity', 'time'] as const;

/**
 * Reads the facts; what is not there is null, and the frame is physical unless a scale factor says
 * otherwise. `settlemark.units` is the name of a system, or an object in JSON with the symbols
 * `mass`, `length`, `velocity`, `time` and the number `gravity`; or sizes as in a file of units.
 * @throws InputError `input.metadata` (not a number, or out of its domain), `input.units`
 */
export function readFacts(metadata: ReadonlyMap<string, string>, file: string): SnapshotFacts {
  const number = (key: string, isValid: (value: number) => boolean, expected: string) => {
    const text = metadata.get(key);
    if (text === undefined) return null;
    const value = text.trim() === '' ? NaN : Number(text);
    if (!Number.isFinite(value) || !isValid(value))
      throw new InputError(
        'input.metadata',
        `${file}: the schema's metadata has ${key} = "${shortened(text)}"; expected ${expected}`,
        'Correct it where the file is written.',
      );
    return value;
  };
  const positive = (value: number) => value > 0;
  const scaleFactor = number(KEY.scaleFactor, positive, 'a number above 0');
  return {
    time: number(KEY.time, () => true, 'a finite number'),
    gravity: number(KEY.gravity, positive, 'a number above 0'),
    units: readUnits(metadata.get(KEY.units), file),
    softening: number(KEY.softening, (value) => value >= 0, 'a number not below 0'),
    frame:
      scaleFactor === null
        ? { kind: 'physical' }
        : {
            kind: 'comoving',
            scaleFactor,
            hubbleRate: required(
              number(KEY.hubbleRate, () => true, 'a finite number'),
              file,
            ),
            boxSize: number(KEY.boxSize, positive, 'a number above 0'),
            velocity: velocityForm(metadata.get(KEY.velocity), file),
          },
  };
}

function velocityForm(text: string | undefined, file: string): VelocityForm {
  const form = VELOCITY_FORMS.find((one) => one === text);
  if (form !== undefined) return form;
  const forms = VELOCITY_FORMS.map((one) => `"${one}"`).join(', ');
  const found =
    text === undefined
      ? `${KEY.scaleFactor} and no ${KEY.velocity}`
      : `${KEY.velocity} = "${shortened(text)}"`;
  const nearest = text === undefined ? null : nearestName(text, VELOCITY_FORMS);
  throw new InputError(
    'input.metadata',
    `${file}: the schema's metadata has ${found}; expected what the velocities are: ${forms}`,
    nearest === null
      ? 'Write it beside the scale factor: x is the comoving position, a the scale factor.'
      : `Did you mean "${nearest}"?`,
  );
}

function required(hubbleRate: number | null, file: string): number {
  if (hubbleRate !== null) return hubbleRate;
  throw new InputError(
    'input.metadata',
    `${file}: the schema's metadata has ${KEY.scaleFactor} and no ${KEY.hubbleRate}; expected both`,
    'Write both for comoving coordinates, or neither for physical ones.',
  );
}

function readUnits(text: string | undefined, file: string): UnitSystem | null {
  if (text === undefined) return null;
  if (Object.hasOwn(UNIT_SYSTEMS, text)) return UNIT_SYSTEMS[text as keyof typeof UNIT_SYSTEMS];
  const names = Object.keys(UNIT_SYSTEMS);
  const own = statedUnits(text, file);
  if (own) return own;
  const nearest = nearestName(text, names);
  throw new InputError(
    'input.units',
    `${file}: the schema's metadata has ${KEY.units} = "${shortened(text)}"; expected ${names.join(', ')}, or an object in JSON with mass, length, velocity, time and gravity`,
    nearest === null ? 'Correct it where the file is written.' : `Did you mean "${nearest}"?`,
  );
}

function statedUnits(text: string, file: string): UnitSystem | null {
  let value: unknown;
  try {
    value = JSON.parse(text);
  } catch {
    return null;
  }
  if (typeof value !== 'object' || value === null) return null;
  const given = value as Record<string, unknown>;
  const texts = OWN_UNIT_TEXTS.map((key) => given[key]);
  const { gravity } = given;
  const areSymbols = texts.every((entry) => typeof entry === 'string');
  // Four symbols say too much to be sizes, of which one follows from the others.
  if (areSymbols && typeof gravity === 'number' && gravity > 0) {
    const [mass, length, velocity, time] = texts;
    const si = sizesOf(given['si']);
    return { name: 'own', mass, length, velocity, time, gravity, ...(si && { si }) };
  }
  if (!UNITS_KEYS.some((key) => key in given)) return null;
  const refuse: RefuseUnits = (key, found, remedy) => {
    throw new InputError(
      'input.units',
      `${file}: the schema's metadata has ${KEY.units} = "${shortened(text)}": ${key === null ? '' : `${key}: `}${found}`,
      remedy,
    );
  };
  return ownUnits(checkUnits(value, refuse), refuse);
}

function sizesOf(value: unknown): UnitSystem['si'] {
  if (typeof value !== 'object' || value === null) return undefined;
  const { length, mass, velocity } = value as Record<string, unknown>;
  const isSize = (size: unknown): size is number => typeof size === 'number' && size > 0;
  return isSize(length) && isSize(mass) && isSize(velocity)
    ? { length, mass, velocity }
    : undefined;
}

/** The metadata that {@link readFacts} reads back; numbers keep all their digits. */
export function writeFacts(facts: SnapshotFacts): Map<string, string> {
  const { time, gravity, units, softening, frame } = facts;
  const metadata = new Map<string, string>();
  const put = (key: string, value: number | null) => {
    if (value !== null) metadata.set(key, String(value));
  };
  put(KEY.time, time);
  put(KEY.gravity, gravity);
  put(KEY.softening, softening);
  if (units) {
    const { name, ...own } = units;
    metadata.set(KEY.units, name === 'own' ? JSON.stringify(own) : name);
  }
  if (frame.kind === 'comoving') {
    put(KEY.scaleFactor, frame.scaleFactor);
    put(KEY.hubbleRate, frame.hubbleRate);
    put(KEY.boxSize, frame.boxSize);
    metadata.set(KEY.velocity, frame.velocity);
  }
  return metadata;
}

function shortened(text: string): string {
  return text.length > 60 ? `${text.slice(0, 60)}…` : text;
}
