"""Derivatives of the misfit in several ways: closed-form adjoints, two kinds of differences, two of operation tapes."""

from dataclasses import dataclass

from rootwright.demo.laws import compile_closures
from rootwright.demo.network import solve
from rootwright.demo.tape import Tape, follow
from rootwright.plan.plan import PLAIN


@dataclass
class Work:
    """What a way has spent so far."""
    gradients: int = 0
    network_solves: int = 0
    closure_solves: int = 0
    operations: int = 0         # recorded on a tape
    most_bytes: int = 0         # of the longest tape


def adjoint_flow(survey, state, read):
    """For each link, what one metre lost there more would change the misfit by: one adjoint solve of the network."""
    network = survey.network
    by_head, by_flow = [0.0]*len(network.junctions), [0.0]*len(network.links)
    for (kind, k), sensor, deviation in zip(network.places, network.sensors, survey.deviations(state, read)):
        (by_head if kind == "head" else by_flow)[k] += deviation/sensor.error
    through = [1.0/fall.slope for fall in state.falls]
    pulled = network.gather([g*weight for g, weight in zip(through, by_flow)])
    potential = network.spread(through, [a - b for a, b in zip(by_head, pulled)])
    return [g*(difference - weight) for g, weight, difference in zip(through, by_flow, network.differences(potential))]


def tangent_readings(survey, state, closures, unknown):
    """Derivatives of the readings by one unknown: the closures' tangents, then one linear solve of the network."""
    network = survey.network
    through = [1.0/fall.slope for fall in state.falls]
    lost = [0.0]*len(network.links)
    for k, fall in enumerate(state.falls):
        for use in fall.uses:
            if use.unknown == unknown:
                closure = getattr(closures, use.closure)
                p_dot = [0.0]*len(use.p)
                p_dot[use.argument] = use.chain
                lost[k] -= use.weight*closure.tangent(use.p, use.root, p_dot)[use.result]
    rise = network.spread(through, network.gather([g*r for g, r in zip(through, lost)]))
    flows = [g*(r + d) for g, r, d in zip(through, lost, network.differences(rise))]
    return [rise[k] if kind == "head" else flows[k] for kind, k in network.places]


class Adjoints:
    """Closed form: one linear adjoint solve of the network a case, carried on by each closure's adjoint."""

    def __init__(self, survey, closures):
        self.survey, self.closures, self.work = survey, closures, Work()

    def __call__(self, z, states):
        self.work.gradients += 1
        gradient = [0.0]*len(z)
        for state, read in zip(states, self.survey.readings):
            for weight, fall in zip(adjoint_flow(self.survey, state, read), state.falls):
                for use in fall.uses:
                    if use.unknown is not None:
                        gradient[use.unknown] += self.carry(use, weight*use.weight)*use.chain
        return [value*chain for value, chain in zip(gradient, self.survey.chain(z))]

    def carry(self, use, weight):
        """What the closure's parameter in question changes the misfit by, given what its result does."""
        closure = getattr(self.closures, use.closure)
        y_bar = [0.0]*closure.M
        y_bar[use.result] = weight
        return closure.adjoint(use.p, use.root, y_bar, [0.0]*len(use.p))[use.argument]


class LoopDifferences(Adjoints):
    """As Adjoints, but each closure is solved twice more, with its parameter a little larger and a little smaller."""

    def __init__(self, survey, closures, step):
        super().__init__(survey, closures)
        self.step = step

    def carry(self, use, weight):
        closure = getattr(self.closures, use.closure)
        value = use.p[use.argument]
        result = []
        for factor in (1.0 + self.step, 1.0 - self.step):
            p = list(use.p)
            p[use.argument] = value*factor
            result.append(closure.solve(p).y[use.result])
        self.work.closure_solves += 2
        return weight*(result[0] - result[1])/(2.0*self.step*value)


class LoopTape(Adjoints):
    """As Adjoints, but each closure is solved once more (from its root on, if `warm`) on a tape that follows its loop.

    Each closure has the tape for itself, which starts anew.
    """

    def __init__(self, survey, closures, warm=False):
        super().__init__(survey, closures)
        self.tape, self.warm = Tape(), warm

    def carry(self, use, weight):
        self.tape.clear()
        p = list(use.p)
        p[use.argument] = number = self.tape.number(p[use.argument])
        start = (use.root,) if self.warm else ()
        point = getattr(self.closures, use.closure).solve(p, *start)
        self.work.closure_solves += 1
        self.work.operations += len(self.tape)
        self.work.most_bytes = max(self.work.most_bytes, self.tape.size)
        return weight*self.tape.gradient(point.y[use.result], [number])[0]


class WholeTape:
    """One tape a case that follows it all: Newton's steps of the network and, in each, the loops of all closures."""

    def __init__(self, survey, closures):
        self.survey, self.closures, self.work = survey, closures, Work()

    def __call__(self, z, states):
        survey, work = self.survey, self.work
        work.gradients += 1
        total = [0.0]*len(z)
        for case, read in zip(survey.cases, survey.readings):
            tape = Tape()
            numbers = [tape.number(value) for value in survey.values(z)]
            state = solve(survey.network, case, numbers, self.closures)
            misfit = sum(0.5*d*d for d in survey.deviations(state, read))
            total = [a + b for a, b in zip(total, tape.gradient(misfit, numbers))]
            work.network_solves += 1
            work.closure_solves += state.solves
            work.operations += len(tape)
            work.most_bytes = max(work.most_bytes, tape.size)
        return [value*chain for value, chain in zip(total, survey.chain(z))]


class Differences:
    """Quotients of misfits at neighbouring points, each network started from the state at z."""

    def __init__(self, survey, closures, step, central):
        self.survey, self.closures, self.step, self.central, self.work = survey, closures, step, central, Work()

    def __call__(self, z, states):
        self.work.gradients += 1
        here = None if self.central else self.survey.misfit(states)
        gradient = []
        for k in range(len(z)):
            above = self._misfit(z, k, self.step, states)
            if self.central:
                gradient.append((above - self._misfit(z, k, -self.step, states))/(2.0*self.step))
            else:
                gradient.append((above - here)/self.step)
        return gradient

    def _misfit(self, z, k, step, starts):
        moved = [value + (step if k == j else 0.0) for j, value in enumerate(z)]
        states = self.survey.solve(moved, self.closures, starts)
        self.work.network_solves += len(states)
        self.work.closure_solves += sum(state.solves for state in states)
        return self.survey.misfit(states)


def taped_closures():
    """Emitted Python modules of their own, with the safeguarded solver alone, made to carry taped numbers."""
    closures = compile_closures("python", PLAIN)
    for name in ("friction", "gate", "pump"):
        follow(getattr(closures, name))
    return closures
