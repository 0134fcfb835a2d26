/** Turns generated source text into a function; the only place of the project that does so. */

/**
 * @param name - shows in profiles and stack traces
 * @param parameters - names of the parameters
 * @param body - source text made by a generator of this room; never anything a user wrote
 */
export function compile<F>(name: string, parameters: readonly string[], body: string): F {
  const text = `return function ${name}(${parameters.join(',')}){\n${body}\n}`;
  // eslint-disable-next-line @typescript-eslint/no-implied-eval -- straight-line kernels for each order
  const make = new Function(`'use strict';${text}`) as () => F;
  return make();
}
