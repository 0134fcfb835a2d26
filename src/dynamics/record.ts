/**
 * The record of one snapshot: everything that `measure` finds, in the units of the snapshot.
 *
 * Keys are a contract with programs outside; the registry (registry.ts) gives every quantity's
 * dimension, error, text and source. A figure that cannot be had is null, and a remark says why.
 */
import type { SofteningKernel } from '../octree/softening.ts';
import type { Remark, Selection } from '../snapshot/particles.ts';
import type { UnitSystem } from '../snapshot/units.ts';
import type { ExternalFigures } from './external.ts';
import type { ExtraName } from './extras.ts';
import type { InertiaFigures } from './inertia.ts';
import type { PairFigures } from './pairs.ts';
import type { Profiles } from './profiles.ts';
import type { RadialToTangential, Shells } from './shells.ts';

/** Version of the record's form; grows only when a key changes its meaning. */
export const RECORD_VERSION = 1;

/** Where a setting came from: the later in this list, the weaker. */
export type SettingOrigin = 'option' | 'run file' | 'snapshot' | 'default';

export interface Setting<T> {
  readonly value: T;
  readonly from: SettingOrigin;
}

/** A unit system; one of the user's own with its symbols, its G and, where stated, its sizes in SI. */
export interface UnitsSetting extends Setting<string> {
  readonly system?: Omit<UnitSystem, 'name'>;
}

/** Where a time was had: the snapshot itself, a table, its place in the series, or its name. */
export type TimeSource = 'snapshot' | 'times file' | 'interval' | 'file name';

/** The time of the snapshot; source and value are null if nothing tells it. */
export interface TimeSetting extends Setting<number | null> {
  readonly source: TimeSource | null;
}

export type CentreMethod = 'density' | 'shrinking' | 'mass' | 'potential';

export interface SofteningSetting {
  /**
   * Plummer-equivalent length. Where bodies have lengths of their own, that of a pair whose two e² are
   * the mean by mass.
   */
  readonly length: number;
  /** Distance beyond which the force is Newtonian; null where it never is exactly (Plummer). */
  readonly support: number | null;
  readonly kernel: SofteningKernel;
  /** Least and greatest length of the single bodies; only there if these have lengths of their own. */
  readonly ofBodies?: { readonly least: number; readonly greatest: number };
}

export interface RecordSettings {
  readonly time: TimeSetting;
  readonly gravity: Setting<number>;
  readonly units: UnitsSetting;
  readonly softening: Setting<SofteningSetting>;
  readonly coulombFactor: Setting<number>;
  readonly error: Setting<number>;
  readonly centre: Setting<CentreMethod>;
  readonly fractions: Setting<readonly number[]>;
  readonly exact: Setting<boolean>;
  readonly forces: Setting<ForcesOrigin>;
  /** Extras that were asked for, and the number of shells they may use. */
  readonly with: Setting<readonly ExtraName[]>;
  readonly shells: Setting<number>;
}

/** Where U and W come from: our own sums, or what the simulation wrote. */
export type ForcesOrigin = 'own' | 'file';

export type Vector = readonly [number, number, number];

/** The same set of figures for the whole, the bound set, or any other set of bodies. */
export interface Balance {
  readonly particles: number;
  readonly mass: number;
  /** T in the frame of the set's own mean velocity. */
  readonly kinetic: number;
  /** U, every pair of the set once, with the softening stated. */
  readonly potential: number;
  /** 1σ absolute error of U, measured. */
  readonly potentialError: number;
  /** W = Σ m x·a of the set's own forces. */
  readonly clausius: number;
  readonly clausiusError: number;
  /** T + U. */
  readonly energy: number;
  /** 2T/|U|, null if U is 0. */
  readonly virialRatio: number | null;
  /** 2T/|W|, null if W is 0. */
  readonly clausiusRatio: number | null;
  /** Rms that finite N alone gives the ratio, over independent realisations; null where it has no meaning. */
  readonly noise: number | null;
}

export interface LagrangianRadii {
  readonly fractions: readonly number[];
  /** Null only for a set without mass. */
  readonly radii: readonly (number | null)[];
  /** 1σ sampling errors; null where too few bodies lie inside to tell. */
  readonly errors: readonly (number | null)[];
}

export interface EngineReport {
  readonly origin: 'tree' | 'direct' | 'file';
  /** Order of the expansion and tolerance of the walk; null for direct sums. */
  readonly order: number | null;
  readonly tolerance: number | null;
  /** Relative error of U that was asked for. */
  readonly errorWanted: number;
  /** 2.6 σ of the measured error of U over |U|: at most `errorWanted` if the promise was kept. */
  readonly errorMeasured: number;
  /** Cell–cell interactions plus pairs of bodies summed (each direction counted). */
  readonly interactions: number;
  readonly threads: number;
  readonly seconds: {
    readonly read: number;
    readonly tree: number;
    readonly forces: number;
    readonly error: number;
    readonly dynamics: number;
    readonly total: number;
  };
}

/** What `--with` and `--external` add: the keys are there if it was asked for. */
export interface ExtraFigures
  extends Partial<InertiaFigures>, Partial<RadialToTangential>, Partial<PairFigures> {
  /** Only if external fields were stated. */
  readonly external?: ExternalFigures;
  readonly shells?: Shells;
  readonly profiles?: Profiles;
}

export interface MeasureRecord extends ExtraFigures {
  readonly record: typeof RECORD_VERSION;
  readonly file: string;
  readonly time: number | null;
  /** Run file whose defaults were used, or null. */
  readonly runFile: string | null;
  /** Which bodies were measured; absent if all were. */
  readonly selection?: Selection;
  readonly settings: RecordSettings;
  readonly frame: {
    readonly centreOfMass: Vector;
    readonly meanVelocity: Vector;
    readonly centre: Vector;
    readonly centreMethod: CentreMethod;
    readonly angularMomentum: Vector;
  };
  readonly whole: Balance;
  readonly bound: Balance;
  readonly lagrangian: LagrangianRadii;
  readonly boundLagrangian: LagrangianRadii;
  readonly halfMassRadius: number;
  readonly virialRadius: number | null;
  readonly coreRadius: number | null;
  readonly velocityDispersion: number;
  readonly effectiveNumber: number;
  readonly momentOfInertia: number;
  readonly momentOfInertiaRate: number;
  readonly crossingTime: number | null;
  readonly relaxation: {
    readonly time: number | null;
    readonly coulombFactor: number;
    readonly coulombLogarithm: number | null;
  };
  readonly engine: EngineReport;
  readonly remarks: readonly Remark[];
}
