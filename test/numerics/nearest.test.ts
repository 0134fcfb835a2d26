import { expect, it } from 'vitest';
import { editDistance, nearestName } from '../../src/numerics/nearest.ts';

it.each([
  // Source: from memory, the example of textbooks (Levenshtein distance 3).
  ['kitten', 'sitting', 3],
  ['saturday', 'sunday', 3],
  // Source: definition; a swap of neighbours counts 1, and no letter is edited twice (so not 2).
  ['ca', 'ac', 1],
  ['ca', 'abc', 3],
  ['', 'abc', 3],
  ['same', 'same', 0],
])('distance of %s and %s is %i, both ways', (a, b, distance) => {
  expect(editDistance(a, b)).toBe(distance);
  expect(editDistance(b, a)).toBe(distance);
});

// No source: what a user would want.
it.each([
  ['velocty', 'velocity'],
  ['MASS', 'mass'],
  ['pos', 'position'],
  ['xv', 'x'],
  ['temperature', null],
  ['po', null],
])('for %s offers %s', (name, nearest) => {
  expect(nearestName(name, ['mass', 'position', 'velocity', 'x', 'y'])).toBe(nearest);
});

it('offers nothing when nothing is known', () => {
  expect(nearestName('mass', [])).toBeNull();
});
