/** What a schema cannot say of a layout: names that must agree with each other, and with the header. */
import { InputError } from '../../errors.ts';
import { nearestName } from '../../numerics/nearest.ts';
import { isSkip, type Layout, type LayoutField, type StatedNumber } from './layout.ts';
import { TYPE_BYTES } from './types.ts';

/** @throws InputError `input.layoutInvalid`, which names file, key, found and expected */
export function checkMeaning(layout: Layout, file: string): void {
  const refuse: Refuse = (key, text, remedy) => {
    throw new InputError('input.layoutInvalid', `${file}: ${key}: ${text}`, remedy);
  };
  checkComponents(layout, refuse);
  checkFields(layout, refuse);
  checkStatedOnce(layout, refuse);
  checkComoving(layout, refuse);
  checkParts(layout, refuse);
  checkHeader(layout, refuse);
}

type Refuse = (key: string, text: string, remedy: string) => never;

const VECTORS: Readonly<Record<string, readonly string[]>> = {
  position: ['x', 'y', 'z'],
  velocity: ['vx', 'vy', 'vz'],
  acceleration: ['ax', 'ay', 'az'],
};
const IDENTIFIERS = new Set(['id', 'group', 'subgroup']);
const OTHER_SCALARS = ['component', 'softening', 'potential', 'specificEnergy', 'density'];
const SCALARS = new Set([
  'mass',
  ...Object.values(VECTORS).flat(),
  ...IDENTIFIERS,
  ...OTHER_SCALARS,
]);

/** A field with its place in the layout, under the name that its quantity has. */
interface Named {
  readonly field: LayoutField;
  readonly key: string;
  readonly name: string;
}

function namedFields(layout: Layout): Named[] {
  return layout.fields.flatMap((field, index) => {
    if (isSkip(field)) return [];
    return [{ field, key: `fields[${index}]`, name: field.name === 'm' ? 'mass' : field.name }];
  });
}

function checkComponents(layout: Layout, refuse: Refuse): void {
  const names = (layout.components ?? []).map(({ name }) => name);
  names.forEach((name, index) => {
    if (names.indexOf(name) === index) return;
    refuse(
      `components[${index}].name`,
      `"${name}" stands there twice; expected each name once`,
      'Rename one of them.',
    );
  });
  layout.fields.forEach(({ components }, index) => {
    if (components === undefined) return;
    const key = `fields[${index}].components`;
    if (names.length === 0) {
      refuse(
        key,
        'found, although the layout has no key "components"; expected both',
        'Add the list of components, or remove this key.',
      );
    }
    components.forEach((name, place) => {
      if (!names.includes(name)) {
        const nearest = nearestName(name, names);
        refuse(
          key,
          `found "${name}"; expected names of components: ${names.join(', ')}`,
          nearest === null ? 'Name one of these.' : `Did you mean "${nearest}"?`,
        );
      }
      if (components.indexOf(name) !== place) {
        refuse(key, `"${name}" stands there twice; expected each name once`, 'Remove one of them.');
      }
    });
  });
  for (const [index, component] of (layout.components ?? []).entries()) {
    for (const key of ['count', 'mass', 'softening'] as const) {
      checkReference(`components[${index}].${key}`, component[key], layout, refuse);
    }
    for (const key of ['mass', 'softening'] as const) {
      const value = component[key];
      if (typeof value === 'number' && value < 0) {
        refuse(`components[${index}].${key}`, `found ${value}; expected at least 0`, 'Correct it.');
      }
    }
  }
}

function checkReference(
  key: string,
  value: StatedNumber | { readonly header: string } | undefined,
  layout: Layout,
  refuse: Refuse,
): void {
  if (value === undefined || typeof value === 'number') return;
  if ('scale' in value && value.scale === 0) {
    refuse(`${key}.scale`, 'found 0; expected another number', 'Remove the scale.');
  }
  const names = layout.header.map(({ name }) => name);
  if (names.includes(value.header)) return;
  const nearest = nearestName(value.header, names);
  refuse(
    `${key}.header`,
    `found "${value.header}"; expected the name of an item of the header${names.length > 0 ? `: ${names.join(', ')}` : ', which has none'}`,
    nearest === null
      ? 'Add it to "header" with its type and offset.'
      : `Did you mean "${nearest}"?`,
  );
}

/** Whether two fields speak of the same body. */
function shareBodies(a: LayoutField, b: LayoutField): boolean {
  if (a.components === undefined || b.components === undefined) return true;
  return a.components.some((name) => b.components?.includes(name));
}

function checkFields(layout: Layout, refuse: Refuse): void {
  const fields = namedFields(layout);
  fields.forEach(({ field, key, name }, index) => {
    if (field.scale === 0) {
      refuse(`${key}.scale`, 'found 0; expected another number', 'Remove the scale.');
    }
    const earlier = fields
      .slice(0, index)
      .find((other) => other.name === name && shareBodies(other.field, field));
    if (earlier !== undefined) {
      refuse(
        `${key}.name`,
        `"${field.name}" stands there already as ${earlier.key}; expected each quantity once`,
        'Rename the one that is not wanted.',
      );
    }
    const width = Object.hasOwn(VECTORS, name) ? 3 : SCALARS.has(name) ? 1 : field.width;
    if (field.width !== width) {
      refuse(
        `${key}.width`,
        `found ${field.width} for ${field.name}; expected ${width}`,
        width === 3
          ? 'Or give the three components as separate fields.'
          : 'Give each number its own field.',
      );
    }
    const first = fields.find((other) => other.name === name);
    if (IDENTIFIERS.has(name) && first !== undefined && first.field.type !== field.type) {
      refuse(
        `${key}.type`,
        `found ${field.type} for ${field.name}, which is ${first.field.type} in ${first.key}; expected the same`,
        'Identifiers of all components must have one type; rename those that are not wanted.',
      );
    }
  });
  for (const [vector, scalars] of Object.entries(VECTORS)) {
    for (const whole of fields.filter(({ name }) => name === vector)) {
      const part = fields.find(
        ({ name, field }) => scalars.includes(name) && shareBodies(field, whole.field),
      );
      if (part === undefined) continue;
      refuse(
        'fields',
        `found both "${vector}" and "${part.name}"; expected one of them`,
        'Rename the one that is not wanted.',
      );
    }
  }
}

