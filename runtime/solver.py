# SPDX-License-Identifier: 0BSD


class _Sample:
    """The residual g and its slope at x."""

    __slots__ = ("x", "g", "slope")

    def __init__(self, x, g, slope):
        self.x = x
        self.g = g
        self.slope = slope


def _evaluate(p, x, r):
    g, slope = _residual(p, x)
    r.evaluations += 1
    return _Sample(x, g, slope)


def _fail(r, status, lower, upper):
    r.lower = lower
    r.upper = upper
    r.status = status
    return status


def _ordinal(x):
    """Doubles numbered in ascending order; 0.0 and -0.0 share the number 0."""
    bits = struct.unpack("<q", struct.pack("<d", x))[0]
    return bits if bits >= 0 else -(2**63) - bits


def _from_ordinal(n):
    bits = n if n >= 0 else -(2**63) - n
    return struct.unpack("<d", struct.pack("<q", bits))[0]


def _gap(a, b):
    """How many steps from double to double lead from a up to b: at most 2^64 - 2^53."""
    return _ordinal(b) - _ordinal(a)


def _between(x, a, b):
    return a < x < b or b < x < a


def _usable(s, rising):
    """A finite slope in the direction in which the residual changes sign. Beside an odd pole the direction is wrong."""
    return math.isfinite(s.slope) and s.slope * rising > 0.0


def _is_zero(g, bound, largest):
    """Zero up to rounding. A bound that is not finite says nothing, nor does the huge one beside a pole, where the
    residual is larger than the largest one known on this bracket."""
    return math.isfinite(bound) and abs(g) <= bound and abs(g) <= largest


#if OPEN_LOWER || OPEN_UPPER
def _enter(p, end, far, rounding, r):
    """The sample nearest to an open end at which the residual is finite and its sign is certain, and 0 or a status.

    The offsets are the first one times 2, 2^3, 2^7, 2^15, ...: twelve of them reach from a subnormal to any number.
    """
    half = 0.5 * far - 0.5 * end
    offset = max(2.0 * abs(math.nextafter(end, far) - end), 2.0 * rounding)
    status = NOT_FINITE
    sample = None

    growth = 1
    while growth <= 2048:
        x = end + math.copysign(min(offset, abs(half)), half)
        if not _between(x, end, far):
            return sample, NO_SIGN_CHANGE
        sample = _evaluate(p, x, r)
        if math.isfinite(sample.g):
            bound = _rounding(p, x)[0]
            if abs(sample.g) > bound:
                return sample, 0
            status = NO_SIGN_CHANGE
        if offset >= abs(half):
            break
        offset = math.ldexp(offset, growth) if offset < math.ldexp(abs(half), -growth) else abs(half)
        growth *= 2
    return sample, status
#endif


def _aim(best, previous, other, rising, overshoot):
    """The next point to try, from models of the residual between the two ends of the bracket, best and other.

    Where none serves the result is not inside the bracket. In this order:
    - the cubic through x(g) and its slopes at the two points evaluated last (Hermite's interpolation of the inverse
      function; order 1 + sqrt(3)), if it agrees with Newton's step within a factor of 16. With overshoot it goes
      past the root by twice the two steps' difference, to bring in the far end of the bracket too;
    - the power law c*(x - a)^q + d through both ends with the steeper one's slope: exact for a monomial, and good
      where the slope at the other end is zero;
    - Newton's step.
    """
    other_steeper = (_usable(other, rising)
                     and not (_usable(best, rising) and abs(best.slope) >= abs(other.slope)))
    steep = other if other_steeper else best
    anchor = best if other_steeper else other
    newton = 0.0

    if _usable(best, rising):
        newton = -best.g / best.slope
        if _usable(previous, rising) and abs(previous.g - best.g) > 0.0:
            t = best.g / (best.g - previous.g)
            hermite = ((1.0 - t) * (1.0 - t) * newton
                       + t * t * ((3.0 - 2.0 * t) * (previous.x - best.x) - previous.g / previous.slope))
            if ((hermite < 0.0) == (newton < 0.0) and abs(hermite) < 16.0 * abs(newton)
                    and abs(newton) < 16.0 * abs(hermite)):
                x = best.x + hermite + math.copysign(2.0 * abs(hermite - newton), hermite)
                if overshoot and _between(x, best.x, other.x):
                    return x
                x = best.x + hermite
                if _between(x, best.x, other.x):
                    return x
    if not overshoot and _usable(steep, rising):
        power = steep.slope * ((steep.x - anchor.x) / (steep.g - anchor.g))
        if power > 2.0**-10:
            t = math.pow(anchor.g / (anchor.g - steep.g), 1.0 / power)
            x = anchor.x + t * (steep.x - anchor.x)
            if _between(x, best.x, other.x):
                return x
    return best.x + newton


