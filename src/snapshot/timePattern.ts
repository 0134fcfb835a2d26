/** Times in the names of files: `snap_{time}.bin`. */
export interface TimePattern {
  readonly text: string;
  /** What the number in the name is: the time itself, or the number of a step. */
  readonly kind: 'time' | 'step';
  /** The number in the name of a file (without folders), or null if the name does not fit. */
  readonly numberIn: (name: string) => number | null;
}

const NUMBER = String.raw`(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?`;

/**
 * Reads a pattern: `{time}` or `{step}` stands for a number, `*` for anything, all else for itself.
 * It must fit the whole name. A number after `*` has no sign: in `run-120` the dash is none.
 * @param refuse - throws the error for a pattern without exactly one placeholder, or with an unknown one
 */
export function parseTimePattern(
  text: string,
  refuse: (found: string, remedy: string) => never,
): TimePattern {
  const placeholders = [...text.matchAll(/\{([^{}]*)\}/g)].map(([, name]) => name);
  const [kind] = placeholders;
  if (placeholders.length !== 1 || (kind !== 'time' && kind !== 'step')) {
    const found = placeholders.map((name) => `{${name}}`).join(' and ');
    return refuse(
      `"${text}" has ${found === '' ? 'no placeholder' : found}; expected {time} or {step}, once`,
      'For instance "snap_{time}.bin"; * stands for anything.',
    );
  }
  const source = text
    .split(/(\{[^{}]*\}|\*)/)
    .map((part, index, parts) => {
      if (part === '*') return '.*?';
      if (!part.startsWith('{')) return part.replace(/[\\^$.*+?()[\]{}|/]/g, String.raw`\$&`);
      const afterAnything = parts.slice(0, index).findLast((before) => before !== '') === '*';
      return `(${afterAnything ? '' : '[+-]?'}${NUMBER})`;
    })
    .join('');
  const whole = new RegExp(`^${source}$`, 'su');
  return {
    text,
    kind,
    numberIn: (name) => {
      const found = whole.exec(name)?.[1];
      const number = found === undefined ? NaN : Number(found);
      return Number.isFinite(number) ? number : null;
    },
  };
}
