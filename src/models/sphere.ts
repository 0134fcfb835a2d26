/** Draws the bodies of one sphere into columns. */
import type { Random } from '../numerics/random.ts';
import { allocateColumn, type FloatColumn } from '../snapshot/particles.ts';
import { splitPairs } from './binaries.ts';
import { release } from './escapers.ts';
import { figuresOf } from './figures.ts';
import { drawMasses, normaliseMasses } from './masses.ts';
import { massFunctionOf, optionError } from './options.ts';
import type { ComponentPlan, SpherePlan } from './plan.ts';
import { turn } from './rotation.ts';
import { drawBodies, type BodyView } from './sampling.ts';

/** Bodies that share one random stream: the cut of the work, which fixes the result whoever does it. */
const BODIES_PER_STREAM = 65536;

/**
 * Families of random streams of a component, from its first: bodies have one of their own, so that a seed
 * gives the same ones with any masses.
 */
const FAMILY = { bodies: 0, masses: 1, rotation: 2, binaries: 3, escapers: 4 };
const FAMILIES_PER_COMPONENT = 8;
const COMPONENTS_PER_SPHERE = 2;

/** The bodies as the forces need them. */
export interface Systems extends BodyView {
  readonly count: number;
}

/** A sphere that is drawn but for its binaries and escapers, about the origin and at rest there. */
export interface DrawnSphere {
  readonly plan: SpherePlan;
  readonly bodies: BodyView;
  /**
   * All bodies with each pair as one of its mass at its centre: views into the columns, but for the masses
   * of pairs.
   */
  readonly systems: Systems;
  /** Splits the pairs and sends the escapers off. */
  complete(reach: number): void;
}

/**
 * @param bodies - columns of `plan.count` bodies to fill: the first component, then the second
 * @param order - 0 for the first sphere, 1 for its companion
 */
export function drawSphere(
  plan: SpherePlan,
  bodies: BodyView,
  settings: { readonly gravity: number; readonly mantissaBits: number; readonly order: number },
  root: Random,
): DrawnSphere {
  const { components, pairs, count } = plan;
  const familyOf = (component: number, kind: number): Random => {
    const first = (settings.order * COMPONENTS_PER_SPHERE + component) * FAMILIES_PER_COMPONENT;
    return root.family(first + kind);
  };
  let begin = 0;
  components.forEach((component, k) => {
    const end = begin + component.options.count;
    const own = viewOf(bodies, begin, end);
    fillMasses(component, own.mass, familyOf(k, FAMILY.masses));
    // The centres of pairs stand behind the room for their members, and the single bodies where they stay.
    const isFirst = k === 0;
    drawSystems(component, viewOf(own, isFirst ? pairs : 0, end - begin), settings.gravity, {
      bodies: familyOf(k, FAMILY.bodies),
      rotation: familyOf(k, FAMILY.rotation),
    });
    begin = end;
  });
  return {
    plan,
    bodies,
    systems: {
      ...viewOf(bodies, pairs, count),
      mass: pairs === 0 ? bodies.mass : systemMasses(bodies.mass, pairs),
      count: count - pairs,
    },
    complete(reach) {
      const { gravity, mantissaBits, order } = settings;
      const owner = order === 0 ? '' : 'companion.';
      if (pairs > 0) {
        const { semiMajorAxis } = plan;
        const about = { gravity, semiMajorAxis, reach, mantissaBits, owner };
        splitPairs(bodies, pairs, about, familyOf(0, FAMILY.binaries));
      }
      if (plan.escapers > 0) {
        const end = components[0].options.count;
        const speed = plan.escaperSpeed ?? defaultEscaperSpeed(plan, gravity, owner);
        const random = familyOf(0, FAMILY.escapers);
        const potential = (r: number): number => gravity * potentialOf(components, r);
        release(bodies, potential, speed, random, end - plan.escapers, end);
      }
    },
  };
}

/** φ/G of the whole sphere, what lies beyond a cut included. */
function potentialOf(components: readonly ComponentPlan[], r: number): number {
  let sum = 0;
  for (const { model, wholeMass, scaleRadius } of components) {
    sum += (wholeMass / scaleRadius) * model.potential(r / scaleRadius);
  }
  return sum;
}

function defaultEscaperSpeed(plan: SpherePlan, gravity: number, owner: string): number {
  const { potential, mass } = figuresOf(plan, gravity);
  if (potential !== null) return Math.sqrt(-potential / (3 * mass));
  throw optionError(
    `${owner}escapers.speed`,
    undefined,
    'given for a model whose potential energy is infinite',
    'Give the speed of the escapers at infinity.',
  );
}

export function viewOf(bodies: BodyView, begin: number, end: number): BodyView {
  const part = (column: FloatColumn): FloatColumn => column.subarray(begin, end);
  return {
    mass: part(bodies.mass),
    x: part(bodies.x),
    y: part(bodies.y),
    z: part(bodies.z),
    vx: part(bodies.vx),
    vy: part(bodies.vy),
    vz: part(bodies.vz),
  };
}

function fillMasses(component: ComponentPlan, mass: FloatColumn, family: Random): void {
  const { options, wholeMass, massFraction } = component;
  const total = wholeMass * massFraction;
  if (options.masses !== 'salpeter') {
    mass.fill(total / mass.length);
    return;
  }
  const law = massFunctionOf(options);
  const drawn = new Float64Array(mass.length);
  let draws = family;
  for (let begin = 0; begin < mass.length; begin += BODIES_PER_STREAM) {
    const end = Math.min(mass.length, begin + BODIES_PER_STREAM);
    drawMasses(law, draws.stream(0), drawn, begin, end);
    draws = draws.stream(1);
  }
  normaliseMasses(drawn, total, mass);
}

function drawSystems(
  component: ComponentPlan,
  systems: BodyView,
  gravity: number,
  families: { readonly bodies: Random; readonly rotation: Random },
): void {
  const { options, wholeMass, massFraction, scaleRadius } = component;
  const target = {
    ...systems,
    lengthScale: scaleRadius,
    velocityScale: Math.sqrt((gravity * wholeMass) / scaleRadius),
  };
  const { rotation = 0 } = options;
  const source = component.source();
  let { bodies, rotation: turns } = families;
  const count = systems.x.length;
  for (let begin = 0; begin < count; begin += BODIES_PER_STREAM) {
    const end = Math.min(count, begin + BODIES_PER_STREAM);
    drawBodies(source, bodies.stream(0), massFraction, target, begin, end);
    bodies = bodies.stream(1);
    if (rotation === 0) continue;
    turn(target, rotation, turns.stream(0), begin, end);
    turns = turns.stream(1);
  }
}

/** Masses of the systems: a pair's two, then the single bodies'. */
function systemMasses(mass: FloatColumn, pairs: number): FloatColumn {
  const systems = allocateColumn(mass.length - pairs);
  for (let j = 0; j < pairs; j++) systems[j] = mass[2 * j] + mass[2 * j + 1];
  for (let i = 2 * pairs; i < mass.length; i++) systems[i - pairs] = mass[i];
  return systems;
}
