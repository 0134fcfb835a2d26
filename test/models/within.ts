import { expect } from 'vitest';

/** Expects a relative difference below `relative`. */
export function within(value: number, expected: number, relative: number): void {
  expect(Math.abs(value / expected - 1), `${value} against ${expected}`).toBeLessThan(relative);
}
