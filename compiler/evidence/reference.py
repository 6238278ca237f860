"""Certified roots and derivatives, independent of what the compiler emits.

A root is enclosed by two points at which balls of growing precision give the residual certain, opposite signs, and
which lie within 2^-200 of each other relative to the root. Derivatives are central differences of roots solved again at
parameters moved by 2^-100 of their size, so truncation stays near 2^-200 and cancellation is covered by the working
precision; no symbolic derivative is used anywhere.
"""

from dataclasses import dataclass

import flint

from rootwright.calculus.balls import ball, precision
from rootwright.evidence.trees import Place, Trees

BITS = (160, 320, 640, 1280)    # precisions tried for a sign
CLOSE = -200                    # a root is enclosed within 2^CLOSE of its size
STEP = -100                     # derivatives: shift of a parameter, 2^STEP of its size
FINE = 448                      # bits for derivatives
KINK = 1e-12                    # one-sided derivatives further apart than this share are those of a kink


class NotSettled(Exception):
    """No root could be certified; the message says why."""


@dataclass(frozen=True)
class Root:
    """The exact root lies within `radius` of `mid` (exact balls). `kind`: "crossing" (a certain change of sign in the
    bracket), "beyond" (one outside the bracket's end, within the distance asked for), "exact" (the residual is exactly
    zero) or "touching" (zero to 2^-1000 of its terms at an end, with no change of sign)."""
    mid: flint.arb
    radius: flint.arb
    kind: str

    def distance(self, x):
        """Distance of a double from the root, as a float; 0 within the radius, where the double may be the root."""
        with precision(320):
            return max(float((abs(self.mid - ball(x)) - self.radius).mid()), 0.0)


@dataclass(frozen=True)
class Derivative:
    """value: the derivative, or None; why: the reason that there is none: "kink", "undefined", "unbounded"."""
    value: float | None
    why: str = ""


class Reference:
    """The reference for one Model."""

    def __init__(self, model):
        self.model = model
        self.trees = Trees(model)

    def root(self, point, near=None, reach=0.0):
        """The root at a point {parameter: double}. Raises NotSettled.

        `near` is where to look first; a root as far as `reach` from it also counts where it lies outside the bracket.
        """
        return _Search(self.trees, self.place(point), near, reach).root()

    def place(self, point):
        """The author's expressions at a point {parameter: double}."""
        return Place(self.trees, {name: ball(value) for name, value in point.items()})

    def derivatives(self, point, x):
        """{(result, parameter): Derivative} for the parameters that are differentiated, at x, an exact ball.

        x is the root; or any number near it: then the root of the residual less its value at x is differentiated.
        """
        return Differences(self, point, x).all()


def sign(value):
    """-1, 0 (exactly zero) or 1; None where the ball does not tell."""
    return 1 if value > 0 else -1 if value < 0 else 0 if value.is_zero() else None


