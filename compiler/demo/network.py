"""A network of mains as data, and its state: flows and heads by Newton's method on the loops and nodes at once.

Lengths, heads and diameters are in m, flows in m^3/s. Every function works on plain floats and, where nothing says
otherwise, on any numbers that behave like them.
"""

import math
from dataclasses import dataclass, field
from functools import cached_property

from rootwright.demo.laws import ClosureFailed, Pipe, evaluate

MOST_STEPS = 40
SMALL_STEP = 1.0e-11    # m or m^3/s; the step after one as small is far below the last digit of a head
HEAD_FOR_FLOW = 1.0e3   # m per m^3/s: weighs the errors of junctions against those of links
ROUNDING = 1.0e-9       # errors below this are not compared
SHARES = tuple(0.5**k for k in range(11))      # of Newton's step, tried in turn


class NotSolved(ArithmeticError):
    """The network's equations were not solved; the message says for which case and why."""


@dataclass(frozen=True, slots=True)
class Junction:
    name: str
    elevation: float
    demand: float               # on an average day


@dataclass(frozen=True, slots=True)
class Sensor:
    kind: str                   # "head" at a junction or "flow" in a link
    name: str
    error: float                # standard deviation of its readings


@dataclass(frozen=True, slots=True)
class Case:
    """One hour of operation."""
    name: str
    demand: float               # over that of an average day
    levels: dict                # source -> level
    hydrants: dict              # junction -> flow drawn


@dataclass(slots=True)
class State:
    """Flows in the links, heads at the junctions, and each link's Fall, at which the equations hold."""
    flows: list
    heads: list
    falls: list
    steps: int = 0
    solves: int = 0             # of closures
    history: list = field(default_factory=list)     # per step: worst error of a link and of a junction, largest change


@dataclass(frozen=True)
class Network:
    junctions: tuple
    sources: tuple              # names of the places of fixed level
    links: tuple                # pipes, then pumps
    sensors: tuple

    @property
    def pipes(self):
        return [link for link in self.links if isinstance(link, Pipe)]

    @property
    def loops(self):
        return len(self.links) - len(self.junctions) - len(self.sources) + 1

    @cached_property
    def number(self):
        """Junction -> its number."""
        return {junction.name: k for k, junction in enumerate(self.junctions)}

    @cached_property
    def ends(self):
        """For each link the numbers of the junctions at its start and end, None for a source."""
        return [(self.number.get(link.start), self.number.get(link.end)) for link in self.links]

    @cached_property
    def order(self):
        return _elimination_order(len(self.junctions), self.ends)

    @cached_property
    def places(self):
        """For each sensor its kind and the number of its junction or link."""
        links = {link.name: k for k, link in enumerate(self.links)}
        number = {"head": self.number, "flow": links}
        return [(sensor.kind, number[sensor.kind][sensor.name]) for sensor in self.sensors]

    def readings(self, state):
        """What the sensors would read without error."""
        return [state.heads[k] if kind == "head" else state.flows[k] for kind, k in self.places]

    def demands(self, case):
        return [junction.demand*case.demand + case.hydrants.get(junction.name, 0.0) for junction in self.junctions]

    def differences(self, heads, levels=None):
        """For each link the head at its start less that at its end; without levels the sources count as 0."""
        def head(node, name):
            return heads[node] if node is not None else levels[name] if levels else 0.0
        return [head(a, link.start) - head(b, link.end) for (a, b), link in zip(self.ends, self.links)]

    def spread(self, through, given):
        """Values x at the junctions, 0 at sources, for which through*(x here - x there) sums to `given` at each.

        The matrix is symmetric, so the network's adjoint is this function too.
        """
        matrix = [{} for _ in self.junctions]
        for (a, b), conductance in zip(self.ends, through):
            for here, there in ((a, b), (b, a)):
                if here is not None:
                    matrix[here][here] = matrix[here].get(here, 0.0) + conductance
                    if there is not None:
                        matrix[here][there] = matrix[here].get(there, 0.0) - conductance
        return _eliminate(matrix, list(given), self.order)

    def gather(self, values):
        """At each junction the sum of a link's values that enter it less those that leave."""
        total = [0.0]*len(self.junctions)
        for (a, b), value in zip(self.ends, values):
            if a is not None:
                total[a] = total[a] - value
            if b is not None:
                total[b] = total[b] + value
        return total


