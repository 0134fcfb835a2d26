/**
 * Measures one file with general-purpose 3-D trees in this fresh process and prints as JSON, for
 * each: seconds of one thread for building and for sums at all bodies, and the error of the sums.
 *
 * Both are walked as by Barnes & Hut 1986 with monopoles: a cell counts as one body if its width is
 * less than 0.7 of its distance.
 */
import { octree } from 'd3-octree';
import createForceTree from 'ngraph.quadtreebh3d';
import { readSnapshot } from '../../dist/snapshot/read.js';
import { exactAccelerations, exactSums, least, rms, spread } from './tools.js';

const OPENING_ANGLE = 0.7;
/** Up to this many bodies sums are taken at all, beyond at a sample. */
const ALL_UP_TO = 1e5;
const SAMPLE = 5000;
const EXACT_SAMPLE = 200;
const WARMING = 500;

const particles = await readSnapshot(process.argv[2], {});
const { count } = particles;
const repeats = count > ALL_UP_TO ? 0 : 2;
const targets = spread(count, count > ALL_UP_TO ? SAMPLE : count);
const potentials = await potentialsByOctree();
const forces = await forcesByForceTree();
console.log(JSON.stringify({ 'd3-octree': potentials, 'ngraph.quadtreebh3d': forces }));

/** Potentials: the package's tree, with monopoles added to its nodes and a walk written here. */
async function potentialsByOctree() {
  const { x, y, z, mass } = particles;
  const bodies = Array.from(mass, (m, i) => ({ x: x[i], y: y[i], z: z[i], mass: m }));
  const build = await least(repeats, () => {
    const tree = octree()
      .x((body) => body.x)
      .y((body) => body.y)
      .z((body) => body.z)
      .addAll(bodies);
    tree.visitAfter(addMonopole);
    return tree.root();
  });
  const walked = sumsAt((body) => potentialAt(build.result, bodies[body]));
  const exact = exactSums(particles, EXACT_SAMPLE);
  const errors = exact.map(
    ({ body, phi }) => (potentialAt(build.result, bodies[body]) - phi) / exact.mean,
  );
  return { buildSeconds: build.seconds, sumSeconds: walked, rms: rms(errors) };
}

/** Inner nodes are arrays of eight, leaves are lists of the bodies at one point. */
function addMonopole(node, x0, y0, z0, x1) {
  let [mass, x, y, z] = [0, 0, 0, 0];
  const add = (part) => {
    mass += part.mass;
    x += part.mass * part.x;
    y += part.mass * part.y;
    z += part.mass * part.z;
  };
  if (node.length) node.forEach(add);
  else for (let leaf = node; leaf; leaf = leaf.next) add(leaf.data);
  node.width = x1 - x0;
  node.mass = mass;
  node.x = x / mass;
  node.y = y / mass;
  node.z = z / mass;
}

/** Σ m/r. The package's own `visit` takes 2.6 times as long, since it makes an object for each node. */
function potentialAt(root, body) {
  const { x, y, z } = body;
  const square = OPENING_ANGLE * OPENING_ANGLE;
  const stack = [root];
  let phi = 0;
  while (stack.length > 0) {
    const node = stack.pop();
    if (!node.length) {
      for (let leaf = node; leaf; leaf = leaf.next) {
        const other = leaf.data;
        if (other === body) continue;
        const dx = other.x - x;
        const dy = other.y - y;
        const dz = other.z - z;
        phi += other.mass / Math.sqrt(dx * dx + dy * dy + dz * dz);
      }
      continue;
    }
    const dx = node.x - x;
    const dy = node.y - y;
    const dz = node.z - z;
    const r2 = dx * dx + dy * dy + dz * dz;
    if (node.width * node.width < square * r2) phi += node.mass / Math.sqrt(r2);
    else for (let k = 0; k < 8; k++) if (node[k]) stack.push(node[k]);
  }
  return phi;
}

/** Forces: the package keeps its nodes to itself and walks them itself. */
async function forcesByForceTree() {
  const { x, y, z, mass } = particles;
  const bodies = Array.from(mass, (m, i) => ({
    pos: { x: x[i], y: y[i], z: z[i] },
    force: { x: 0, y: 0, z: 0 },
    mass: m,
  }));
  const build = await least(repeats, () => {
    const tree = createForceTree({ gravity: 1, theta: OPENING_ANGLE });
    tree.insertBodies(bodies);
    return tree;
  });
  const forceAt = (body) => {
    const { force } = bodies[body];
    force.x = force.y = force.z = 0;
    build.result.updateBodyForce(bodies[body]);
    return force;
  };
  const walked = sumsAt((body) => forceAt(body).x);
  const errors = exactAccelerations(particles, EXACT_SAMPLE).map(({ body, a }) => {
    const force = forceAt(body);
    const m = mass[body];
    const off = Math.hypot(force.x / m - a[0], force.y / m - a[1], force.z / m - a[2]);
    return off / Math.hypot(...a);
  });
  return { buildSeconds: build.seconds, sumSeconds: walked, rms: rms(errors) };
}

/** Seconds for all bodies, from those of the targets. */
function sumsAt(sumAt) {
  let total = 0;
  for (const body of targets.slice(0, WARMING)) total += sumAt(body);
  const start = performance.now();
  for (const body of targets) total += sumAt(body);
  const seconds = (performance.now() - start) / 1000;
  if (!Number.isFinite(total)) throw new Error(`a peer's sums are ${total}`);
  return (seconds * count) / targets.length;
}
