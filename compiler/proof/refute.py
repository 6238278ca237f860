"""Refutations: one exact point of the operating range at which a claim certainly fails.

At a point only the share of the bracket is left to search, and what the search isolates is checked again in `exact`: signs at exact places, values that do
not exist. Between two places of certain signs the residual has a zero if interval arithmetic finds it defined and continuous
there (intermediate value theorem), so that neither a pole nor a jump is taken for one.
"""

from dataclasses import dataclass
from fractions import Fraction
from itertools import islice, product
import math
import random

import numpy as np

from rootwright.calculus.balls import ball, precision
from rootwright.proof.cancel import factors
from rootwright.proof.chart import SHARE
from rootwright.proof.crew import Crew
from rootwright.proof.exact import BITS, UNDEFINED, decimal, sign, value_at
from rootwright.proof.functions import ends
from rootwright.proof.ranges import as_ball, exact_ends
from rootwright.proof.search import judge_inside
from rootwright.proof.settle import Limit, Outcome, search_inside

SHARES = tuple(Fraction(k, 16) for k in range(17))
_EFFORT = 400               # boxes at one point
_WAVES = 250                # waves at all points together
_DIGITS = 30                # of a decimal next to an irrational end


@dataclass(frozen=True)
class Witness:
    """A point at which a claim fails, {parameter: decimal}; `reason` says how, with the values that decide."""
    point: tuple[tuple[str, str], ...]
    reason: str


