# SPDX-License-Identifier: 0BSD


def _inside(lower, upper, last, following):
    """The next point, or where it leaves the bracket the middle between the last one and the end that it went past."""
    if following > lower:
        return following if following < upper else 0.5 * last + 0.5 * upper
    return 0.5 * last + 0.5 * lower


def _approach(p, start, known, r):
    """The short way to the root, inside the operating range only. Fills r but for the outputs.

    A first guess, PACE, and the certificate of the point that they lead to; known is filled with what the derivatives
    share with it. Any doubt is a negative status and leaves the point to the safeguarded solver, which needs no luck: a
    residual that is not zero up to rounding, a curve that is not straight, an error bound that reaches an end of the bracket.
    That the residual's signs at the ends differ is HOW.
    """
    lower, upper, _, _ = _bracket(p)
#if ENDS
    if not (math.isfinite(lower) and math.isfinite(upper)):
        return NOT_FINITE
    low, _ = _residual(p, lower)
    high, _ = _residual(p, upper)
    r.evaluations += 2
    if not (low < 0.0 < high or high < 0.0 < low):
        return NOT_FINITE
#endif
#if STILL
    known[:STANDING] = _still(p)
#endif
    x = 0.5 * lower + 0.5 * upper
    x = _inside(lower, upper, x, _guess(p) if math.isnan(start) else start)
#if NEWTON || HALLEY || HOUSEHOLDER
    for _ in range(STEPS if math.isnan(start) else 1):  # one step from a warm start, which is near
        r.iterations += 1
        r.evaluations += 1
#if NEWTON
        g, slope = _curve(p, known, x)
        x = _inside(lower, upper, x, x - _div(g, slope))
#endif
#if HALLEY
        g, slope, curvature = _curve(p, known, x)
        product = g * curvature
        square = slope * slope
        x = _inside(lower, upper, x, x - _div(2.0 * g * slope, 2.0 * square - product))
#endif
#if HOUSEHOLDER
        g, slope, curvature, third = _curve(p, known, x)
        product = g * curvature
        square = slope * slope
        x = _inside(lower, upper, x, x - _div(g * (6.0 * square - 3.0 * product),
                                              6.0 * slope * (square - product) + g * g * third))
#endif
#endif
    for _ in range(TRIALS):
#if CAREFUL
        g, slope, bound, slope_rounding, curvature = _trial(p, known, x)
#else
        g, slope, bound = _trial(p, known, x)
#endif
        r.evaluations += 1
        if abs(g) <= bound + abs(slope) * (2.0**-53 * abs(x)):  # zero up to rounding, of g and of x
#if CAREFUL
            least = abs(slope) - slope_rounding
            if not least > 0.0:
                break
            error = (abs(g) + bound) / least
            turn = abs(curvature) * error / least
            if _is_flat(turn):
                break
            if abs(g) > bound:  # then the next double on the other side of the root tells whether the curve is straight
                beyond, following = _residual(p, math.nextafter(x, upper if (g < 0.0) == (slope > 0.0) else lower))
                r.evaluations += 1
                if (beyond < 0.0) == (g < 0.0) or not abs(following - slope) <= 0.25 * abs(slope):
                    break
            error *= (1.0 + turn) * (1.0 + 2.0**-10)  # as in _certify
#else
            # The slope is proved, for the whole operating range, to be right to 2^-12 of itself and to change by no
            # more within this error: no root is flat there.
            error = (abs(g) + bound) / abs(slope) * (1.0 + 2.0**-10)
#endif
            reach = error + 2.0**-51 * (abs(x) + error)
            r.lower = x - reach
            r.upper = x + reach
            if not (error > 0.0 and lower < r.lower and r.upper < upper):
                break
#if STEEP
            # From end to end the residual is monotone and changes by LEAST_RISE at least, as was proved for the whole
            # operating range: with so small a residual here the signs at the ends differ.
            reach = (abs(g) + bound) * (upper - lower) / LEAST_RISE
            if not (reach < x - lower and reach < upper - x):
                break
#endif
            r.error_bound = error
            r.y[0] = x
            r.residual = g
            r.slope = slope
            r.status = 0
#if SWITCHES
            if _kink(p, x, error):
                r.status |= KINK
#endif
            return r.status
        x = _inside(lower, upper, x, x - _div(g, slope))
        r.iterations += 1
    return NOT_FINITE


def _resume(p, start, r):
    """The safeguarded solver, with all the evaluations that it may need; those spent already are counted in the end."""
    iterations = r.iterations
    evaluations = r.evaluations
    r.iterations = 0
    r.evaluations = 0
    r.lower = r.upper = math.nan
    status = _locate(p, start, r)
    r.iterations += iterations
    r.evaluations += evaluations
    return status
