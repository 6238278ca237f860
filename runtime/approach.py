# SPDX-License-Identifier: 0BSD


def _approach(p, start, r):
    """The short way to the root. Fills r but for the outputs.

    A few of Halley's steps from a good first guess, then the certificate of the point that they lead to. Inside the
    operating range only. Any doubt returns NOT_FINITE and leaves the point to _locate, which needs no luck: a step that
    leaves the bracket or does not contract, a residual that is not zero up to rounding, a curve that is not straight,
    an error bound that reaches an end of the bracket.
    That the residual's signs at the ends differ is looked at, or was proved for the whole operating range.
    """
    lower, upper, _, _ = _bracket(p)
    if not (math.isfinite(lower) and math.isfinite(upper)):
        return NOT_FINITE
    longest = math.inf  # the next step must be shorter
    trials = 0
    closing = False
#if STILL
    kept = _still(p)
#endif
#if ENDS
    low = _trial(p, kept, lower)[0]
    high = _trial(p, kept, upper)[0]
    r.evaluations += 2
    if not (low < 0.0 < high or high < 0.0 < low):
        return NOT_FINITE
#endif
    x = _guess(p) if math.isnan(start) else start
    if not lower < x < upper:
        x = 0.5 * lower + 0.5 * upper
    while not closing:
        g, slope, curvature = _curve(p, kept, x)
        trials += 1
        # Halley's step, which leaves an error of about bend^2 of itself.
        step = _div(-g * slope, slope * slope - 0.5 * g * curvature)
        bend = _div(g * curvature, slope * slope)
        if not (abs(step) <= longest and abs(bend) <= 1.0):
            break
        closing = bend * bend * abs(step) <= 2.0**-53 * abs(x)
        longest = 0.5 * abs(step)
        x += step
        if not lower < x < upper or trials >= TRIALS:
            closing = False
            break
    r.iterations += trials
    r.evaluations += trials
    trials = 0
    while closing and trials < 2:
        g, slope, bound, slope_rounding, curvature = _trial(p, kept, x)
        r.evaluations += 1
        if abs(g) <= bound:
            least = abs(slope) - slope_rounding
            if not least > 0.0:
                break
            error = (abs(g) + bound) / least
            bend = abs(curvature) * error / least
            if _is_flat(bend):
                break
            # As in _certify.
            error *= (1.0 + bend) * (1.0 + 2.0**-10)
            if abs(g) + bound > 0.0:
                error = max(error, 2.0**-1074)
            r.lower = math.nextafter(x - error, -math.inf) if error > 0.0 else x
            r.upper = math.nextafter(x + error, math.inf) if error > 0.0 else x
            if not (lower < r.lower and r.upper < upper):
                break
#if STEEP
            # From end to end the residual is monotone and changes by LEAST_RISE at least, as was proved for the whole
            # operating range: with so small a residual here the signs at the ends differ.
            if not (abs(g) + bound) * (upper - lower) < LEAST_RISE * min(x - lower, upper - x):
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
        x -= _div(g, slope)
        r.iterations += 1
        trials += 1
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
