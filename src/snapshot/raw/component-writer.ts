/** What a layout with components wants of the particles that are to be written. */
import { InputError } from '../../errors.ts';
import type { Particles } from '../particles.ts';
import type { StatedComponent } from './components.ts';
import { quotient } from './encode.ts';
import type { Layout, LayoutComponent } from './layout.ts';

/**
 * The components of the layout with their numbers of bodies; null for a layout without components.
 * Bodies must lie in the order of the layout already: nobody reorders them.
 * @throws InputError `input.missingColumn` (no components), `input.doesNotFit` (another order, a
 * component that the layout lacks, or another count, mass or softening than it states)
 */
export function writtenComponents(
  path: string,
  particles: Particles,
  layout: Layout,
): StatedComponent[] | null {
  if (layout.components === undefined) return null;
  const counts = countsOf(path, particles, layout.components);
  let begin = 0;
  return layout.components.map((component, index): StatedComponent => {
    const { name } = component;
    const count = counts[index];
    if (typeof component.count === 'number' && component.count !== count) {
      throw doesNotFit(path, `${component.count} bodies of ${name}`, `have ${count}`);
    }
    const own = { begin, count };
    begin += count;
    return {
      name,
      count: BigInt(count),
      mass: commonValue(path, particles, component, 'mass', own),
      softening: commonValue(path, particles, component, 'softening', own),
    };
  });
}

function countsOf(
  path: string,
  { columns, componentNames, count }: Particles,
  components: readonly LayoutComponent[],
): number[] {
  const names = components.map(({ name }) => name);
  const { component } = columns;
  if (component === undefined) {
    throw new InputError(
      'input.missingColumn',
      `${path}: the layout has components (${names.join(', ')}), which the particles do not have`,
      'Remove them from the layout to write.',
    );
  }
  const counts = names.map(() => 0);
  let last = 0;
  for (let i = 0; i < count; i++) {
    const name = componentNames[component[i]];
    const index = names.indexOf(name);
    if (index < 0)
      throw doesNotFit(path, `components ${names.join(', ')}`, `have ${name} at body ${i}`);
    if (index < last) {
      throw doesNotFit(
        path,
        `${name} before ${names[last]}`,
        `have ${name} after it, at body ${i}`,
      );
    }
    last = index;
    counts[index]++;
  }
  return counts;
}

/** The value that all bodies of a component share, if the layout states it. */
function commonValue(
  path: string,
  particles: Particles,
  component: LayoutComponent,
  quantity: 'mass' | 'softening',
  { begin, count }: { readonly begin: number; readonly count: number },
): number | null {
  const stated = component[quantity];
  if (stated === undefined) return null;
  const column = quantity === 'mass' ? particles.mass : particles.columns.softening;
  if (column === undefined) {
    throw new InputError(
      'input.missingColumn',
      `${path}: the layout states the ${quantity} of ${component.name}, which the particles do not hold`,
      'Remove it from the layout to write.',
    );
  }
  if (typeof stated === 'object' && count === 0) return 0;
  const value = typeof stated === 'object' ? column[begin] : stated;
  for (let i = begin; i < begin + count; i++) {
    if (column[i] !== value) {
      const what = `${quantity} ${value} for all bodies of ${component.name}`;
      throw doesNotFit(path, what, `have ${column[i]} at body ${i}`);
    }
  }
  return value;
}

/** Values of the items of the header that components refer to. */
export function componentHeader(
  path: string,
  layout: Layout,
  components: readonly StatedComponent[],
): Record<string, number> {
  const values: Record<string, number> = {};
  layout.components?.forEach((component, index) => {
    for (const key of ['count', 'mass', 'softening'] as const) {
      const reference = component[key];
      if (typeof reference !== 'object') continue;
      const scale = 'scale' in reference ? reference.scale : 1;
      const value = quotient(Number(components[index][key]), scale);
      const other = values[reference.header] ?? value;
      if (other !== value) {
        throw doesNotFit(
          path,
          `one ${reference.header} in the header`,
          `need ${other} and ${value}`,
        );
      }
      values[reference.header] = value;
    }
  });
  return values;
}

function doesNotFit(path: string, wanted: string, found: string): InputError {
  return new InputError(
    'input.doesNotFit',
    `${path}: the layout says ${wanted}, the particles ${found}`,
    'Correct the layout to write, or the order of the bodies.',
  );
}