class Examiner:
    """Looks at single points of a plain `Domain`; `found` maps claims to their first Witness."""

    def __init__(self, domain, limit):
        self.domain, self.model = domain, domain.model
        self.exact = exact_ends(domain.model)
        self.found = {}
        self.seen = set()
        self.limit = Limit(10 ** 9)
        self.limit.until = limit.until
        self.crew = Crew(domain.judges())

    # -- points

    def point(self, values):
        """{parameter: Fraction} near some numbers, inside the exact range: doubles as the shortest decimals that mean them, Fractions as they are.

        None where the range has no such number.
        """
        result = {}
        for name, (low, high) in self.exact.items():
            value = values[name]
            value = value if isinstance(value, Fraction) else Fraction(repr(float(value)))
            for end, inward in ((low, 1), (high, -1)):
                if not _within(value, end, inward):
                    value = end if isinstance(end, Fraction) else _decimal_inside(end, inward)
            if not (_within(value, low, 1) and _within(value, high, -1)):
                return None
            result[name] = value
        return result

    def corners(self, count=24):
        """Corners of the range, its middle, and a fixed sequence of points inside."""
        ranges = {name: [ends(as_ball(end)) for end in pair] for name, pair in self.exact.items()}
        bounds = {name: (low[0], high[1]) for name, (low, high) in ranges.items()}
        for corner in islice(product((0, 1), repeat=len(bounds)), count):
            yield {name: pair[side] for (name, pair), side in zip(bounds.items(), corner)}
        yield {name: _between(pair, 0.5) for name, pair in bounds.items()}
        yield {name: 0.5 * (pair[0] + pair[1]) for name, pair in bounds.items()}
        generator = random.Random(2)
        for _ in range(count):
            yield {name: _between(pair, generator.random()) for name, pair in bounds.items()}

    def from_boxes(self, domain, low, high, count=8):
        """Points of the operating range in boxes of a domain, whose parameters may be relative to pivots."""
        order = np.linspace(0, len(low) - 1, min(count, len(low))).astype(int) if len(low) else []
        for row in order:
            for share in (0.5, 0.0, 1.0):
                values = {name: _between((low[row, k], high[row, k]), share) for k, name in enumerate(domain.ranges.names[:-1])}
                yield self._absolute(domain, values)

    def from_turns(self, domain, outcome, count=12):
        """Points whose box holds a certain zero of the rarer sign of slope: where another zero must be."""
        for index, low, high, rise in self._rarer(outcome):
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
                yield self._absolute(domain, {name: float(value) for name, value in values.items()})

    def _rarer(self, outcome):
        counts = {sign: sum(int((rise == sign).sum()) for *_, rise in outcome.active) for sign in (1, -1)}
        rarer = min((1, -1), key=lambda sign: counts[sign])
        for index, low, high, rise in outcome.active:
            at = rise == rarer
            if at.any():
                yield index, low[at], high[at], rise[at]

    def _absolute(self, domain, values):
        bounds = {name: (ends(as_ball(low))[0], ends(as_ball(high))[1]) for name, (low, high) in self.exact.items()}
        middle = {name: _between(pair, 0.5) for name, pair in bounds.items()}
        if not domain.scaling:
            return middle | values
        pivots = domain.scaling.pivots
        best = None
        for shares in islice(product((0.5, 0.0, 1.0), repeat=len(pivots)), 243):
            at = {name: _between(bounds[name], share) for name, share in zip(pivots, shares)}
            full, out = middle | at, 0.0
            for name, value in values.items():
                for pivot, power in domain.scaling.powers.get(name, {}).items():
                    value *= at[pivot] ** float(power)
                low, high = bounds[name]
                out += max(low - value, value - high, 0.0) / max(abs(value), 1e-300)
                full[name] = min(max(value, low), high)
            if best is None or out < best[0]:
                best = out, full
        return best[1]

    # -- one point

    def examine(self, values, wanted, shares=()):
        """Look at the point near some doubles for refutations of the wanted claims. Where a residual is undefined, the rest means nothing."""
        wanted = set() if "defined" in self.found else wanted - self.found.keys()
        if "exists" in self.found:
            wanted &= {"defined"}
        point = self.point(values) if wanted and self.limit.waves < _WAVES and not self.limit.reached(np.inf) else None
        if point is None:
            return
        key = tuple(point.items())
        if key in self.seen or not self.in_range(point):
            return
        self.seen.add(key)
        if not self._bracket(point) or not self._values(point, shares):
            return
        if wanted - {"kink", "slope"}:
            self._zeros(point, wanted)

    def _refute(self, claim, point, reason):
        self.found.setdefault(claim, Witness(tuple((name, decimal(value)) for name, value in point.items()), reason))

    def at(self, chart, nodes, point, share=Fraction(0)):
        names = {name: value for name, value in point.items()} | {SHARE: share, self.model.unknown.name: UNDEFINED}
        return value_at(chart.graph.instructions, nodes, names)

    def in_range(self, point):
        chart = self.domain.lower
        values = self.at(chart, chart.requirements, point)
        return all(values[node] is True for node in chart.requirements)

    def _bracket(self, point):
        chart = self.domain.lower
        lower, upper = (form.nodes[0] for form in chart.bracket)
        width = chart.width.nodes[-1]
        values = self.at(chart, [lower, upper, width], point)
        for name, node in (("lower", lower), ("upper", upper)):
            if values[node] is UNDEFINED:
                self._refute("defined", point, f"the {name} end of the bracket has no value")
                return False
        if sign(values[width]) in (0, -1):
            self._refute("defined", point, "the bracket's lower end is not below its upper end: "
                         f"[{_digits(values[lower])}, {_digits(values[upper])}]")
            return False
        return sign(values[width]) == 1

    def _values(self, point, shares):
        """False where the residual has no value somewhere in the bracket."""
        chart = self.domain.lower
        unknown = self.model.unknown
        ends_ = (("lower", chart.at_lower, unknown.open_lower), ("upper", chart.at_upper, unknown.open_upper))
        signs = []
        for name, form, opened in ends_:
            if opened:
                signs.append(None)
                continue
            conditions = [node for _, node in form.domain or ()]
            values = self.at(chart, [*form.nodes, *conditions], point)
            broken = any(_fails(kind, values[node]) for kind, node in form.domain or ())
            if values[form.nodes[0]] is UNDEFINED or broken:
                self._refute("defined", point, f"the residual has no value at the {name} end of the bracket")
                return False
            signs.append(next((s for s in (sign(values[node]) for node in form.nodes) if s is not None), None))
        for share in (*SHARES, *shares):
            if 0 < share < 1 and self._undefined_at(chart, point, share):
                return False
        self._flat(chart, point, shares)
        if signs[0] and signs[0] == signs[1]:
            self._refute("exists", point, f"the residual is {'positive' if signs[0] > 0 else 'negative'} at both ends of the bracket")
        return True

    def _flat(self, chart, point, shares):
        """A zero at an exact place whose slope is exactly 0."""
        unknown = self.model.unknown
        nodes = [chart.residual.nodes[0], *chart.slope.nodes]
        for share in dict.fromkeys((*SHARES, *(share.limit_denominator(1000) for share in shares))):
            if share == 0 and unknown.open_lower or share == 1 and unknown.open_upper:
                continue
            values = self.at(chart, nodes[:1], point, share)
            if sign(values[nodes[0]]) == 0:
                slopes = self.at(chart, nodes[1:], point, share)
                if any(sign(slopes[node]) == 0 for node in nodes[1:]):
                    self._refute("slope", point, f"the zero at {self._place(chart, point, share)} has slope 0")

    def _undefined_at(self, chart, point, share):
        form = chart.residual
        conditions = form.domain or ()
        values = self.at(chart, [form.nodes[0], *(node for _, node in conditions)], point, share)
        if values[form.nodes[0]] is UNDEFINED or any(_fails(kind, values[node]) for kind, node in conditions):
            self._refute("defined", point, f"the residual has no value at {self._place(chart, point, share)}")
            return True
        return False

    def _place(self, chart, point, share):
        node = chart.graph.add(chart.bracket[0].nodes[0], chart.graph.mul(chart.graph.input(SHARE), chart.width.nodes[0]))
        value = self.at(chart, [node], point, share)[node]
        return f"{self.model.unknown.name} = {_digits(value)}"

    def _zeros(self, point, wanted):
        """Isolates the zeros over the bracket, and judges the claims from them."""
        chart = self.domain.lower
        opened = self.model.unknown.open_lower
        thin = [_thin(point[name]) for name in chart.variables[:-1]]
        low = np.array([[pair[0] for pair in thin] + [0.0]])
        high = np.array([[pair[1] for pair in thin] + [1.0]])
        if self.model.unknown.open_upper:
            high[0, -1] = 1.0 - 2.0 ** -20
        outcome = Outcome()
        search_inside(self.domain, 0, self.crew, self.limit, self.limit.spent + _EFFORT, outcome, ("unique",), low, high, share_only=True)
        undefined = outcome.open.get("defined", [])
        if undefined:
            places = np.concatenate([left.low[:, -1] for left in undefined] + [left.high[:, -1] for left in undefined])
            for share in sorted({Fraction(float(place)) for place in places})[:40]:
                if 0 < share < 1 and self._undefined_at(chart, point, share):
                    return
            if self._pole(chart, point, low, high, undefined):
                return
        if "exists" in wanted and self._nowhere_zero(chart, outcome, opened):
            self._refute("exists", point, "the sign changes only where the residual jumps; it is 0 nowhere in the bracket")
        zeros = self._isolated(chart, point, outcome, low, high, opened)
        if len(zeros) > 1 and self.model.unknown.root == "only":
            places = ", ".join(self._place(chart, point, (Fraction(a) + Fraction(b)) / 2).split(" = ")[1] for a, b in zeros[:3])
            self._refute("unique", point, f"{len(zeros)} zeros at least, near {self.model.unknown.name} = {places}")

    def _pole(self, chart, point, low, high, undefined):
        """A divisor that changes its sign inside the bracket, continuously, is 0 there."""
        for kind, node in chart.residual.domain or ():
            if kind != "nonzero":
                continue
            for factor in factors(chart.graph, node)[1]:
                for left in undefined:
                    for a, b in _merged(left.low[:, -1], left.high[:, -1]):
                        a, b = max(a - 1e-9 * (b - a + 1e-9), 0.0), min(b + 1e-9 * (b - a + 1e-9), 1.0)
                        signs = [sign(self.at(chart, [factor], point, Fraction(share))[factor]) for share in (a, b)]
                        if None in signs or signs[0] * signs[1] >= 0:
                            continue
                        box = low.copy(), high.copy()
                        box[0][:, -1], box[1][:, -1] = a, b
                        value = chart.evaluate([factor], *box)[factor]
                        if not np.any(value.undefined) and not np.any(value.jump):
                            self._refute("defined", point, "a divisor passes through 0 near "
                                         + self._place(chart, point, (Fraction(a) + Fraction(b)) / 2))
                            return True
        return False

    def _nowhere_zero(self, chart, outcome, opened):
        """True where no box that is left can hold a zero, whatever its sign does."""
        for _, low, high, _ in outcome.active:
            if len(low) and not chart.natural(chart.residual, low, high, opened).nonzero.all():
                return False
        return not self.model.unknown.open_upper

    def _isolated(self, chart, point, outcome, low, high, opened):
        """[(a, b)]: disjoint parts of the bracket's share, each with one certain zero inside."""
        parts = [(a, b) for _, boxes_low, boxes_high, _ in outcome.active if len(boxes_low)
                 for a, b in zip(boxes_low[:, -1], boxes_high[:, -1])]
        if not parts:
            return []
        zeros = []
        for a, b in _merged(*map(np.array, zip(*parts))):
            signs = []
            for share in (a, b):
                end = "at_lower" if share == 0.0 else "at_upper" if share == 1.0 else None
                form = getattr(chart, end) if end else chart.residual
                node = form.nodes[-1]
                signs.append(None if share == 0.0 and opened else sign(self.at(chart, [node], point, Fraction(float(share)))[node]))
            if None in signs or signs[0] * signs[1] >= 0:
                continue
            pieces = np.linspace(a, b, 17)
            box_low, box_high = np.repeat(low, 16, 0), np.repeat(high, 16, 0)
            box_low[:, -1], box_high[:, -1] = pieces[:-1], pieces[1:]
            judged = judge_inside(chart, box_low, box_high, opened)
            if not (judged.undefined.any() or judged.jump.any()):
                zeros.append((float(a), float(b)))
        return zeros


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
        place = Fraction(10) ** (math.floor(math.log10(abs(float(middle)))) - _DIGITS)
        return (middle // place + (1 if inward > 0 else 0)) * place


def _fails(kind, value):
    """True where a condition on the domain certainly does not hold."""
    if value is UNDEFINED:
        return True
    known = None if kind == "suffices" else sign(value)
    return known == 0 if kind == "nonzero" else known in (0, -1) if kind == "positive" else known == -1


def _merged(low, high):
    """Unions of touching intervals."""
    parts = []
    for a, b in sorted(zip(low.tolist(), high.tolist())):
        if parts and a <= parts[-1][1]:
            parts[-1][1] = max(parts[-1][1], b)
        else:
            parts.append([a, b])
    return [tuple(part) for part in parts]


def _thin(value):
    with precision(BITS):
        return ends(ball(value))


def _between(pair, share):
    low, high = pair
    if share in (0.0, 1.0):
        return float(high if share else low)
    value = low * (high / low) ** share if low > 0 and high / low > 50 else low + (high - low) * share
    return float(min(max(value, low), high))


def _digits(value):
    if value is UNDEFINED:
        return "no value"
    return f"{float(value):.15g}" if isinstance(value, Fraction) else f"{float(value.mid()):.15g}"
