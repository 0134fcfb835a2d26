/**
 * The solar system, the nearest real system in virial equilibrium: proves the states that other tests
 * measure through the engine.
 *
 * Positions and velocities come from a general-purpose ephemeris (npm astronomy-engine 2.1.19, MIT),
 * which is right to an arc-minute; GM from DE440. The theorem itself is the check: averaged over
 * a time, 2T + U is the change of dI/dt over twice that time (Clausius 1870; Lagrange-Jacobi).
 */
import { readFileSync, readdirSync } from 'node:fs';
import { MassProduct, Body } from 'astronomy-engine';
import { tableFromIPC } from 'apache-arrow';
import { describe, expect, it } from 'vitest';
import { rawSnapshot, RAW_LAYOUT } from '../../fixtures/solar/make.js';
import {
  averageVirial,
  BODIES,
  DAYS_PER_YEAR,
  GRAVITY,
  daysAfter,
  noon,
  solarBalance,
  solarState,
  solarStates,
} from './solar-states.ts';

const near = (value: number, expected: number, absolute: number) =>
  expect(Math.abs(value - expected), `${value} against ${expected}`).toBeLessThan(absolute);

const SUN_AND_GIANTS = [0, 5, 6, 7, 8];

describe('states', () => {
  it('have the known positions on 1 January 2000', () => {
    const { position, time } = solarState(noon(2000));
    expect(time).toBe(0);
    // No source: printed by version 2.1.19 of the ephemeris when the test was planned.
    const expected = {
      0: [-0.007143748, -0.002645366, -0.0009221184],
      5: [3.9940849348, 2.7339846569, 1.0747663191],
    };
    for (const [i, vector] of Object.entries(expected)) {
      vector.forEach((value, k) => near(position[3 * Number(i) + k], value, 1e-10));
    }
    // Independent of the ephemeris: the Earth is nearest to the Sun on 3 January (0.9833 au, any almanac).
    const earth = Math.hypot(...[0, 1, 2].map((k) => position[9 + k] - position[k]));
    near(earth, 0.9833, 1e-4);
  });

  it("have masses that agree with the ephemeris' own GM", () => {
    const kinds = [Body.Sun, Body.Mercury, Body.Venus, Body.EMB, Body.Mars];
    kinds.push(Body.Jupiter, Body.Saturn, Body.Uranus, Body.Neptune);
    kinds.forEach((body, i) => {
      const gm = (BODIES[i].gm * 86400 ** 2) / 149597870.7 ** 3; // au³/day²
      // Older ephemerides differ from DE440 most for Mercury, by 1e-5.
      expect(Math.abs(gm / MassProduct(body) - 1)).toBeLessThan(1.5e-5);
    });
    // G in au³/(Msun yr²) from the nominal GM of the Sun (IAU 2015 B3), au (IAU 2012 B2), Julian year.
    expect(Math.abs(GRAVITY / 39.4769264089 - 1)).toBeLessThan(1e-12);
    const { mass } = solarState(noon(2000));
    expect(
      Math.abs(
        (GRAVITY * mass[5] * 149597870.7 ** 3) / (DAYS_PER_YEAR * 86400) ** 2 / 126712764.1 - 1,
      ),
    ).toBeLessThan(1e-14);
  });
});

