"""The short way of runtime/approach, walked from many points of the operating range at once."""

import math

import numpy as np

from rootwright.calculus.doubles import Doubles
from rootwright.calculus.program import evaluate, interpret, needed
from rootwright.calculus.sampling import sample
from rootwright.plan.arrays import Arrays
from rootwright.plan.plan import TRIALS

POINTS = 160
MOST_STEPS = 4


class Range:
    """Points of the operating range with their brackets and roots: arrays, one entry a point.

    The graph holds the closure's program and may have grown. `inputs` maps parameters to arrays, `lower`, `upper` and `root` belong to the unknown. Points at which no change of
    sign was found between the ends are left out.
    """

    def __init__(self, closure, graph):
        self.closure, self.program, self.instructions = closure, closure.program, graph.instructions
        unknown = closure.model.unknown
        self.unknown = unknown.name
        points = [point for point in sample(closure, 2 * POINTS)
                  if not interpret(self.program, Doubles(), point, ["outside"])["outside"]][:POINTS]
        self.inputs = {p.name: np.array([point[p.name] for point in points], float) for p in closure.model.parameters}
        self.size = len(points)
        inputs = {closure.program.instructions[node].value: node for node in range(len(self.program.instructions))
                  if self.program.instructions[node].op == "input"}
        self.moving = depend_on(self.instructions, {inputs.get(self.unknown), inputs.get("error_bound")})
        self.lower, self.upper = self.column("lower"), self.column("upper")
        self._settle(self._roots(unknown))

    def column(self, result):
        """A result that does not depend on the unknown, at the points."""
        with np.errstate(all="ignore"):
            values = evaluate(self.program.instructions, [self.program.results[result]], Arrays(), self.inputs)
        return np.broadcast_to(values[self.program.results[result]], (self.size,)).astype(float)

    def at(self, nodes, x):
        """Values of the nodes at the points with the unknown x, as arrays."""
        with np.errstate(all="ignore"):
            values = evaluate(self.instructions, nodes, Arrays(), self.inputs | {self.unknown: x}, dict(self.still))
        return [np.broadcast_to(values[node], (self.size,)) for node in nodes]

    @property
    def still(self):
        """Values that do not depend on the unknown."""
        if "_still" not in self.__dict__:
            names = ("g", "slope", "rounding", "slope_rounding", "curvature")
            nodes = needed(self.program.instructions, [self.program.results[name] for name in names])
            with np.errstate(all="ignore"):
                self._still = evaluate(self.program.instructions, [node for node in nodes if node not in self.moving],
                                       Arrays(), self.inputs)
        return self._still

    def _roots(self, unknown):
        """Halves the bracket until it is as narrow as doubles are; NaN where the signs at the ends do not differ."""
        g = [self.program.results["g"]]
        low, high = self.lower.copy(), self.upper.copy()
        if self.size == 0:
            return low
        inward = 2.0 ** -40 * (high - low)
        first = self.at(g, low + inward * unknown.open_lower)[0]
        last = self.at(g, high - inward * unknown.open_upper)[0]
        rising = last > 0.0
        change = ((first < 0.0) & (last > 0.0)) | ((first > 0.0) & (last < 0.0))
        for _ in range(56):
            middle = low + 0.5 * (high - low)
            above = (self.at(g, middle)[0] > 0.0) == rising
            low, high = np.where(above, low, middle), np.where(above, middle, high)
        return np.where(change, low, np.nan)

    def _settle(self, root):
        keep = np.isfinite(root)
        self.inputs = {name: column[keep] for name, column in self.inputs.items()}
        self.lower, self.upper, self.root = self.lower[keep], self.upper[keep], root[keep]
        self.size = int(keep.sum())
        self.__dict__.pop("_still", None)

    def walk(self, x, method, curve):
        """Points that the short way comes to from the starts x: at once, after one step, after two, ... As in runtime/approach.

        curve: nodes of the residual, the slope and, as far as the method takes them, the second and third derivative.
        """
        x = self._inside(0.5 * self.lower + 0.5 * self.upper, x)
        yield x
        for _ in range(MOST_STEPS):
            g, slope, *higher = self.at(curve, x)
            with np.errstate(all="ignore"):
                if method == "newton":
                    step = g / slope
                else:
                    product, square = g * higher[0], slope * slope
                    step = 2.0 * g * slope / (2.0 * square - product) if method == "halley" else \
                        g * (6.0 * square - 3.0 * product) / (6.0 * slope * (square - product) + g * g * higher[1])
                x = self._inside(x, x - step)
            yield x

    def _inside(self, last, following):
        with np.errstate(all="ignore"):
            return np.where(following > self.lower, np.where(following < self.upper, following, 0.5 * last + 0.5 * self.upper),
                            0.5 * last + 0.5 * self.lower)

    def certificates(self, x, tried):
        """How many certificates each point takes from x on, 1 to TRIALS; infinite where it is left to the plain solver.

        tried: nodes of the residual as written, its slope, the bounds of their rounding errors and the curvature.
        """
        spent = np.full(self.size, np.inf)
        waiting = np.ones(self.size, bool)
        for k in range(TRIALS):
            g, slope, bound, slope_rounding, curvature = self.at(tried, x)
            with np.errstate(all="ignore"):
                least = np.abs(slope) - slope_rounding
                error = (np.abs(g) + bound) / least
                zero = waiting & (np.abs(g) <= bound + np.abs(slope) * (2.0**-53 * np.abs(x)))
                good = (least > 0.0) & (error > 0.0) & (np.abs(curvature) * error / least <= 0.25)
                good &= (self.lower < x - 2.0 * error) & (x + 2.0 * error < self.upper)
                spent[zero & good] = k + 1.0
                waiting &= ~zero
                x = np.where(waiting, self._inside(x, x - g / slope), x)
            if not waiting.any():
                break
        return spent


def depend_on(instructions, sources):
    """The sources and every instruction that depends on one of them."""
    moving = set(sources)
    for node, instruction in enumerate(instructions):
        if any(arg in moving for arg in instruction.args):
            moving.add(node)
    return moving


def effort(instructions, roots, known=()):
    """Cost of evaluating the roots, in sums: a rough measure of what processors and maths libraries take."""
    total = 0.0
    for node in needed(instructions, roots, known):
        total += _EFFORT.get(instructions[node].op, 16.0)
    return total


_EFFORT = {"number": 0.0, "input": 0.0, "named": 0.0, "pi": 0.0, "nan": 0.0, "add": 1.0, "sub": 1.0, "mul": 1.0, "neg": 0.5,
           "abs": 0.5, "div": 4.0, "sqrt": 5.0, "where": 2.0, "min": 2.0, "max": 2.0, "sign": 2.0, "lt": 1.0, "le": 1.0,
           "gt": 1.0, "ge": 1.0, "and": 1.0, "or": 1.0, "not": 1.0, "ordered": 1.0, "pow": 40.0, "sin": 24.0, "cos": 24.0,
           "tan": 40.0, "erf": 30.0, "erfc": 40.0, "log10": 24.0, "sinh": 40.0, "cosh": 30.0, "tanh": 40.0}


def mean(values):
    return math.fsum(values) / len(values)
