/** Options of `make` that say what the model is, and the lists of keys that two of them take. */
import { Option, type Command } from 'commander';
import { UsageError } from '../errors.ts';
import type { ComponentOptions } from '../index.ts';
import { nearestName } from '../numerics/nearest.ts';
import { listOf, numberOf, wholeOf } from './parse.ts';

/** Adds the options that shape the model. */
export function modelling(command: Command): Command {
  return command
    .option('--inner-slope <γ>', 'γ of dehnen, 0 to below 3', numberOf('--inner-slope'))
    .option('--central-potential <W0>', 'W0 of king', numberOf('--central-potential'))
    .option(
      '--anisotropy-radius <ra>',
      'orbits radial beyond it (Osipkov-Merritt)',
      numberOf('--anisotropy-radius'),
    )
    .option(
      '--rotation <share>',
      'share turned to one sense about z, -1 to 1',
      numberOf('--rotation'),
    )
    .option(
      '--binaries <share>',
      'share of bodies in binaries, with --semi-major-axis',
      numberOf('--binaries'),
    )
    .option(
      '--semi-major-axis <a,b>',
      'their least and greatest semi-major axis',
      listOf('--semi-major-axis'),
    )
    .option('--escapers <share>', 'share of bodies sent off unbound', numberOf('--escapers'))
    .option(
      '--escaper-speed <v>',
      'their speed at infinity (1-D dispersion)',
      numberOf('--escaper-speed'),
    )
    .option('--name <name>', 'name of the component, if there are several')
    .addOption(
      new Option(
        '--second <key=value,...>',
        'a second component about the same centre: model, count, mass, scale-radius, ...',
      ).argParser(componentOf('--second')),
    )
    .addOption(
      new Option(
        '--companion [key=value,...]',
        'a second sphere, like the first but for these; with --separation',
      ).argParser(componentOf('--companion')),
    )
    .option('--separation <d>', 'of the two spheres, along x', numberOf('--separation'))
    .option('--pericentre <p>', 'of their orbit as two points', numberOf('--pericentre'))
    .option('--impact-parameter <b>', 'instead of it (0)', numberOf('--impact-parameter'))
    .addOption(
      new Option('--relative-velocity <v>', 'speed at the start (parabolic)').argParser(
        speedOf('--relative-velocity'),
      ),
    );
}

/** A component as a list of keys gives it. */
export type GivenComponent = Partial<ComponentOptions>;

const NUMBERS = {
  mass: 'mass',
  'scale-radius': 'scaleRadius',
  'inner-slope': 'innerSlope',
  'central-potential': 'centralPotential',
  'anisotropy-radius': 'anisotropyRadius',
  rotation: 'rotation',
} as const;
const KEYS = ['model', 'count', ...Object.keys(NUMBERS), 'masses', 'name'];

/** Parses `model=dehnen,count=5000,inner-slope=0.5`. */
export function componentOf(option: string): (text: string) => GivenComponent {
  return (text) => {
    const given: Record<string, unknown> = {};
    for (const part of text.split(',')) {
      const equals = part.indexOf('=');
      const key = part.slice(0, Math.max(0, equals)).trim();
      const value = part.slice(equals + 1).trim();
      if (!KEYS.includes(key) || value === '') throw notAKey(option, part.trim(), key);
      const name = key in NUMBERS ? NUMBERS[key as keyof typeof NUMBERS] : key;
      if (name in given) {
        throw new UsageError(
          'usage.value',
          `${option}: "${key}" is given twice`,
          'Give each key once.',
        );
      }
      const told = `${option} ${key}`;
      if (key === 'count') given[name] = wholeOf(told, 1)(value);
      else given[name] = key in NUMBERS ? numberOf(told)(value) : value;
    }
    return given;
  };
}

function notAKey(option: string, part: string, key: string): UsageError {
  const nearest = KEYS.includes(key) ? null : nearestName(key === '' ? part : key, KEYS);
  return new UsageError(
    'usage.value',
    `${option}: found "${part}"; expected key=value, several separated by commas, with keys ${KEYS.join(', ')}`,
    nearest === null
      ? `For instance: ${option} model=hernquist,count=5000`
      : `Did you mean ${nearest}?`,
  );
}

/** A number, or `parabolic`. */
function speedOf(option: string): (text: string) => number | 'parabolic' {
  const parse = numberOf(option);
  return (text) => (text.trim() === 'parabolic' ? 'parabolic' : parse(text));
}

/** The part of the command line that is a sphere's. */
export interface ModelCommandOptions {
  readonly innerSlope?: number;
  readonly centralPotential?: number;
  readonly anisotropyRadius?: number;
  readonly rotation?: number;
  readonly binaries?: number;
  readonly semiMajorAxis?: readonly number[];
  readonly escapers?: number;
  readonly escaperSpeed?: number;
  readonly name?: string;
  readonly second?: GivenComponent;
  readonly companion?: GivenComponent | true;
  readonly separation?: number;
  readonly pericentre?: number;
  readonly impactParameter?: number;
  readonly relativeVelocity?: number | 'parabolic';
}