def solve(network, case, unknowns, closures, start=None):
    """State of the network at the values of the unknowns, from a rough guess or from a neighbouring state.

    Newton's method on the equations of all links (head lost = head difference) and junctions (inflow = demand); the
    flows are eliminated by hand, which leaves a symmetric sparse system in the heads (Todini, E. and Pilati, S. (1988),
    A gradient algorithm for the analysis of pipe networks). Raises NotSolved.
    """
    demands = network.demands(case)
    state = State([], [], [])

    def look(flows, heads):
        """Falls of the links, errors of the links and of the junctions."""
        falls = [evaluate(link, flow, unknowns, closures) for link, flow in zip(network.links, flows)]
        state.solves += sum(len(fall.uses) for fall in falls)
        lost = [drop - fall.loss for drop, fall in zip(network.differences(heads, case.levels), falls)]
        return falls, lost, [inflow - demand for inflow, demand in zip(network.gather(flows), demands)]

    flows = start.flows if start else [_guess(link, unknowns) for link in network.links]
    heads = start.heads if start else [max(case.levels.values())]*len(network.junctions)
    try:
        falls, lost, missing = look(flows, heads)
    except ClosureFailed as failure:
        raise NotSolved(f"{case.name}: {failure}") from None
    for state.steps in range(1, MOST_STEPS + 1):
        through = [1.0/fall.slope for fall in falls]
        pulled = network.gather([g*r for g, r in zip(through, lost)])
        rise = network.spread(through, [a + b for a, b in zip(missing, pulled)])
        change = [g*(r + d) for g, r, d in zip(through, lost, network.differences(rise))]
        largest = max(_worst(rise), _worst(change))
        state.history.append((_worst(lost), _worst(missing), largest))
        if largest <= SMALL_STEP:
            state.flows, state.heads, state.falls = _moved(flows, 1.0, change), _moved(heads, 1.0, rise), falls
            return state
        error = _error(lost, missing)
        for share in SHARES:        # halved where it makes the error larger, or leads where a pump would stall
            trial = _moved(flows, share, change), _moved(heads, share, rise)
            try:
                falls, lost, missing = look(*trial)
            except ClosureFailed as failure:
                reason = str(failure)
                continue
            if _error(lost, missing) < max(error, ROUNDING):
                break
            reason = "no step makes the error smaller"
        else:
            raise NotSolved(f"{case.name}: {reason}")
        flows, heads = trial
    raise NotSolved(f"{case.name}: not solved in {MOST_STEPS} steps")


def _error(lost, missing):
    return _worst(lost) + HEAD_FOR_FLOW*_worst(missing)


def _moved(values, share, change):
    return [value + share*step for value, step in zip(values, change)]


def _worst(values):
    return max(abs(float(value)) for value in values)


def _guess(link, unknowns):
    """Half a metre a second in pipes; in pumps the flow that takes a sixth of the head at no flow."""
    if isinstance(link, Pipe):
        return 0.125*math.pi*link.diameter**2
    H0 = unknowns[link.H0] if isinstance(link.H0, int) else link.H0
    return math.sqrt(float(H0)/(6.0*link.c))


def _elimination_order(count, ends):
    """Junctions with, for each, those it is still tied to when its turn comes: fewest ties first."""
    ties = [set() for _ in range(count)]
    for a, b in ends:
        if a is not None and b is not None:
            ties[a].add(b)
            ties[b].add(a)
    left, order = set(range(count)), []
    while left:
        node = min(left, key=lambda k: (len(ties[k]), k))
        near = sorted(ties[node])
        for k in near:
            ties[k] |= ties[node]
            ties[k] -= {k, node}
        left.remove(node)
        order.append((node, near))
    return order


def _eliminate(matrix, given, order):
    """Solution of the symmetric system with the rows {column: entry}; both arguments are used up."""
    for node, near in order:
        row = matrix[node]
        for k in near:
            factor = row[k]/row[node]
            target = matrix[k]
            for j in near:
                if j in row:
                    target[j] = target.get(j, 0.0) - factor*row[j]
            given[k] = given[k] - factor*given[node]
    for node, near in reversed(order):
        row = matrix[node]
        total = given[node]
        for k in near:
            total = total - row[k]*given[k]
        given[node] = total/row[node]
    return given