class _Search:
    def __init__(self, trees, place, near, reach):
        self.trees, self.place = trees, place
        self.near, self.reach = None if near is None else ball(near), reach

    def sign(self, x):
        """Certain sign of the residual at an exact number; None where it is undefined, or zero to 1280 bits."""
        for bits in BITS:
            found = sign(self.place.residual(x, bits))
            if found is not None:
                return found
        return None

    def root(self):
        with precision(BITS[-1]):
            a, b = (self.place.value(end, None, BITS[-1]) for end in self.trees.ends)
            if not (a.is_finite() and b.is_finite()):
                raise NotSettled("a bracket end is not finite")
            if a > b:
                raise NotSettled("the bracket is reversed")
            a, b = a.mid(), b.mid()
            unknown = self.trees.model.unknown
            a, sign_a = self._enter(a, b, unknown.open_lower)
            b, sign_b = self._enter(b, a, unknown.open_upper)
            for end, at_end in ((a, sign_a), (b, sign_b)):
                if not at_end and self._chosen(end, a, b):
                    return self._at_end(end, at_end)
            if self.near is not None and a <= self.near <= b and self.place.residual(self.near, BITS[0]).is_zero():
                return Root(self.near, flint.arb(0), "exact")
            if sign_a and sign_b and sign_a != sign_b:
                return self._narrow(a, b, sign_a, *self._nearby(a, b, sign_a))
            return self._beyond()

    def _enter(self, end, far, is_open):
        """An end and its sign there; next to it where it is open or the residual is undefined at it."""
        if not is_open:
            found = self.sign(end)
            if found is not None or self.place.residual(end, BITS[-1]).is_finite():
                return end, found
        for k in (400, 200, 100, 50):
            x = end + (far - end) * flint.arb(2) ** -k
            found = self.sign(x)
            if found is not None:
                return x, found
        raise NotSettled("the residual is undefined at an end of the bracket and next to it")

    def _chosen(self, end, a, b):
        """Whether a zero at an end is the root meant: it is, unless the number to be checked lies elsewhere."""
        return self.near is None or abs(self.near - end) <= max(flint.arb(self.reach), abs(end) * flint.arb(2) ** -40)

    def _at_end(self, end, at_end):
        """A root at an end, where the residual is exactly zero or has no certain sign."""
        if at_end == 0:
            return Root(end, flint.arb(0), "exact")
        radius = self._radius(end)
        below, above = self.sign(end - radius), self.sign(end + radius)
        if below and above and below != above:
            return Root(end, radius, "crossing")
        return Root(end, radius, "touching")

    def _radius(self, x):
        return (abs(x) if not x.is_zero() else flint.arb(1)) * flint.arb(2) ** CLOSE

    def _nearby(self, a, b, sign_a):
        """A part of the bracket around `near` with its change of sign; the bracket if there is none."""
        if self.near is not None:
            size = b - a if self.near.is_zero() else abs(self.near)
            for k in (-50, -44, -36, -24, -10):
                low, high = self.near - size * flint.arb(2) ** k, self.near + size * flint.arb(2) ** k
                low, high = (low if low > a else a), (high if high < b else b)
                if low < high and (low <= a or self.sign(low) == sign_a) and (high >= b or self.sign(high) == -sign_a):
                    return low, high
        return a, b

    def _narrow(self, lower, upper, sign_a, a, b):
        """Bisection to 40 bits, then secants of growing precision, certified by signs on both sides."""
        for _ in range(6000):
            if self._is_narrow(a, b, -40):
                root = self._polish(a, b, sign_a)
                if root is not None:
                    return root
            if self._is_narrow(a, b, CLOSE):
                break
            x = self._middle(a, b)
            found = self.sign(x)
            if found is None:       # a zero to 1280 bits, or a hole
                x, found = self._beside(a, b, x)
            if found == 0:
                return Root(x, flint.arb(0), "exact")
            a, b = (x, b) if found == sign_a else (a, x)
        self._refuse_jump(a, b, lower, upper)
        middle = (a + b) / 2
        return Root(middle.mid(), (b - a).mid(), "crossing")

    @staticmethod
    def _is_narrow(a, b, k):
        return b - a <= min(abs(a), abs(b)) * flint.arb(2) ** k

    @staticmethod
    def _middle(a, b):
        """The arithmetic middle; the geometric one where the ends differ in size, and 0 where they differ in sign."""
        if a < 0 and b > 0:
            return flint.arb(0)
        small, large = min(abs(a), abs(b)), max(abs(a), abs(b))
        if small.is_zero():
            small = large * flint.arb(2) ** -2300
        if 4 * small < large:
            return (small.sqrt() * large.sqrt() * (1 if b > 0 else -1)).mid()
        return ((a + b) / 2).mid()

    def _beside(self, a, b, x):
        for share in (0.375, 0.625, 0.25, 0.75, 0.0625, 0.9375, 2.0 ** -60, 1.0 - 2.0 ** -50):
            beside = (a + (b - a) * ball(share)).mid()
            found = self.sign(beside)
            if found is not None:
                return beside, found
        raise NotSettled("the residual is undefined in the bracket, or zero in a whole part of it")

    def _polish(self, a, b, sign_a):
        bits = BITS[1]
        with precision(bits):
            x, y = a, b
            gx, gy = (self.place.residual(v, bits).mid() for v in (x, y))
            height = min(abs(gx), abs(gy)) / 2
            for _ in range(12):
                if gy == gx:
                    return None
                x, y, gx = y, (y - gy * (y - x) / (gy - gx)).mid(), gy
                if not (y.is_finite() and a <= y <= b):
                    return None
                if abs(y - x) <= self._radius(y) / 16:
                    break
                value = self.place.residual(y, bits)
                if value.is_zero():
                    return Root(y, flint.arb(0), "exact")
                gy = value.mid()
            if not abs(gy) < height:        # a step or a pole
                return None
            radius = self._radius(y)
        with precision(BITS[-1]):
            below, above = self.sign(y - radius), self.sign(y + radius)
        return Root(y, radius, "crossing") if below == sign_a and above == -sign_a else None

    def _refuse_jump(self, a, b, lower, upper):
        """A root's residual falls as the ends close in; at a step or a pole it does not."""
        width = (b - a) * flint.arb(2) ** 100
        for end, far in ((a, max(lower, a - width)), (b, min(upper, b + width))):
            near, further = (abs(self.place.residual(x.mid(), BITS[-1])) for x in (end, far))
            if far != end and not near < further * 0.9:
                raise NotSettled("the sign changes across a step or a pole")

    def _beyond(self):
        """No change of sign in the bracket: one around `near`, within `reach` of it."""
        if self.near is not None and self.reach > 0.0:
            reach = ball(self.reach)
            low, high = self.near - reach, self.near + reach
            sign_low, sign_high = self.sign(low), self.sign(high)
            if sign_low and sign_high and sign_low != sign_high:
                found = self._narrow(low, high, sign_low, low, high)
                return Root(found.mid, found.radius, "beyond")
        raise NotSettled("the residual has one sign at both ends of the bracket")


