"""The misfit's gradient once more, in a way that shares nothing with the compiled closures.

The whole network is written out again in complex arithmetic, its closures are solved by fixed-point iteration, and each
unknown takes a tiny imaginary step (Squire, W. and Trapp, G. (1998), SIAM Review 40, 110-112). No difference is taken,
so no digits are lost.
"""

import numpy as np

from rootwright.demo.laws import GRAVITY, LAMINAR, TURBULENT, VISCOSITY, Pipe

IMAGINARY = 1.0e-40
STEPS = 3               # of Newton, from a state whose real part is right: the imaginary part takes one or two
ROUNDS = 60             # of the fixed-point iterations; they contract by 0.7 or better a round


def gradient(survey, z, states):
    """Derivatives of the misfit with respect to z. The states only say where to start."""
    slopes = []
    for k in range(len(z)):
        moved = np.array(z, dtype=complex)
        moved[k] += 1j*IMAGINARY
        values = [unknown.handbook*np.exp(np.log(unknown.factor)*step) for unknown, step in zip(survey.unknowns, moved)]
        total = sum(_misfit(survey, case, values, state, read)
                    for case, state, read in zip(survey.cases, states, survey.readings))
        slopes.append(float(total.imag/IMAGINARY))
    return slopes


def _misfit(survey, case, values, state, read):
    network = survey.network
    flows, heads = _solve(network, case, values, np.array(state.flows) + 0j, np.array(state.heads) + 0j)
    deviations = [((heads if kind == "head" else flows)[k] - seen)/sensor.error
                  for (kind, k), sensor, seen in zip(network.places, network.sensors, read)]
    return 0.5*sum(deviation**2 for deviation in deviations)


def _solve(network, case, values, flows, heads):
    """Flows and heads from the equations of links and junctions, by Newton's method with slopes by differences: a slope
    off in its seventh digit slows it down a little and changes nothing else."""
    links, count = len(network.links), len(network.junctions)
    incidence = np.zeros((links, count))
    fixed = np.zeros(links)
    for row, ((a, b), link) in enumerate(zip(network.ends, network.links)):
        for node, name, sign in ((a, link.start, 1.0), (b, link.end, -1.0)):
            if node is None:
                fixed[row] += sign*case.levels[name]
            else:
                incidence[row, node] = sign
    demands = np.array(network.demands(case))
    for _ in range(STEPS):
        losses = _losses(network, flows, values)
        slopes = (_losses(network, flows*(1.0 + 1.0e-7), values) - losses)/(flows*1.0e-7)
        lost = incidence @ heads + fixed - losses
        missing = -incidence.T @ flows - demands
        matrix = incidence.T @ (incidence/slopes[:, None])
        rise = np.linalg.solve(matrix, missing - incidence.T @ (lost/slopes))
        flows, heads = flows + (lost + incidence @ rise)/slopes, heads + rise
    return flows, heads


def _losses(network, flows, values):
    return np.concatenate([_pipes(network, flows, values), _pumps(network, flows, values)])


def _value(what, values):
    return values[what] if isinstance(what, int) else what


def _pipes(network, flows, values):
    pipes = network.pipes
    flow = flows[:len(pipes)]
    diameter = np.array([pipe.diameter for pipe in pipes])
    area = np.pi*diameter**2/4
    speed = flow/area
    size = speed*np.sign(speed.real)
    relative = np.array([_value(pipe.roughness, values) for pipe in pipes])/diameter
    reynolds = size*diameter/VISCOSITY
    turbulent = np.where(reynolds.real < TURBULENT, TURBULENT, reynolds)
    y = np.full(len(pipes), 7.0 + 0j)
    for _ in range(ROUNDS):
        y = -2*np.log10(relative/3.7 + 2.51*y/turbulent)
    w = np.clip(reynolds.real, LAMINAR, TURBULENT)
    w = np.where((w > LAMINAR) & (w < TURBULENT), reynolds, w)
    w = (w - LAMINAR)/(TURBULENT - LAMINAR)
    share = w**2*(3 - 2*w)
    friction = 64/reynolds*(1 - share) + share/y**2
    length = np.array([pipe.length for pipe in pipes])
    gates = np.zeros(len(pipes), dtype=complex)
    for k, pipe in enumerate(pipes):
        if pipe.gate is not None:
            gates[k] = _gate(values[pipe.gate])
    return (friction*length/diameter + gates)*speed*size/(2*GRAVITY)


def _gate(opening):
    jet = 0.6*opening
    for _ in range(ROUNDS):
        jet = jet + (opening - jet - 2/np.pi*(1 - jet**2)*np.arctan(jet))/1.6
    return (1/jet - 1)**2


def _pumps(network, flows, values):
    """Less than nothing lost: minus the head won."""
    won = []
    for link, flow in zip(network.links, flows):
        if not isinstance(link, Pipe):
            slip = 0.0
            for _ in range(ROUNDS):
                load = (1 - slip)*(link.T0*(1 - slip) + link.T1*flow)
                slip = load*(slip**2 + link.sb**2)/(2*link.Tb*link.sb)
            won.append(_value(link.H0, values)*(1 - slip)**2 - link.c*flow**2)
    return -np.array(won, dtype=complex)
