import { describe, expect, it } from 'vitest';
import { UsageError } from '../../src/errors.ts';
import { makeModel, MODELS, type MakeOptions } from '../../src/models/make.ts';
import { drawMasses, normaliseMasses } from '../../src/models/masses.ts';
import { Random } from '../../src/numerics/random.ts';
import { drawBodies } from '../../src/models/sampling.ts';
import { energies, radius } from './samples.ts';

const COLUMNS = ['mass', 'x', 'y', 'z', 'vx', 'vy', 'vz'] as const;
const basis: MakeOptions = { model: 'plummer', count: 300, seed: 1 };

describe('makeModel', () => {
  it('gives the same bits for the same seed and other bodies for another', () => {
    const one = makeModel({ ...basis, masses: 'salpeter' });
    const two = makeModel({ ...basis, masses: 'salpeter' });
    const other = makeModel({ ...basis, masses: 'salpeter', seed: 2 });
    for (const name of COLUMNS) {
      expect(two[name]).toEqual(one[name]);
      expect(other[name]).not.toEqual(one[name]);
    }
  });

  it('gives the same first bodies whatever the count, and the same bodies with any masses', () => {
    const short = makeModel(basis);
    const long = makeModel({ ...basis, count: 70_000, masses: 'salpeter' });
    expect(long.x.slice(0, 300)).toEqual(short.x);
    expect(long.vz.slice(0, 300)).toEqual(short.vz);
  });

  it('draws each piece of 65536 bodies from a stream of its own', () => {
    const set = makeModel({ ...basis, count: 65_536 + 100 });
    const column = () => new Float64Array(100);
    const piece = {
      x: column(),
      y: column(),
      z: column(),
      vx: column(),
      vy: column(),
      vz: column(),
      lengthScale: 1,
      velocityScale: 1,
    };
    drawBodies(MODELS.plummer, new Random(1).stream(1), 1, piece, 0, 100);
    expect(set.x.slice(65_536)).toEqual(piece.x);
    expect(set.vy.slice(65_536)).toEqual(piece.vy);
  });

  it('draws masses from a family of streams that shares nothing with the positions', () => {
    const set = makeModel({ ...basis, masses: 'salpeter' });
    const drawn = new Float64Array(300);
    drawMasses({ slope: 2.35, range: [0.1, 10] }, new Random(1).family(1), drawn, 0, 300);
    const expected = new Float64Array(300);
    normaliseMasses(drawn, 1, expected);
    expect(set.mass).toEqual(expected);
  });

  it('lies in shared memory and says what it is', () => {
    const set = makeModel({ ...basis, float32: true, gravity: 2 });
    for (const name of COLUMNS) {
      expect(set[name]).toBeInstanceOf(Float32Array);
      expect(set[name].buffer).toBeInstanceOf(SharedArrayBuffer);
      expect(set[name]).toHaveLength(300);
    }
    expect(set.origin).toEqual({ file: 'plummer', format: 'made', mantissaBits: 24, remarks: [] });
    expect(set).toMatchObject({ count: 300, gravity: 2, time: 0, softening: null, units: null });
    expect(makeModel(basis).origin.mantissaBits).toBe(53);
  });

  it('rounds the same bodies in single precision', () => {
    const double = makeModel(basis);
    const single = makeModel({ ...basis, float32: true });
    for (const name of COLUMNS) expect(single[name]).toEqual(Float32Array.from(double[name]));
  });

  it('scales lengths with a and velocities with √(GM/a)', () => {
    const plain = makeModel(basis);
    const scaled = makeModel({ ...basis, scaleRadius: 4, mass: 9, gravity: 16 });
    for (let i = 0; i < plain.count; i++) {
      // √(16 · 9 / 4) = 6; powers of two are exact, the 6 may round once.
      expect(scaled.x[i]).toBe(4 * plain.x[i]);
      expect(Math.abs(scaled.vz[i] / (6 * plain.vz[i]) - 1)).toBeLessThan(4e-16);
    }
    // 2T/|U| has no units: U carries G, T does not.
    const { kinetic, potential } = energies(scaled);
    const before = energies(plain);
    const ratio = (2 * kinetic) / (16 * potential) / ((2 * before.kinetic) / before.potential);
    expect(Math.abs(ratio - 1)).toBeLessThan(1e-12); // rounding of 45,000 pairs
  });

  it('adds offset and velocity at the end', () => {
    const plain = makeModel(basis);
    const moved = makeModel({ ...basis, offset: [10, -20, 30], velocity: [0.5, 0, -2] });
    for (let i = 0; i < plain.count; i++) {
      expect(moved.x[i]).toBe(plain.x[i] + 10);
      expect(moved.y[i]).toBe(plain.y[i] - 20);
      expect(moved.z[i]).toBe(plain.z[i] + 30);
      expect(moved.vx[i]).toBe(plain.vx[i] + 0.5);
      expect(moved.vy[i]).toBe(plain.vy[i]);
      expect(moved.vz[i]).toBe(plain.vz[i] - 2);
    }
  });

  it.each(['equal', 'salpeter'] as const)('has the total mass asked for, masses %s', (masses) => {
    const set = makeModel({ ...basis, masses, mass: 7 });
    const total = Array.from(set.mass).reduce((a, b) => a + b);
    expect(Math.abs(total / 7 - 1)).toBeLessThan(300 * 2 ** -53); // a rounding an addition
    if (masses === 'equal') expect(new Set(set.mass).size).toBe(1);
    else expect(new Set(set.mass).size).toBe(300);
  });

  it('draws masses within their range', () => {
    const set = makeModel({ ...basis, count: 5000, masses: 'salpeter', massRange: [2, 6] });
    const ratio = Math.max(...set.mass) / Math.min(...set.mass);
    expect(ratio).toBeLessThan(3 * (1 + 1e-14)); // rounding of the power
    expect(ratio).toBeGreaterThan(2.9);
  });

  it('cuts: the bodies inside keep the mass and the motion they have in the whole model', () => {
    // Half-mass radius of a Plummer sphere of scale 2; 2T/|W| of a part in perfect equilibrium, without
    // its surface term, is 1.4043632054 (Jeans equation; checked by quadrature in closed-forms.test.ts).
    const cut = 2 * 1.3047660265041;
    const sets = 60;
    const ratios: number[] = [];
    for (let seed = 0; seed < sets; seed++) {
      const set = makeModel({ ...basis, seed, count: 500, scaleRadius: 2, mass: 3, cut });
      const radii = Array.from({ length: set.count }, (_, i) => radius(set, i));
      expect(Math.max(...radii)).toBeLessThanOrEqual(cut * (1 + 1e-14)); // rounding
      expect(Math.abs(set.mass[0] * 500 - 1.5)).toBeLessThan(1e-12);
      const { kinetic, potential } = energies(set);
      ratios.push((2 * kinetic) / -potential);
    }
    const mean = ratios.reduce((a, b) => a + b) / sets;
    const variance = ratios.reduce((a, b) => a + (b - mean) ** 2, 0) / (sets - 1);
    const error = Math.sqrt(variance / sets);
    // Four errors, and the bias of a ratio at N = 500, a few times 1/N.
    expect(Math.abs(mean - 1.4043632054)).toBeLessThan(4 * error + 0.003);
    expect(error).toBeLessThan(0.01);
  });

  it('gives the same bits for the same seed with all that a sphere can have', () => {
    const rich = (seed: number) =>
      makeModel({
        ...{ model: 'hernquist', count: 500, seed, anisotropyRadius: 1, rotation: 0.5, cut: 10 },
        second: { model: 'dehnen', innerSlope: 0.8, count: 300, mass: 3, scaleRadius: 2 },
        binaries: { share: 0.2, semiMajorAxis: [1e-4, 1e-3] },
        escapers: { share: 0.1 },
        companion: { model: 'king', centralPotential: 6, count: 200 },
        encounter: { separation: 30, pericentre: 1 },
      });
    const [one, two, other] = [rich(1), rich(1), rich(2)];
    expect(one.count).toBe(1000);
    for (const name of COLUMNS) expect(two[name]).toEqual(one[name]);
    for (const name of ['x', 'y', 'z', 'vx', 'vy', 'vz'] as const) {
      // Every body of another seed is another one: binaries, escapers and the companion too.
      expect(Array.from(other[name]).filter((value, i) => value === one[name][i])).toEqual([]);
    }
  });

  it('makes a single body', () => {
    const set = makeModel({ ...basis, count: 1, masses: 'salpeter' });
    expect(set.mass).toEqual(Float64Array.of(1));
  });

  const wrong: [Partial<Record<keyof MakeOptions, unknown>>, string, string[]][] = [
    [
      { model: 'plumer' },
      'usage.model',
      ['"plumer"', 'plummer, hernquist, jaffe, dehnen, king, uniform'],
    ],
    [{ model: 'toString' }, 'usage.model', ['"toString"']],
    [{ count: 0 }, 'usage.modelOption', ['count', ' 0,', 'from 1 to 4294967295']],
    [{ count: 2.5 }, 'usage.modelOption', ['count', '2.5']],
    [{ seed: -1 }, 'usage.seed', ['-1']],
    [{ scaleRadius: 0 }, 'usage.modelOption', ['scaleRadius', 'above 0']],
    [{ mass: Infinity }, 'usage.modelOption', ['mass', 'Infinity']],
    [{ gravity: NaN }, 'usage.modelOption', ['gravity', 'NaN']],
    [{ cut: -2 }, 'usage.modelOption', ['cut', '-2']],
    [{ offset: [1, NaN, 0] }, 'usage.modelOption', ['offset', '1 NaN 0', 'three finite numbers']],
    [{ velocity: [1, 2] }, 'usage.modelOption', ['velocity', '1 2']],
    [{ masses: 'kroupa' }, 'usage.modelOption', ['masses', 'kroupa', 'equal or salpeter']],
    [{ massRange: [10, 0.1] }, 'usage.massRange', ['10 to 0.1']],
    [{ model: 'dehnen' }, 'usage.modelOption', ['--inner-slope', 'not given']],
    [{ model: 'dehnen', innerSlope: 3 }, 'usage.modelOption', ['--inner-slope', 'less than 3']],
    [{ model: 'dehnen', innerSlope: -0.1 }, 'usage.modelOption', ['--inner-slope', '-0.1']],
    [{ model: 'dehnen', innerSlope: 2.995 }, 'usage.modelOption', ['--inner-slope', 'less steep']],
    [{ innerSlope: 1 }, 'usage.modelOption', ['--inner-slope', 'left out for plummer']],
    [{ model: 'king' }, 'usage.modelOption', ['--central-potential', 'not given']],
    [{ model: 'king', centralPotential: 21 }, 'usage.modelOption', ['--central-potential', '21']],
    [{ model: 'king', centralPotential: 0 }, 'usage.modelOption', ['--central-potential', ' 0,']],
    [{ model: 'king', centralPotential: 1e-7 }, 'usage.modelOption', ['--central-potential']],
    [{ centralPotential: 6 }, 'usage.modelOption', ['--central-potential', 'left out']],
    [{ cut: 1e-130 }, 'usage.modelOption', ['--cut', 'larger']],
    [{ anisotropyRadius: 0 }, 'usage.modelOption', ['--anisotropy-radius', 'above 0']],
    [{ anisotropyRadius: 0.7 }, 'usage.distributionFunction', ['--anisotropy-radius', ' 0.7,']],
    [{ model: 'uniform', anisotropyRadius: 1 }, 'usage.modelOption', ['--anisotropy-radius']],
    [
      { model: 'jaffe', anisotropyRadius: 1e-11 },
      'usage.modelOption',
      ['--anisotropy-radius', 'at least 1e-10'],
    ],
    [{ rotation: 1.1 }, 'usage.modelOption', ['--rotation', '-1 to 1']],
    [{ rotation: NaN }, 'usage.modelOption', ['--rotation', 'NaN']],
    [{ second: { model: 'jaffe', count: 0 } }, 'usage.modelOption', ['--second count', ' 0,']],
    [{ second: { model: 'nfw', count: 1 } }, 'usage.model', ['"nfw"']],
    [
      { second: { model: 'jaffe', count: 1, scaleRadius: -1 } },
      'usage.modelOption',
      ['--second scale-radius'],
    ],
    [
      { scaleRadius: 2, second: { model: 'jaffe', count: 1, scaleRadius: 1e11 } },
      'usage.modelOption',
      ['--second scale-radius', 'within a factor of 10000000000 of 2'],
    ],
    [
      { second: { model: 'plummer', count: 1, mass: 1e31 } },
      'usage.modelOption',
      ['--second mass', 'within a factor'],
    ],
    [{ second: { model: 'uniform', count: 1 } }, 'usage.modelOption', ['uniform']],
    [
      { second: { model: 'jaffe', count: 1, mass: 9 } },
      'usage.distributionFunction',
      ['the first component'],
    ],
    [
      { name: 'stars', second: { model: 'plummer', count: 1, name: 'stars' } },
      'usage.modelOption',
      ['--name', '"stars"'],
    ],
    [
      { binaries: { share: 1.5, semiMajorAxis: [1, 2] } },
      'usage.modelOption',
      ['--binaries', '1.5'],
    ],
    [
      { binaries: { share: 0.5, semiMajorAxis: [2, 1] } },
      'usage.modelOption',
      ['--semi-major-axis', '2 to 1'],
    ],
    [
      { count: 1, binaries: { share: 1, semiMajorAxis: [1, 2] } },
      'usage.modelOption',
      ['--binaries', 'at least one pair'],
    ],
    [{ escapers: { share: 0.001 } }, 'usage.modelOption', ['--escapers', 'at least one body']],
    [{ escapers: { share: -1 } }, 'usage.modelOption', ['--escapers', '-1']],
    [{ escapers: { share: 0.1, speed: -1 } }, 'usage.modelOption', ['--escaper-speed', '-1']],
    [
      { binaries: { share: 0.8, semiMajorAxis: [1, 2] }, escapers: { share: 0.3 } },
      'usage.modelOption',
      ['--escapers', '0.2'],
    ],
    [
      { model: 'dehnen', innerSlope: 2.6, escapers: { share: 0.5 } },
      'usage.modelOption',
      ['--escaper-speed', 'infinite'],
    ],
    [{ companion: { model: 'plummer', count: 5 } }, 'usage.encounter', ['--separation']],
    [{ encounter: { separation: 5 } }, 'usage.encounter', ['--companion']],
    [
      { companion: { model: 'plummer', count: 0 }, encounter: { separation: 5 } },
      'usage.modelOption',
      ['--companion count'],
    ],
    [
      {
        companion: { model: 'plummer', count: 5, second: { model: 'king', count: 5 } },
        encounter: { separation: 5 },
      },
      'usage.modelOption',
      ['companion.second.centralPotential'],
    ],
    [{ scaleRadius: 1e300, float32: true }, 'usage.modelOption', ['Body 0', '24 bits']],
    [{ mass: 1e-44, float32: true, count: 300 }, 'usage.modelOption', ['Body 0', 'mass 0']],
  ];
  it.each(wrong)('refuses %o', (options, code, parts) => {
    let caught: unknown;
    try {
      makeModel({ ...basis, ...options } as MakeOptions);
    } catch (error) {
      caught = error;
    }
    expect(caught).toBeInstanceOf(UsageError);
    const error = caught as UsageError;
    expect(error.code).toBe(code);
    for (const part of parts) expect(error.message).toContain(part);
    expect(error.remedy).toMatch(/\w+.*\.$/);
  });
});
