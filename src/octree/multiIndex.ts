/** Multi-indices (powers of x, y and z) and the names they get in generated code. */
export type Index = readonly [number, number, number];

export const orderOf = ([i, j, k]: Index): number => i + j + k;
export const nameOf = ([i, j, k]: Index): string => `${i}${j}${k}`;
export const plus = (a: Index, b: Index): Index => [a[0] + b[0], a[1] + b[1], a[2] + b[2]];
export const minus = (a: Index, b: Index): Index => [a[0] - b[0], a[1] - b[1], a[2] - b[2]];
export const within = (a: Index, b: Index): boolean => a[0] <= b[0] && a[1] <= b[1] && a[2] <= b[2];

const factorial = (n: number): number => (n <= 1 ? 1 : n * factorial(n - 1));
/** n! = i! j! k!. */
export const factorialOf = ([i, j, k]: Index): number => factorial(i) * factorial(j) * factorial(k);

/** All multi-indices with order from `low` to `high`, by order, x before y before z. */
export function indices(low: number, high: number): Index[] {
  const list: Index[] = [];
  for (let order = low; order <= high; order++) {
    for (let i = order; i >= 0; i--) {
      for (let j = order - i; j >= 0; j--) list.push([i, j, order - i - j]);
    }
  }
  return list;
}

/** Source text of an array element at a constant distance from a base. */
export const slot = (array: string, base: string, at: number): string =>
  `${array}[${base}${at ? `+${at}` : ''}]`;
