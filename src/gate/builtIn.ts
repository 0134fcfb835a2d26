/** Rule sets by purpose, as files to start from: `settlemark gate --list NAME` prints one. */

const EQUILIBRIUM = `# Initial conditions: is a snapshot in equilibrium within its noise?
# Give one snapshot, or several of which each must pass.
settlemark: rules/1
name: equilibrium
description: >-
  Initial conditions: in equilibrium within the noise, centred, at rest, bound, no body twice.
rules:
  - name: in equilibrium
    quantity: clausiusRatio # 2T/|W|, 1 in equilibrium for any softening
    statistic: every
    withinErrors: { value: 1, times: 3 } # its error is the noise of finite N
    message: scale the velocities, or state softening, G and units as the run has them
  - name: no net in- or outflow
    quantity: expansion
    statistic: every
    withinErrors: { value: 0, times: 3 }
  - name: centred
    quantity: centreOffset # in half-mass radii
    statistic: every
    withinErrors: { value: 0, times: 3 }
    message: move the centre of mass to the origin
  - name: at rest
    quantity: bulkMotion # in dispersions
    statistic: every
    withinErrors: { value: 0, times: 3 }
    message: take the mean velocity away
  - name: bound
    quantity: boundFraction
    statistic: every
    atLeast: 0.99
  - name: no id twice
    quantity: remarks[duplicateIds]
    oneOf: [false]
  - name: no two bodies at one point
    quantity: remarks[coincidentBodies]
    oneOf: [false]
`;

const CONSERVATION = `# Does the run keep what it should? State its softening (--softening, 0 for none).
settlemark: rules/1
name: conservation
description: Energy, momentum, centre of mass, angular momentum, mass and bodies are kept.
rules:
  - name: energy
    quantity: audit.energyDrift # largest |E - E_0| over the larger of |E_0| and |U_0|/4
    atMost: 1.0e-3
    message: shorten the time step, or look at the steps of close pairs
  - name: momentum
    quantity: audit.momentumDrift # in dispersions
    atMost: 1.0e-3
  - name: centre of mass
    quantity: audit.centreDrift # in half-mass radii, off its straight path
    atMost: 1.0e-2
  - name: angular momentum
    quantity: audit.angularMomentumDrift # in M r_h sigma
    atMost: 1.0e-2
  - name: mass
    quantity: audit.massKept
    oneOf: [true]
  - name: bodies
    quantity: audit.particlesKept
    oneOf: [true]
`;

const SETTLED = `# Has the run settled?
settlemark: rules/1
name: settled
description: The run has settled, or changes only by two-body encounters.
rules:
  - name: settled
    quantity: verdict
    oneOf: [settled, relaxing]
  - name: in virial equilibrium
    quantity: ratio.mean # over the settled part; 2T/|W| if forces are softened
    near: { value: 1, tolerance: 0.05 }
    severity: warn
    message: settled off 1 - softening or G other than the run's, an external field, or bodies cut away?
  - name: long enough for averages
    quantity: independentSnapshots
    atLeast: 5
    severity: warn
`;

const COLLISIONLESS = `# Do the bodies stand for a smooth distribution, or do they feel each other one by one?
settlemark: rules/1
name: collisionless
description: Encounters of two bodies play no part over the length of the run.
rules:
  - name: short against relaxation
    quantity: spanInRelaxationTimes
    atMost: 0.1
    message: use more bodies, or stop earlier
  - name: no hard pairs
    quantity: hardPairs
    during: all
    statistic: max
    atMost: 0
    message: soften the forces
  - name: inner radius stays
    quantity: lagrangian[0.1]
    relativeTo: first
    during: settled
    statistic: driftPerCrossingTime
    between: [-0.01, 0.01]
    severity: warn
  - name: energy
    quantity: audit.energyDrift
    atMost: 2.0e-2
`;

/** Texts by name. */
export const BUILT_IN_RULES: Readonly<Record<string, string>> = {
  equilibrium: EQUILIBRIUM,
  conservation: CONSERVATION,
  settled: SETTLED,
  collisionless: COLLISIONLESS,
};
