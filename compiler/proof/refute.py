"""Refutations: one exact point of the operating range at which a claim certainly fails.

At a point only the share of the bracket is left to search, and what the search isolates is checked again in `exact`: signs at exact places, values that do
not exist. Between two places of certain signs the residual has a zero if interval arithmetic finds it defined and continuous
there (intermediate value theorem), so that neither a pole nor a jump is taken for one.
"""

from fractions import Fraction

import numpy as np

from rootwright.calculus.balls import ball, precision
from rootwright.calculus.program import needed
from rootwright.proof.cancel import factors
from rootwright.proof.chart import SHARE
from rootwright.proof.crossings import arrays
from rootwright.proof.exact import BITS, UNDEFINED, sign, value_at
from rootwright.proof.functions import ends
from rootwright.proof.jumps import clears_jumps
from rootwright.proof.points import Points
from rootwright.proof.search import judge_inside, next_to
from rootwright.proof.witness import at_point, simplest

SHARES = tuple(Fraction(k, 16) for k in range(17))
_EFFORT = 600               # boxes at one point
_WAVES = 160                # waves at all points together
_REWRITTEN = 12             # points at which the residual is written anew
_PIECES = 8                 # of a part of the bracket that is cut
_FINEST = 2.0 ** -48


class Examiner:
    """Looks at single points of a plain `Domain`; `found` maps claims to their first Witness."""

    def __init__(self, domain, limit):
        self.domain, self.model = domain, domain.model
        self.points = Points(domain.model)
        self.found = {}
        self.seen, self.searched = {}, set()
        self.limit, self.waves, self.rewritten = limit, 0, 0

    def examine(self, values, wanted, shares=()):
        """Look at the point near some numbers for refutations of the wanted claims, as far as exact places of the bracket tell."""
        point = self.points.exact(values) if self._left(wanted) else None
        if point is None:
            return
        key = tuple(point.items())
        if key not in self.seen and self.in_range(point):
            self.seen[key] = self._bracket(point) and self._values(point, shares, wanted)

    def search(self, values, wanted):
        """Look for the zeros at a point that has been examined, and judge the claims from them."""
        wanted = self._left(wanted)
        point = self.points.exact(values) if wanted and self.waves < _WAVES else None
        if point is None or not self.seen.get(tuple(point.items())) or tuple(point.items()) in self.searched:
            return
        self.searched.add(tuple(point.items()))
        self._zeros(point, wanted)

    def _left(self, wanted):
        """Claims still to be refuted. Where a residual is undefined, the rest means nothing."""
        if "defined" in self.found or self.limit.late():
            return set()
        wanted = wanted - self.found.keys()
        return wanted & {"defined"} if "exists" in self.found else wanted

    def refute(self, claim, witness):
        self.found.setdefault(claim, witness)

    def at(self, chart, nodes, point, share=Fraction(0)):
        """{node: exact value} at a point and a share of the bracket."""
        names = {name: UNDEFINED for name in (self.model.unknown.name, *chart.limit_names)} | dict(point) | {SHARE: share}
        return value_at(chart.graph.instructions, nodes, names)

    def box(self, point):
        """(low, high): the thin box of a point, over the whole bracket."""
        thin = [_thin(point[name]) for name in self.domain.lower.variables[:-1]]
        return np.array([[pair[0] for pair in thin] + [0.0]]), np.array([[pair[1] for pair in thin] + [1.0]])

    def inside(self, count):
        """Points of the operating range: corners first."""
        points = map(self.points.exact, self.points.corners(count))
        return [point for point in points if point and self.in_range(point)]

    def place(self, box, share):
        """The unknown in words, at the middle of a box {parameter: (low, high)}."""
        return self._place({name: (low + high) / 2 for name, (low, high) in box.items()}, share)

    def meets_switch(self, box, share):
        """True where a switch may be met at a share of the bracket in a box."""
        low, high = arrays(self, box, (share, share))
        return any(not self.domain.lower.natural(form, low, high).definite()[0] for _, form in self.domain.lower.switches)

    def in_range(self, point):
        chart = self.domain.lower
        values = self.at(chart, chart.requirements, point)
        return all(values[node] is True for node in chart.requirements)

    # -- exact places

    def _bracket(self, point):
        chart = self.domain.lower
        lower, upper = (form.nodes[0] for form in chart.bracket)
        width = chart.width.nodes[-1]
        values = self.at(chart, [lower, upper, width], point)
        for name, node in (("lower", lower), ("upper", upper)):
            if values[node] is UNDEFINED:
                self.refute("defined", at_point(point, f"the {name} end of the bracket has no value"))
                return False
        if sign(values[width]) in (0, -1):
            self.refute("defined", at_point(point, "the bracket's lower end is not below its upper end: "
                                            f"[{_digits(values[lower])}, {_digits(values[upper])}]"))
            return False
        return sign(values[width]) == 1

    def _values(self, point, shares, wanted):
        """False where the residual has no value somewhere in the bracket."""
        unknown = self.model.unknown
        signs = []
        for share, name, opened in ((Fraction(0), "lower", unknown.open_lower), (Fraction(1), "upper", unknown.open_upper)):
            if opened:
                signs.append(self._beside(point, name) if "exists" in wanted else None)
            elif self._undefined_at(point, share):
                return False
            else:
                signs.append(self._sign_at(point, share))
        if any(0 < share < 1 and self._undefined_at(point, share) for share in (*SHARES, *shares)):
            return False
        self._exact_zeros(point, dict.fromkeys((*SHARES, *(share.limit_denominator(1000) for share in shares))))
        if signs[0] and signs[0] == signs[1]:
            places = " and ".join(f"{'next to' if opened else 'at'} the {name} end" for name, opened in
                                  (("lower", unknown.open_lower), ("upper", unknown.open_upper)))
            self.refute("exists", at_point(point, f"the residual is {'positive' if signs[0] > 0 else 'negative'} {places} of the bracket"))
        return True

    def usual_signs(self):
        """Signs at the closed ends of the bracket at the first point of the range where they differ; None where there is none."""
        for point in self.inside(16):
            if self.seen.get(tuple(point.items())):
                signs = self._sign_at(point, Fraction(0)), self._sign_at(point, Fraction(1))
                if None not in signs and signs[0] * signs[1] < 0:
                    return signs
        return None

    def changes_sign(self, point):
        """True where the residual certainly has different signs at the closed ends of the bracket at a point, or is 0 at one."""
        unknown = self.model.unknown
        signs = [self._beside(point, name) if opened else self._sign_at(point, share) for share, name, opened in
                 ((Fraction(0), "lower", unknown.open_lower), (Fraction(1), "upper", unknown.open_upper))]
        return None not in signs and signs[0] * signs[1] <= 0

    def _form(self, share):
        chart = self.domain.lower
        return chart.at_lower if share == 0 else chart.at_upper if share == 1 else chart.residual

    def _sign_at(self, point, share):
        nodes = self._form(share).nodes
        values = self.at(self.domain.lower, nodes, point, share)
        return next((known for known in (sign(values[node]) for node in nodes) if known is not None), None)

    def _beside(self, point, end):
        """Sign of the residual next to an open end; None where it is not certain."""
        chart = self.domain.upper if end == "upper" else self.domain.lower
        (rise, fall), _ = next_to(chart, *self.box(point))
        if not (rise[0] or fall[0]) and self.rewritten < _REWRITTEN:
            self.rewritten += 1
            (rise, fall), _ = next_to(chart, *self.box(point), chart.at_point(chart.residual, point))
        return 1 if rise[0] else -1 if fall[0] else None

    def _undefined_at(self, point, share):
        form = self._form(share)
        conditions = form.domain or ()
        values = self.at(self.domain.lower, [form.nodes[0], *(node for _, node in conditions)], point, share)
        if values[form.nodes[0]] is UNDEFINED or any(_fails(kind, values[node]) for kind, node in conditions):
            self.refute("defined", at_point(point, f"the residual has no value at {self._place(point, share)}"))
            return True
        return False

    def _exact_zeros(self, point, shares):
        """Those of some exact places where the residual certainly is 0; refutes slope and kink there."""
        unknown, zeros = self.model.unknown, []
        for share in shares:
            if share == 0 and unknown.open_lower or share == 1 and unknown.open_upper or self._sign_at(point, share) != 0:
                continue
            zeros.append(share)
            if self._on_switch(point, share):
                self.refute("kink", at_point(point, f"the zero at {self._place(point, share)} lies on a switch"))
                continue                # a slope means nothing there
            nodes = self.domain.lower.slope.nodes
            slopes = self.at(self.domain.lower, nodes, point, share)
            if any(sign(slopes[node]) == 0 for node in nodes):
                self.refute("slope", at_point(point, f"the zero at {self._place(point, share)} has slope 0"))
        return zeros

    def _on_switch(self, point, share):
        chart = self.domain.lower
        for guard, form in chart.switches:
            values = self.at(chart, [*form.nodes, *([] if guard is None else [guard])], point, share)
            if any(sign(values[node]) == 0 for node in form.nodes) and (guard is None or values[guard] is True):
                return True
        return False

    def _place(self, point, share):
        chart = self.domain.lower
        node = chart.graph.add(chart.bracket[0].nodes[0], chart.graph.mul(chart.graph.input(SHARE), chart.width.nodes[0]))
        return f"{self.model.unknown.name} = {_digits(self.at(chart, [node], point, share)[node])}"

    # -- zeros between

    def _zeros(self, point, wanted):
        """Isolates the zeros over the bracket, and judges the claims from them."""
        opened = self.model.unknown.open_lower
        low, high = self.box(point)
        if self.model.unknown.open_upper:
            high[0, -1] = 1.0 - 2.0 ** -20
        suspects, broken = self._scan(low, high, opened)
        parts, undefined = merged(*suspects), merged(*broken)
        for share in self._candidates(point, undefined[:12]):
            if 0 < share < 1 and self._undefined_at(point, share):
                return
        if undefined and self._pole(point, low, high, undefined):
            return
        exact = self._exact_zeros(point, self._candidates(point, parts[:12]))
        zeros = [part for part in parts if not any(part[0] <= share <= part[1] for share in exact)]
        zeros = sorted([*(part for part in zeros if self._crosses(point, part, low, high, opened)), *((share, share) for share in exact)])
        if "exists" in wanted and not zeros and not self.model.unknown.open_upper \
                and clears_jumps(self.domain.lower, suspects, parts, low, high, opened):
            self.refute("exists", at_point(point, "the sign changes only where the residual jumps; it is 0 nowhere in the bracket"))
        if len(zeros) > 1 and self.model.unknown.root == "only":
            places = ", ".join(self._place(point, (Fraction(a) + Fraction(b)) / 2).split(" = ")[1] for a, b in zeros[:3])
            self.refute("unique", at_point(point, f"{len(zeros)} zeros at least, near {self.model.unknown.name} = {places}"))
        if zeros and "kink" in wanted:
            self._parameter_switch(point)

    def _scan(self, low, high, opened):
        """Parts of the bracket's share at a point that may hold a zero, and where the residual may be undefined: two pairs (low, high) of arrays."""
        chart = self.domain.lower
        ends = np.linspace(low[0, -1], high[0, -1], 2 * _PIECES + 1)
        a, b = ends[:-1], ends[1:]
        kept, broken, looked = [], [], 0
        while len(a):
            box_low, box_high = np.repeat(low, len(a), 0), np.repeat(high, len(a), 0)
            box_low[:, -1], box_high[:, -1] = a, b
            judged = judge_inside(chart, box_low, box_high, opened)
            looked, self.waves = looked + len(a), self.waves + 1
            unsettled = judged.undefined | judged.active & (judged.jump | (judged.rise == 0))
            cut = unsettled & (b - a > _FINEST) if looked < _EFFORT else np.zeros(len(a), bool)
            kept.append((a[judged.active & ~cut], b[judged.active & ~cut]))
            broken.append((a[judged.undefined & ~cut], b[judged.undefined & ~cut]))
            steps = np.linspace(0.0, 1.0, _PIECES + 1)
            ends = a[cut, None] + (b - a)[cut, None] * steps
            ends[:, -1] = b[cut]
            a, b = ends[:, :-1].ravel(), ends[:, 1:].ravel()
        return tuple(tuple(np.concatenate(part) for part in zip(*pairs)) for pairs in (kept, broken))

    def _parameter_switch(self, point):
        """A switch on parameters alone that every zero at this point lies on."""
        chart = self.domain.lower
        share = chart.graph.input(SHARE)
        for guard, form in chart.switches:
            nodes = [*form.nodes, *([] if guard is None else [guard])]
            if share in needed(chart.graph.instructions, nodes):
                continue
            values = self.at(chart, nodes, point)
            if any(sign(values[node]) == 0 for node in form.nodes) and (guard is None or values[guard] is True):
                self.refute("kink", at_point(point, "a switch on parameters alone is met, and there is a zero"))

    def _candidates(self, point, parts):
        """Exact shares of the bracket in or next to its parts [(a, b)]: their ends, and where share or unknown are round numbers."""
        chart = self.domain.lower
        lower, width = chart.bracket[0].nodes[0], chart.width.nodes[-1]
        values = self.at(chart, [lower, width], point)
        lower, width = values[lower], values[width]
        shares = {Fraction(0), Fraction(1)}
        for a, b in parts:
            a, b = Fraction(float(a)), Fraction(float(b))
            shares |= {a, b}
            margin = Fraction(1, 2 ** 50)
            shares.add(simplest(a - margin, b + margin))
            if isinstance(lower, Fraction) and isinstance(width, Fraction):
                shares.add((simplest(lower + (a - margin) * width, lower + (b + margin) * width) - lower) / width)
        return sorted(share for share in shares if 0 <= share <= 1)

    def _pole(self, point, low, high, undefined):
        """A divisor that changes its sign inside the bracket, continuously, is 0 there."""
        chart = self.domain.lower
        for kind, node in chart.residual.domain or ():
            if kind != "nonzero":
                continue
            for factor in factors(chart.graph, node)[1]:
                for a, b in undefined:
                    a, b = max(a - 1e-9 * (b - a + 1e-9), 0.0), min(b + 1e-9 * (b - a + 1e-9), 1.0)
                    signs = [sign(self.at(chart, [factor], point, Fraction(share))[factor]) for share in (a, b)]
                    if None in signs or signs[0] * signs[1] >= 0:
                        continue
                    box = low.copy(), high.copy()
                    box[0][:, -1], box[1][:, -1] = a, b
                    value = chart.evaluate([factor], *box)[factor]
                    if not np.any(value.undefined) and not np.any(value.jump):
                        self.refute("defined", at_point(point, "a divisor passes through 0 near "
                                                        + self._place(point, (Fraction(a) + Fraction(b)) / 2)))
                        return True
        return False

    def _crosses(self, point, part, low, high, opened):
        """True where the residual certainly has a zero inside a part (a, b) of the bracket's share."""
        a, b = part
        signs = [None if share == 0.0 and opened else self._sign_at(point, Fraction(float(share))) for share in (a, b)]
        if None in signs or signs[0] * signs[1] >= 0:
            return False
        pieces = np.linspace(a, b, 17)
        box_low, box_high = np.repeat(low, 16, 0), np.repeat(high, 16, 0)
        box_low[:, -1], box_high[:, -1] = pieces[:-1], pieces[1:]
        judged = judge_inside(self.domain.lower, box_low, box_high, opened)
        return not (judged.undefined.any() or judged.jump.any())


def _fails(kind, value):
    """True where a condition on the domain certainly does not hold."""
    if value is UNDEFINED:
        return True
    known = None if kind == "suffices" else sign(value)
    return known == 0 if kind == "nonzero" else known in (0, -1) if kind == "positive" else known == -1


def merged(low, high):
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


def _digits(value):
    if value is UNDEFINED:
        return "no value"
    return f"{float(value):.15g}" if isinstance(value, Fraction) else f"{float(value.mid()):.15g}"
