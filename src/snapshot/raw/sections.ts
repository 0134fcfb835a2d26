/** A layout cut into sections: what lies together in the file, before it is known where. */
import { placeComponents, type StatedComponent } from './components.ts';
import {
  fieldBytes,
  isHeldBy,
  isSkip,
  type Layout,
  type LayoutField,
  type LayoutSkip,
} from './layout.ts';

export type Entry = LayoutField | LayoutSkip;

/** Bodies `body` … of a section are bodies `at` … of the file. */
export interface Run {
  readonly body: number;
  readonly at: number;
  readonly count: number;
}

/** Fields that lie together, of the bodies that hold them. */
export interface Section {
  /** For messages. */
  readonly what: string;
  readonly entries: readonly Entry[];
  /** Null for a layout without components: all bodies. */
  readonly holders: readonly StatedComponent[] | null;
  /** Of all components. */
  readonly components: readonly StatedComponent[];
}

/** In the order in which they lie in the file. */
export function sectionsOf(
  layout: Layout,
  components: readonly StatedComponent[] | null,
): Section[] {
  const { fields, arrangement } = layout;
  if (components === null) {
    const whole = { holders: null, components: [] };
    if (arrangement === 'interleaved') return [{ what: 'the bodies', entries: fields, ...whole }];
    return fields.map((entry) => ({ what: nameOf(entry), entries: [entry], ...whole }));
  }
  const held = (name: string) => fields.filter((entry) => isHeldBy(entry, name));
  const sections: Section[] = [];
  if (arrangement === 'columns') {
    for (const entry of fields) {
      const holders = components.filter(({ name }) => isHeldBy(entry, name));
      sections.push({ what: nameOf(entry), entries: [entry], holders, components });
    }
    return sections;
  }
  for (const component of components) {
    const { name } = component;
    const whole = { holders: [component], components };
    if (arrangement === 'interleaved') {
      sections.push({ what: `the bodies of ${name}`, entries: held(name), ...whole });
      continue;
    }
    for (const entry of held(name)) {
      sections.push({ what: `${nameOf(entry)} of ${name}`, entries: [entry], ...whole });
    }
  }
  return sections.filter(({ entries }) => entries.length > 0);
}

function nameOf(entry: Entry): string {
  return isSkip(entry) ? `a field of ${entry.skip} bytes` : entry.name;
}

/** Bytes that a body takes in a section. */
export const strideOf = ({ entries }: Section): number =>
  entries.reduce((sum, entry) => sum + fieldBytes(entry), 0);

/** Bodies in a section, if `all` is the number of all bodies. */
export function countIn({ holders }: Section, all: bigint | null): bigint | null {
  return holders === null ? all : holders.reduce((sum, { count }) => sum + count, 0n);
}

/** @param all - number of all bodies */
export function runsOf({ holders, components }: Section, all: number): Run[] {
  if (holders === null) return [{ body: 0, at: 0, count: all }];
  const runs: Run[] = [];
  let body = 0;
  for (const { name, begin, count } of placeComponents(components)) {
    if (count === 0 || !holders.some((holder) => holder.name === name)) continue;
    const last = runs.at(-1);
    if (last?.at === begin - (last?.count ?? 0)) {
      runs[runs.length - 1] = { ...last, count: last.count + count };
    } else runs.push({ body, at: begin, count });
    body += count;
  }
  return runs;
}