def _descends(p, side, rising, width, largest):
    """One side of an adjacent pair of doubles comes down to zero between them.

    Its residual is zero up to rounding, or at most slope * width, and below 64 times that for cube-root-like ones. Not
    so beside a step or a pole.
    """
    bound = _rounding(p, side.x)[0]
    return (_is_zero(side.g, bound, largest)
            or (side.slope * rising > 0.0 and abs(side.g) <= 64.0 * abs(side.slope) * width))


def _narrow(p, low, high, start, r):
    """Narrows the bracket between two samples of opposite signs down to a root: low, high, root, and 0 or a status.

    The number of doubles between low and high at least halves over every three evaluations: two points from models of
    the residual, or one of them the arithmetic middle, then the middle double. There are less than 2^64 doubles, so
    the ends become adjacent within 3*64 evaluations, but for those at which the residual is not a number. A last step
    of Newton's may follow, for its accuracy.
    """
    rising = 1.0 if high.g > 0.0 else -1.0
    largest = max(abs(low.g), abs(high.g))
    gap = _gap(low.x, high.x)
    tries = 0  # evaluations since the gap was halved
    plain = False  # the last point was the arithmetic middle
    holes = 0  # evaluations in a row that were not a number
    slow = False  # the last model was poor: beside a simple pole Newton's step leaves half of the residual

    best = low if abs(low.g) < abs(high.g) else high
    previous = high if abs(low.g) < abs(high.g) else low
    while True:
        # low.x < high.x, low.g and high.g are nonzero and of opposite signs; best is one of the two.
        if _gap(low.x, high.x) <= 1:
            bound = _rounding(p, best.x)[0]
            if _is_zero(best.g, bound, largest):
                return low, high, best, 0
            descends = (_descends(p, low, rising, high.x - low.x, largest)
                        and _descends(p, high, rising, high.x - low.x, largest))
            return low, high, best, 0 if descends else JUMP
        x = best.x
        closing = False  # the next point is the last, by the model
        zero = False  # and best is zero up to rounding
        if _usable(best, rising):
            step = -best.g / best.slope
            if abs(step) <= 2.0**-26 * abs(best.x):
                # Newton's step leaves the error bend/2 * step. It is the last one if that is below half an ulp, or if
                # the rest is rounding. Beside a pole at an open end, where the step is as small, bend is 1 or more.
                bound, _, curvature = _rounding(p, best.x)
                bend = abs(curvature * step / best.slope)
                zero = _is_zero(best.g, bound, largest)
                closing = bend <= 0.25 and (zero or bend * abs(step) <= 2.0**-53 * abs(best.x))
                if closing:
                    x = best.x + step
                    closing = _between(x, low.x, high.x)
                    # the residual one double beside the root, if nothing jumps there
                    beside = abs(best.g) + abs(best.slope) * 2.0**-52 * abs(best.x)
                    zero = zero or not abs(x - best.x) > 0.0  # or as near to it as doubles come
                    if (zero and abs(step) <= 2.0**-50 * abs(best.x) if closing
                            else zero or abs(low.g if step < 0.0 else high.g) <= beside):
                        return low, high, best, 0
        if r.evaluations >= LIMIT:
            return low, high, best, 0 if closing and zero else ITERATION_LIMIT

        fast = closing
        if not closing and not slow and holes == 0 and tries < 2:
            if r.iterations == 0 and not math.isnan(start):
                x = start
            else:
                x = _aim(best, previous, high if (best.g < 0.0) == (low.g < 0.0) else low, rising, tries == 1)
            fast = _between(x, low.x, high.x)
        plain = not fast and holes == 0 and tries < 2 and not plain
        if plain:
            x = 0.5 * (low.x + high.x) if low.x < 0.0 < high.x else low.x + 0.5 * (high.x - low.x)
        if holes > 0:  # nearer and nearer to either end in turn, where the residual is known to be a number
            share = math.ldexp(1.0, -1 - (holes + 1) // 2)
            x = (1.0 - share) * low.x + share * high.x if holes % 2 == 1 else share * low.x + (1.0 - share) * high.x
        if not _between(x, low.x, high.x):
            x = _from_ordinal(_ordinal(low.x) + _gap(low.x, high.x) // 2)

        latest = _evaluate(p, x, r)
        r.iterations += 1
        tries += 1
        if math.isnan(latest.g):
            holes += 1
            if closing and zero:
                return low, high, best, 0
            if holes > 8:
                return low, high, best, NOT_FINITE
            continue
        holes = 0
        improved = abs(latest.g) < abs(best.g)
        if not abs(latest.g) > 0.0 or (closing and improved):
            return low, high, latest, 0
        if closing and (zero or abs(latest.g) <= beside):
            return low, high, best, 0
        if fast and not improved:
            bound = _rounding(p, best.x)[0]
            if _is_zero(best.g, bound, largest):
                return low, high, best, 0
        slow = fast and abs(latest.g) > 0.4 * abs(best.g)
        if (latest.g < 0.0) == (low.g < 0.0):
            low = latest
        else:
            high = latest
        if improved or best.x < low.x or best.x > high.x:
            previous = best
            best = latest
        else:
            previous = latest
        gap_left = _gap(low.x, high.x)
        if gap_left <= gap - gap // 2:
            gap = gap_left
            tries = 0


def _reach(p, x, end, negative, r):
    """How far from the root x, towards one end of the bracket, the residual's sign may be mere rounding.

    The distance 2^k of the nearest point at which it surely has the sign expected there, found by bisection of k,
    or of the end.
    """
    reach = abs(end - x)
    if not reach > 0.0:
        return 0.0
    unsure = math.frexp(max(abs(x), 2.0**-1022))[1]
    unsure -= 54  # half the spacing of doubles at x
    sure = math.frexp(0.5 * end - 0.5 * x)[1]
    sure += 1  # 2^sure exceeds the distance of the end
    while sure - unsure > 1 and r.evaluations < LIMIT:
        k = unsure + (sure - unsure) // 2
        x_probe = x + math.copysign(math.ldexp(1.0, k) if k < 1024 else math.inf, end - x)
        if not _between(x_probe, x, end):
            sure = k
            continue
        s = _evaluate(p, x_probe, r)
        bound = _rounding(p, s.x)[0]
        if abs(s.g) > bound and (s.g < 0.0) == negative:
            sure = k
            reach = abs(s.x - x)
        else:
            unsure = k
    return reach


def _bend(p, x, g, slope, rounding, slope_rounding, curvature):
    """By what share of itself the slope changes within the error of a root at x.

    |g_xx| * error / |g_x|, or where the second derivative overflows (beside 1e-300, say) what the slopes at both ends
    tell. Infinite where the slope is within its own rounding error. Newton-Kantorovich: up to 1/2 the root lies within
    2*error / (1 + sqrt(1 - 2*bend)) of x.
    """
    least = abs(slope) - slope_rounding
    if not (least > 0.0 and math.isfinite(least)):
        return math.inf
    error = (abs(g) + rounding) / least
    if math.isfinite(curvature):
        return abs(curvature) * error / least
    before = _residual(p, x - error)[1]
    after = _residual(p, x + error)[1]
    return abs(before - slope) / least + abs(after - slope) / least


def _is_flat(bend):
    """No slope to speak of: the curve is not straight within the error of the root."""
    return not bend <= 0.25


def _certify(p, root, end, rounding, negative, at_end, r):
    """Fills r for the root: error bound, enclosing bracket and caveats.

    end holds the bracket, rounding its uncertainty; the residual is negative towards end[i] if negative[i]; at_end is
    the uncertainty of the root as an end itself.
    """
    bound, slope_rounding, curvature = _rounding(p, root.x)
    bend = _bend(p, root.x, root.g, root.slope, bound, slope_rounding, curvature)

    r.status = 0
    if not _is_flat(bend):
        error = (abs(root.g) + bound) / (abs(root.slope) - slope_rounding)
        # 2 / (1 + sqrt(1 - 2*bend)) < 1 + bend for bend <= 1/4; 2^-10 is for the rounding of these lines.
        error *= (1.0 + bend) * (1.0 + 2.0**-10)
    else:
        r.status |= FLAT
        error = 0.0
        if not abs(root.g) + bound <= 0.0:
            error = _reach(p, root.x, end[0], negative[0], r)
            error = max(error, _reach(p, root.x, end[1], negative[1], r))
    if abs(root.g) + bound > 0.0:  # not exact, even where the bound underflows
        error = max(error, 2.0**-1074)
    error += at_end
    farthest = max(root.x - end[0] + rounding[0], end[1] - root.x + rounding[1])
    r.error_bound = error if error < farthest else farthest
    r.y[0] = root.x
    r.residual = root.g
    r.slope = root.slope
    r.lower = end[0]
    r.upper = end[1]
    if root.x - r.error_bound > end[0]:
        r.lower = math.nextafter(root.x - r.error_bound, -math.inf) if r.error_bound > 0.0 else root.x
    if root.x + r.error_bound < end[1]:
        r.upper = math.nextafter(root.x + r.error_bound, math.inf) if r.error_bound > 0.0 else root.x
#if SWITCHES
    if _kink(p, root.x, r.error_bound):
        r.status |= KINK
#endif
    return r.status


def _locate(p, start, r):
    """Finds the root in the bracket and fills r, which comes new, but for the outputs.

    start is where to look first, NaN for nowhere.
    """
    lower, upper, lower_rounding, upper_rounding = _bracket(p)
    end = [lower, upper]
    rounding = [lower_rounding, upper_rounding]
    if not math.isfinite(end[0]) or not math.isfinite(end[1]):
        return _fail(r, NOT_FINITE, math.nan, math.nan)
    for i in range(2):  # an unbounded rounding error says nothing about where a root may be
        if not math.isfinite(rounding[i]):
            rounding[i] = 0.0
    if end[0] > end[1]:  # ends that cross by no more than their rounding are equal
        if not end[0] - end[1] <= rounding[0] + rounding[1]:
            return _fail(r, BAD_BRACKET, math.nan, math.nan)
        end.reverse()
        rounding.reverse()

#if OPEN_LOWER
    low, status = _enter(p, end[0], end[1], rounding[0], r)
    rounding[0] = 0.0
#else
    low = _evaluate(p, end[0], r)
    status = NOT_FINITE if math.isnan(low.g) else 0
#endif
    if status < 0:
        return _fail(r, status, end[0], end[1])
#if OPEN_UPPER
    high, status = _enter(p, end[1], end[0], rounding[1], r)
    rounding[1] = 0.0
#else
    high = _evaluate(p, end[1], r)
    status = NOT_FINITE if math.isnan(high.g) else 0
#endif
    if status < 0:
        return _fail(r, status, end[0], end[1])

    negative = [low.g < 0.0, high.g < 0.0]
    if not abs(low.g) > 0.0:
        return _certify(p, low, end, rounding, negative, rounding[0], r)
    if not abs(high.g) > 0.0:
        return _certify(p, high, end, rounding, negative, rounding[1], r)
    if negative[0] == negative[1]:  # no root but at an end, where zero up to rounding counts as zero
        i = int(abs(high.g) < abs(low.g))
        root = high if i else low
        slack = _rounding(p, root.x)[0]
        if rounding[i] > 0.0:
            slack += abs(root.slope) * rounding[i]
        if _is_zero(root.g, slack, abs(root.g)):
            return _certify(p, root, end, rounding, negative, rounding[i], r)
        return _fail(r, NO_SIGN_CHANGE, end[0], end[1])

#if START
    if math.isnan(start):
        start = _start(p)
#endif
    low, high, root, status = _narrow(p, low, high, start, r)
    if status < 0:
        return _fail(r, status, low.x, high.x)
    return _certify(p, root, end, rounding, negative, 0.0, r)
