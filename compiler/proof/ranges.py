"""The operating range as boxes of doubles, of the parameters themselves or relative to the pivots of a scaling symmetry."""

from dataclasses import dataclass
from fractions import Fraction

import flint
import numpy as np

from rootwright.calculus.balls import Balls, ball, precision
from rootwright.calculus.lower import Lowering
from rootwright.calculus.program import Graph, evaluate
from rootwright.proof.functions import ends

_BITS = 200
WIDE = 50.0            # positive ranges of a larger ratio are cut at the geometric mean


@dataclass(frozen=True)
class Ranges:
    """Ends of the range of every variable of a chart: decimals as written, rounded outward to doubles. The share of the bracket is last."""
    names: tuple[str, ...]
    low: np.ndarray
    high: np.ndarray
    logs: np.ndarray            # variables measured and cut in the logarithm

    def widths(self, low, high):
        """Shares of the range that boxes span in each variable, in the coordinate of its spread."""
        with np.errstate(all="ignore"):
            linear = (high - low) / (self.high - self.low)
            logarithmic = np.log(high / low) / np.log(self.high / self.low)
            share = np.where(self.logs, logarithmic, linear)
        return np.where(self.high > self.low, np.clip(np.where(np.isnan(share), 1.0, share), 0.0, 1.0), 1.0)

    def volume(self, low, high):
        """Shares of the range, the unknown left out."""
        return np.prod(self.widths(low, high)[:, :-1], axis=1)

    def settled(self, low, high):
        """Share of the range, and of the bracket where the boxes span it, that is left by boxes still waiting."""
        share = np.where(high[:, -1] > low[:, -1], high[:, -1] - low[:, -1], 1.0)
        return max(0.0, 1.0 - float((self.volume(low, high) * share).sum()))


def exact_ends(model):
    """{parameter: (low, high)}: Fractions where the range is rational, else balls of high precision."""
    graph = Graph()
    lowering = Lowering(graph)
    for constant in model.constants:
        lowering.declare(constant.name, graph.named(constant.name, lowering.lower(constant.expression)))
    result = {}
    for parameter in model.parameters:
        pair = []
        for end in (parameter.low, parameter.high):
            node = lowering.lower(end)
            exact = graph.rational(node)
            if exact is None:
                with precision(_BITS):
                    exact = evaluate(graph.instructions, [node], Balls(), {})[node]
            pair.append(exact)
        result[parameter.name] = tuple(pair)
    return result


def as_ball(value):
    return ball(value) if isinstance(value, (Fraction, int, float)) else value


def ranges(model, variables, scaling=None):
    """Ranges of the variables of a chart (all but the last are parameters); relative to the pivots of a scaling."""
    exact = exact_ends(model)
    spread = {parameter.name: parameter.spread for parameter in model.parameters}
    low, high, logs = [], [], []
    with precision(_BITS):
        for name in variables[:-1]:
            bottom, top = (as_ball(end) for end in exact[name])
            least = most = flint.arb(1)
            for pivot, power in (scaling.powers.get(name, {}) if scaling else {}).items():
                at = [as_ball(end) ** (-ball(power)) for end in exact[pivot]]
                at = at if power < 0 else at[::-1]
                least, most = least * at[0], most * at[1]
            first = bottom * (least if bottom >= 0 else most)
            last = top * (most if top >= 0 else least)
            low.append(ends(first)[0])
            high.append(ends(last)[1])
            logs.append(low[-1] > 0 and (spread[name] == "log" or high[-1] / low[-1] > WIDE))
    return Ranges(tuple(variables), np.array([*low, 0.0]), np.array([*high, 1.0]), np.array([*logs, False]))