class Differences:
    """Derivatives of the results near one root by differences of roots solved again."""

    def __init__(self, reference, point, x):
        self.model, self.trees = reference.model, reference.trees
        self.point, self.x = point, x

    def all(self):
        with precision(FINE):
            center = self._center()
            found = {}
            for parameter in self.model.parameters:
                if parameter.differentiate:
                    column = self._column(parameter, center) if center else {}
                    for result in self.model.results:
                        found[result, parameter.name] = column.get(result, Derivative(None, "undefined"))
            return found

    def _center(self):
        """Balls of the results at the point itself, or None where they are undefined."""
        here = self._place({})
        self.size = abs(self.x) if not self.x.is_zero() else flint.arb(1)
        self.level = here.residual(self.x, FINE).mid()
        self.slope = self._slope(here)
        return None if self.slope is None else self._results(here)

    def _place(self, shift):
        values = {name: ball(value) for name, value in self.point.items()}
        return Place(self.trees, values | shift)

    def _slope(self, here):
        """Slope of the residual at the root, by a central difference: only its leading digits matter."""
        h = self.size * flint.arb(2) ** STEP
        above, below = (here.residual(self.x + side * h, FINE) for side in (1, -1))
        slope = (above - below) / (2 * h)
        return slope.mid() if slope.is_finite() and not slope.contains(0) else None

    def _results(self, place):
        """Balls of the unknown and the outputs at a place near the root, or None where they are undefined."""
        x = self.x
        error = flint.arb("inf")
        fine, enough = (self.size * flint.arb(2) ** (bits - FINE) for bits in (40, 100))
        for _ in range(13):
            before, away = error, (place.residual(x, FINE) - self.level) / self.slope
            if not away.is_finite():
                return None
            error = 2 * away.abs_upper()
            if error <= fine or error <= enough and 2 * error > before:
                break
            x = (x - away).mid()
        if not error <= enough:
            return None
        around = x + flint.arb(0, error)
        values = {self.model.unknown.name: around}
        for name, target in self.trees.outputs.items():
            values[name] = place.value(target, around, FINE)
        return values

    def _moved(self, parameter, h):
        return self._results(self._place({parameter.name: ball(self.point[parameter.name]) + h}))

    def _column(self, parameter, center):
        size = self._size(parameter)
        h = size * flint.arb(2) ** STEP
        above, below = self._moved(parameter, h), self._moved(parameter, -h)
        column = {}
        for result in self.model.results:
            up, down = (side[result] if side and side[result].is_finite() else None for side in (above, below))
            middle = center[result]
            if not middle.is_finite():
                column[result] = Derivative(None, "undefined")
            elif up is not None and down is not None:
                column[result] = self._central(result, parameter, (up, middle, down), h, size)
            elif up is not None or down is not None:
                side = h if up is not None else -h
                column[result] = self._one_sided(result, parameter, middle, up if up is not None else down, side)
            else:
                column[result] = Derivative(None, "undefined")
        return column

    def _size(self, parameter):
        value = self.point[parameter.name]
        return ball(abs(value)) if value else self._width(parameter)

    def _width(self, parameter):
        """What scales the shift of a parameter that is zero: the width of its range, or 1 if that is less."""
        low, high = (self.trees.add(end) for end in (parameter.low, parameter.high))
        nowhere = Place(self.trees, {})
        width = (nowhere.value(high, None, 64) - nowhere.value(low, None, 64)).mid()
        return width if 0 < width < 1 else flint.arb(1)

    def _central(self, result, parameter, values, h, size):
        """Central difference. Where the one-sided ones disagree, or it is very large, twice the step tells why."""
        up, middle, down = values
        forward, backward = (up - middle) / h, (middle - down) / h
        gap, slope = abs((forward - backward).mid()), abs((forward + backward).mid()) / 2
        natural = max(abs(middle.mid()), self.size * flint.arb(2) ** -100) / size
        smooth = gap <= max(slope, natural * flint.arb(2) ** -20) * KINK + abs((forward - backward).rad()) * 2
        if not smooth or slope > natural * flint.arb(2) ** 40:
            above, below = self._moved(parameter, 2 * h), self._moved(parameter, -2 * h)
            if above is None or below is None:
                return Derivative(None, "undefined")
            forward, backward = (above[result] - middle) / (2 * h), (middle - below[result]) / (2 * h)
            wider, flatter = abs((forward - backward).mid()), abs((forward + backward).mid()) / 2
            if max(gap, slope) > max(wider, flatter) * 1.01:
                return Derivative(None, "unbounded")
            if not smooth and gap > wider * 0.51:
                return Derivative(None, "kink" if gap > wider * 0.99 else "undefined")
            lost = slope < natural * flint.arb(2) ** -90 and abs(middle.mid()) < self.size * flint.arb(2) ** -100
            if lost:        # a result that is zero, and a derivative no larger than the truncation
                return Derivative(None, "undefined")
        return _settled((up - down) / (2 * h), middle)

    def _one_sided(self, result, parameter, middle, near, h):
        """Second-order one-sided difference; where it does not converge, the derivative is unbounded; where it does so
        slowly, as beside a fractional power, it is left alone."""
        far, further = (self._moved(parameter, factor * h) for factor in (2, 4))
        if far is None or further is None:
            return Derivative(None, "undefined")
        one, two, four = (near - middle) / h, (far[result] - middle) / (2 * h), (further[result] - middle) / (4 * h)
        fine, coarse = 2 * one - two, 2 * two - four
        if abs((fine - coarse).mid()) > abs(fine.mid()) * KINK + abs((fine - coarse).rad()) * 2:
            grows = abs((one - two).mid()) >= abs((two - four).mid()) * (1 - KINK)
            return Derivative(None, "unbounded" if grows else "undefined")
        return _settled(fine, middle)


def _settled(value, middle):
    """The derivative, if its ball is small against it or against the result's size."""
    size = max(abs(value.mid()), abs(middle.mid()) * flint.arb(2) ** -40)
    if not value.is_finite() or value.rad() > size * flint.arb(2) ** -80:
        return Derivative(None, "undefined")
    return Derivative(float(value.mid()))