/** A mass or softening that is stated must not lie in a field, too. */
function checkStatedOnce(layout: Layout, refuse: Refuse): void {
  const fields = namedFields(layout);
  const components = layout.components ?? [];
  const mass = fields.find(({ name }) => name === 'mass');
  if (mass !== undefined && layout.constants?.mass !== undefined) {
    refuse(
      'constants.mass',
      `found, although ${mass.key} holds masses; expected one of them`,
      'Remove constants.mass, or rename the field.',
    );
  }
  for (const quantity of ['mass', 'softening'] as const) {
    components.forEach((component, index) => {
      if (component[quantity] === undefined) return;
      const key = `components[${index}].${quantity}`;
      const field = fields.find(
        (other) =>
          other.name === quantity && (other.field.components?.includes(component.name) ?? true),
      );
      const other =
        field?.key ??
        (layout.constants?.[quantity] !== undefined ? `constants.${quantity}` : undefined) ??
        (quantity === 'softening' && layout.header.some(({ name }) => name === quantity)
          ? 'the header'
          : undefined);
      if (other === undefined) return;
      refuse(
        key,
        `found, although ${other} states the ${quantity} of ${component.name}; expected one of them`,
        `Remove one of them${field === undefined ? '' : `, or name in ${field.key}.components those that it holds`}.`,
      );
    });
  }
  const codes = fields.find(({ name }) => name === 'component');
  if (codes !== undefined && components.length > 0) {
    refuse(
      `${codes.key}.name`,
      'found "component", although the layout lists components; expected one of them',
      'Rename the field, or remove the list.',
    );
  }
}

function checkComoving(layout: Layout, refuse: Refuse): void {
  const { comoving } = layout;
  if (comoving === undefined) return;
  for (const [key, value] of Object.entries(comoving)) {
    if (typeof value !== 'string') checkReference(`comoving.${key}`, value, layout, refuse);
  }
  const { scaleFactor, redshift, hubbleRate, hubbleConstant, matterDensity, darkEnergyDensity } =
    comoving;
  if ((scaleFactor === undefined) === (redshift === undefined)) {
    refuse(
      'comoving',
      `found ${scaleFactor === undefined ? 'neither scaleFactor nor' : 'both scaleFactor and'} redshift; expected one of them`,
      'The scale factor is 1/(1 + redshift).',
    );
  }
  const hasDensities = matterDensity !== undefined || darkEnergyDensity !== undefined;
  const hasOther = hubbleConstant !== undefined || hasDensities;
  if (hubbleRate !== undefined && hasOther) {
    refuse(
      'comoving.hubbleRate',
      'found beside hubbleConstant or densities; expected one of both',
      'Remove hubbleConstant, matterDensity and darkEnergyDensity, or hubbleRate.',
    );
  }
  if (hubbleRate === undefined && (hubbleConstant === undefined || matterDensity === undefined)) {
    refuse(
      'comoving',
      'found no rate of expansion; expected hubbleRate, or hubbleConstant and matterDensity',
      'Say { "header": "NAME" } if the header holds it, or 0 for a box that does not expand.',
    );
  }
}

function checkParts({ parts }: Layout, refuse: Refuse): void {
  if (parts === undefined) return;
  const example = 'Write it as "run_{part}.bin", or "run_*_{part}.bin" for a series.';
  const places = parts.split('{part}').length - 1;
  if (places !== 1) {
    refuse('parts', `found {part} ${places} times in "${parts}"; expected it once`, example);
  }
  if (/[/\\]/.test(parts)) {
    refuse('parts', `found a folder in "${parts}"; expected the name of a file alone`, example);
  }
  // A number beside * could begin anywhere.
  if (/\*\{part\}|\{part\}[*0-9]|[0-9]\{part\}|\*\*/.test(parts)) {
    refuse(
      'parts',
      `found "${parts}", in which it is not clear where the number begins and ends; expected a letter or sign on both sides of it`,
      example,
    );
  }
}

function checkHeader(layout: Layout, refuse: Refuse): void {
  const seen = new Set<string>();
  layout.header.forEach((item, index) => {
    const end = item.offset + TYPE_BYTES[item.type];
    if (end > layout.headerBytes) {
      refuse(
        `header[${index}]`,
        `"${item.name}" ends at byte ${end}, but headerBytes is ${layout.headerBytes}`,
        `Correct the offset, or set headerBytes to at least ${end}.`,
      );
    }
    if (seen.has(item.name)) {
      refuse(
        `header[${index}].name`,
        `"${item.name}" stands there twice; expected each name once`,
        'Rename one of them.',
      );
    }
    seen.add(item.name);
  });
  for (const name of Object.keys(layout.constants ?? {})) {
    if (seen.has(name)) {
      refuse(
        `constants.${name}`,
        `found, although the header holds ${name}; expected one of them`,
        'Remove the constant, or rename the item of the header.',
      );
    }
  }
}
