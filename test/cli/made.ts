/** Records and streams made up for tests of the command line. */
import { Writable } from 'node:stream';
import type { MeasureRecord } from '../../src/index.ts';
import type { Streams } from '../../src/cli/streams.ts';

type Change = Partial<Omit<MeasureRecord, 'settings'>> & {
  readonly settings?: Partial<MeasureRecord['settings']>;
};

/** A record of a made-up cluster; `change` replaces what a test is about. */
export function madeRecord(change: Change = {}): MeasureRecord {
  const balance: MeasureRecord['whole'] = {
    particles: 1000,
    mass: 1,
    kinetic: 0.1475,
    potential: -0.2943211,
    potentialError: 0.0000234,
    clausius: -0.2943211,
    clausiusError: 0.0000234,
    energy: -0.1468211,
    virialRatio: 1.0023,
    clausiusRatio: 1.0023,
    noise: 0.0253,
  };
  const radii = { fractions: [0.1, 0.5], radii: [0.5241, 1.3052], errors: [0.0213, 0.0285] };
  const { settings, ...rest } = change;
  return {
    record: 1,
    file: 'shoal.bin',
    time: 12.5,
    runFile: null,
    settings: {
      time: { value: 12.5, from: 'snapshot', source: 'snapshot' },
      gravity: { value: 1, from: 'default' },
      units: { value: 'natural', from: 'default' },
      softening: { value: { length: 0, support: 0, kernel: 'none' }, from: 'default' },
      coulombFactor: { value: 0.11, from: 'default' },
      error: { value: 1e-5, from: 'default' },
      centre: { value: 'density', from: 'default' },
      fractions: { value: [0.1, 0.5], from: 'default' },
      exact: { value: false, from: 'default' },
      forces: { value: 'own', from: 'default' },
      with: { value: [], from: 'default' },
      shells: { value: 16, from: 'default' },
      ...settings,
    },
    frame: {
      centreOfMass: [0.01, -0.02, 0],
      meanVelocity: [0, 0, 1e-18],
      centre: [0.011, -0.019, 0.002],
      centreMethod: 'density',
      angularMomentum: [0.001, 0.002, -0.003],
    },
    whole: balance,
    bound: balance,
    lagrangian: radii,
    boundLagrangian: radii,
    halfMassRadius: 1.3052,
    virialRadius: 1.6988,
    coreRadius: 0.5477,
    velocityDispersion: 0.3136,
    effectiveNumber: 1000,
    momentOfInertia: 12.7,
    momentOfInertiaRate: 0.03,
    crossingTime: 6.2627,
    relaxation: { time: 44.6, coulombFactor: 0.11, coulombLogarithm: 4.7005 },
    engine: {
      origin: 'tree',
      order: 3,
      tolerance: 2e-3,
      errorWanted: 1e-5,
      errorMeasured: 4.1e-6,
      interactions: 123456,
      threads: 2,
      seconds: { read: 0.01, tree: 0.02, forces: 0.1, error: 0.05, dynamics: 0.02, total: 0.2 },
    },
    remarks: [],
    ...rest,
  };
}

/** Collects what is written to it; `isTTY` as a test wants it. */
export class Collector extends Writable {
  text = '';
  readonly isTTY: boolean;

  constructor(isTTY = false) {
    super({ decodeStrings: false });
    this.isTTY = isTTY;
  }

  override _write(chunk: string | Buffer, _encoding: string, done: () => void): void {
    this.text += String(chunk);
    done();
  }
}

export interface MadeStreams extends Streams {
  readonly stdout: Collector;
  readonly stderr: Collector;
}

export function madeStreams(env: Streams['env'] = {}): MadeStreams {
  return {
    stdout: new Collector(),
    stderr: new Collector(),
    env,
    interrupt: new AbortController().signal,
  };
}
