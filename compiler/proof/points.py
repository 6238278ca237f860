"""Points of the operating range that are worth a look: its corners, its edges, and what the boxes left open point to."""

from fractions import Fraction
from itertools import islice, product
import math
import random

import numpy as np

from rootwright.calculus.balls import ball, precision
from rootwright.proof.exact import BITS
from rootwright.proof.functions import ends
from rootwright.proof.ranges import as_ball, exact_ends
from rootwright.proof.witness import simplest

_DIGITS = 30                # of a decimal next to an irrational end
_HALVINGS = 60


class Points:
    """Points as {parameter: double or Fraction}, near the range of a model; `exact` puts one into it."""

    def __init__(self, model):
        self.ends = exact_ends(model)
        self.bounds = {name: (ends(as_ball(low))[0], ends(as_ball(high))[1]) for name, (low, high) in self.ends.items()}

    def exact(self, values):
        """{parameter: Fraction} near some numbers, inside the exact range: doubles as the shortest decimals that mean them, Fractions as they are.

        None where the range has no such number.
        """
        result = {}
        for name, (low, high) in self.ends.items():
            value = values[name]
            value = value if isinstance(value, Fraction) else Fraction(repr(float(value)))
            for end, inward in ((low, 1), (high, -1)):
                if not _within(value, end, inward):
                    value = end if isinstance(end, Fraction) else _decimal_inside(end, inward)
            result[name] = value
        return result if self.holds(result) else None

    def holds(self, point):
        """True where {parameter: Fraction} certainly lies in the range."""
        return all(_within(point[name], low, 1) and _within(point[name], high, -1) for name, (low, high) in self.ends.items())

    def corners(self, count=24):
        """Corners of the range, its middle, and a fixed sequence of points inside."""
        bounds = self.bounds
        for corner in islice(product((0, 1), repeat=len(bounds)), count):
            yield {name: pair[side] for (name, pair), side in zip(bounds.items(), corner)}
        yield {name: _between(pair, 0.5) for name, pair in bounds.items()}
        yield {name: 0.5 * (pair[0] + pair[1]) for name, pair in bounds.items()}
        generator = random.Random(2)
        for _ in range(count):
            yield {name: _between(pair, generator.random()) for name, pair in bounds.items()}

    def from_boxes(self, domain, low, high, count=8):
        """Points in boxes of a domain, whose parameters may be relative to pivots: the roundest numbers first, of all boxes together and of some."""
        if len(low) and np.isfinite(low).all() and np.isfinite(high).all():
            ends = zip(domain.ranges.names[:-1], low.min(axis=0).tolist(), high.max(axis=0).tolist())
            yield self.absolute(domain, {name: simplest(a, b) for name, a, b in ends})
        order = np.linspace(0, len(low) - 1, min(count, len(low))).astype(int) if len(low) else []
        order = [row for row in order if np.isfinite(low[row]).all() and np.isfinite(high[row]).all()]
        for share in ("round", 0.5, 0.0, 1.0):
            for row in order:
                values = {name: simplest(a, b) if share == "round" else _between((a, b), share)
                          for name, a, b in zip(domain.ranges.names[:-1], low[row].tolist(), high[row].tolist())}
                yield self.absolute(domain, values)

    def from_turns(self, domain, outcome, count=12):
        """Points whose box holds a certain zero of the rarer sign of slope: where another zero must be."""
        for index, low, high in _rarer(outcome):
            chart, opened = domain.charts[index], domain.opened[index]
            middle_low, middle_high = low.copy(), high.copy()
            middle_low[:, :-1] = middle_high[:, :-1] = 0.5 * low[:, :-1] + 0.5 * high[:, :-1]
            signs = []
            for end in (low[:, -1], high[:, -1]):
                middle_low[:, -1] = middle_high[:, -1] = end
                values = chart.natural(chart.residual, middle_low, middle_high, opened)
                signs.append(np.where(values.low > 0, 1, np.where(values.high < 0, -1, 0)))
            for row in np.nonzero(signs[0] * signs[1] < 0)[0][:count]:
                values = dict(zip(domain.ranges.names[:-1], middle_low[row, :-1]))
                yield self.absolute(domain, {name: float(value) for name, value in values.items()})

    def edges(self, points, in_range, count=40):
        """Points just inside the requirements, on the way from a point that meets them to one that does not."""
        inside, beyond = [], []
        for values in points:
            point = self.exact(values)
            if point:
                (inside if in_range(point) else beyond).append(point)
        if not inside:
            return
        for k, far in enumerate(beyond[:count]):
            near = inside[k % len(inside)]
            for _ in range(_HALVINGS):
                middle = self.exact({name: float((near[name] + far[name]) / 2) for name in near})
                if middle is None or middle in (near, far):
                    break
                near, far = (middle, far) if in_range(middle) else (near, middle)
            yield near

    def absolute(self, domain, values):
        """A point of the range for values of the variables of a domain, which may be relative to pivots."""
        bounds = self.bounds
        middle = {name: _between(pair, 0.5) for name, pair in bounds.items()}
        if not domain.scaling:
            return middle | values
        pivots = domain.scaling.pivots
        best = None
        for shares in islice(product((0.5, 0.0, 1.0), repeat=len(pivots)), 243):
            at = {name: _between(bounds[name], share) for name, share in zip(pivots, shares)}
            full, out = middle | at, 0.0
            for name, value in values.items():
                value = float(value)
                for pivot, power in domain.scaling.powers.get(name, {}).items():
                    value *= at[pivot] ** float(power)
                low, high = bounds[name]
                out += max(low - value, value - high, 0.0) / max(abs(value), 1e-300)
                full[name] = min(max(value, low), high)
            if best is None or out < best[0]:
                best = out, full
        return best[1]


def _rarer(outcome):
    counts = {sign: sum(int((rise == sign).sum()) for *_, rise in outcome.active) for sign in (1, -1)}
    rarer = min((1, -1), key=lambda sign: counts[sign])
    for index, low, high, rise in outcome.active:
        at = rise == rarer
        if at.any():
            yield index, low[at], high[at]


def _within(value, end, inward):
    """True where a Fraction certainly lies on the inner side of an end of a range, or on it."""
    if isinstance(end, Fraction):
        return (value - end) * inward >= 0
    with precision(BITS):
        return bool((ball(value) - end) * inward > 0)


def _decimal_inside(end, inward):
    """The last decimal of some digits on the inner side of an irrational end."""
    with precision(BITS):
        exact = end.mid().fmpq()
        middle = Fraction(int(exact.p), int(exact.q))
        if not middle:
            return middle
        place = Fraction(10) ** (math.floor(math.log10(abs(float(middle)))) - _DIGITS)
        return (middle // place + (1 if inward > 0 else 0)) * place


def _between(pair, share):
    low, high = pair
    if share in (0.0, 1.0):
        return float(high if share else low)
    value = low * (high / low) ** share if low > 0 and high / low > 50 else low + (high - low) * share
    return float(min(max(value, low), high))