describe('virial theorem', () => {
  // The figures were computed before, by other code, from the same version of the ephemeris and
  // printed to nine or ten digits (no source): 1e-9 is their rounding. What a wrong ephemeris or a
  // wrong frame could not give is a residual near 0.
  const digits = 1e-9;

  it.each([
    // start, days, step [d], members, Q at start, least and greatest Q, 2⟨T⟩/|⟨U⟩|, boundary term
    [2000, 4385, 5, undefined, 1.042234555, 0.967046, 1.042235, 1.004744138, 0.004770171, 3e-5],
    [
      2000,
      4380,
      20,
      SUN_AND_GIANTS,
      1.043492508,
      0.966293,
      1.043493,
      1.004868209,
      0.004890286,
      3e-5,
    ],
    [1900, 60270, 10, undefined, 0.964566991, 0.952328, 1.046754, 1.000317341, 0.000314263, 5e-6],
    [
      1900,
      60260,
      20,
      SUN_AND_GIANTS,
      0.963309289,
      0.951134,
      1.047973,
      1.000339092,
      0.000330016,
      1e-5,
    ],
  ] as const)(
    'from %i over %i days, every %i days',
    (startYear, days, step, members, atStart, least, greatest, ratio, boundary, closes) => {
      const series = solarStates(startYear, daysAfter(startYear, days), step).map((state) =>
        solarBalance(state, members),
      );
      const average = averageVirial(series);
      near((2 * series[0].kinetic) / -series[0].potential, atStart, digits);
      near(average.smallest, least, 1e-6);
      near(average.greatest, greatest, 1e-6);
      near(average.ratio, ratio, digits);
      near(average.boundary, boundary, digits);
      // How well the theorem closes on real bodies: limited by the ephemeris.
      near(average.residual, 0, closes);
    },
  );

  it('fails visibly if the Sun is held at rest and the frame forgotten', () => {
    const series = solarStates(2000, daysAfter(2000, 4385), 5).map((state) => {
      const rest = { ...state, velocity: state.velocity.slice().fill(0, 0, 3) };
      const balance = solarBalance(state);
      let kinetic = 0;
      for (let i = 0; i < 9; i++) {
        for (let k = 0; k < 3; k++) {
          kinetic += 0.5 * state.mass[i] * (rest.velocity[3 * i + k] * DAYS_PER_YEAR) ** 2;
        }
      }
      return { ...balance, kinetic };
    });
    near(averageVirial(series).ratio, 1.0039413567, digits);
  });
});

describe('files of the fixture', () => {
  const folder = new URL('../../fixtures/solar/', import.meta.url);
  const raw = readdirSync(new URL('raw/', folder)).filter((name) => name.endsWith('.bin'));
  const arrow = readdirSync(new URL('arrow/', folder));

  it('are those that the script makes, in the order of time', () => {
    const states = solarStates(2000, noon(2012), 30);
    expect(raw.sort()).toEqual(states.map(({ date }) => `${date.toISOString().slice(0, 10)}.bin`));
    expect(raw).toHaveLength(147);
    states.forEach((state, k) => {
      const bytes = readFileSync(new URL(`raw/${raw[k]}`, folder));
      expect(bytes.equals(rawSnapshot(state))).toBe(true);
      expect(bytes).toHaveLength(16 + 9 * 56);
      expect(bytes.readDoubleLE(0)).toBe((30 * k) / 365.25);
      expect(bytes.readBigUInt64LE(8)).toBe(9n);
    });
    const layout: unknown = JSON.parse(readFileSync(new URL('raw/layout.json', folder), 'utf8'));
    expect(layout).toEqual(RAW_LAYOUT);
  });

  it('hold the same bodies in Arrow, as a general reader of Arrow sees them', () => {
    expect(arrow.sort()).toEqual(Array.from({ length: 12 }, (_, k) => `${2000 + k}-01-01.arrow`));
    arrow.forEach((name, k) => {
      const state = solarState(noon(2000 + k));
      const table = tableFromIPC(readFileSync(new URL(`arrow/${name}`, folder)));
      expect(table.schema.metadata).toEqual(
        new Map([
          ['settlemark.time', String(state.time)],
          ['settlemark.units', 'au-year-msun'],
          ['settlemark.gravity', String(GRAVITY)],
        ]),
      );
      expect(table.numRows).toBe(9);
      for (let i = 0; i < 9; i++) {
        const row = table.get(i) as unknown as Record<'id' | 'mass', number> &
          Record<'position' | 'velocity', Iterable<number>>;
        expect(row.id).toBe(BODIES[i].id);
        expect(row.mass).toBe(state.mass[i]);
        const velocity = state.velocity.map((v) => v * 365.25);
        expect([...row.position]).toEqual([...state.position.slice(3 * i, 3 * i + 3)]);
        expect([...row.velocity]).toEqual([...velocity.slice(3 * i, 3 * i + 3)]);
      }
    });
  });
});
