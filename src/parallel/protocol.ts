/** Messages between a crew and its workers: one round out, exactly one reply back, failure included. */

export interface Round {
  readonly roundId: number;
  /** URL of the task module. */
  readonly module: string;
  readonly name: string;
  /** Cloned to each worker; big arrays in it lie on shared memory and are not copied. */
  readonly argument: unknown;
  readonly jobs: number;
  /** One shared number: the next job to take. Its high value after a failure stops the others. */
  readonly counter: Int32Array;
}

export type Reply =
  | { readonly kind: 'done'; readonly roundId: number; readonly result: unknown }
  | {
      readonly kind: 'failed';
      readonly roundId: number;
      readonly message: string;
      readonly stack: string | undefined;
    };
