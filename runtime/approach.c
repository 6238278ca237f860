/* SPDX-License-Identifier: 0BSD */

/* The next point, or where it leaves the bracket the middle between the last one and the end that it went past. */
static double rw_inside(const double end[2], double last, double next)
{
    return next > end[0] ? (next < end[1] ? next : 0.5 * last + 0.5 * end[1]) : 0.5 * last + 0.5 * end[0];
}

/* The short way to the root, inside the operating range only: a first guess, RW_PACE, and the certificate
   of the point that they lead to. Fills r but for the outputs, and known with what the derivatives share with it.
   Any doubt is a negative status and leaves the point to the safeguarded solver, which needs no luck: a residual that is
   not zero up to rounding, a curve that is not straight, an error bound that reaches an end of the bracket.
   That the residual's signs at the ends differ is RW_HOW. */
static int rw_approach(const double p[], double start, double known[], rw_point *r)
{
    double end[2], rounding[2], x, g, slope, bound, error, reach;
#if RW_HALLEY || RW_HOUSEHOLDER
    double product, square;
#endif
#if RW_HALLEY || RW_HOUSEHOLDER || RW_CAREFUL
    double curvature;
#endif
#if RW_HOUSEHOLDER
    double third;
#endif
#if RW_CAREFUL
    double slope_rounding, least, turn, beyond, next;
#endif
#if RW_ENDS
    double low, high;
#endif
    int k;

    rw_bracket(p, end, rounding);
#if RW_ENDS
    if (!(isfinite(end[0]) && isfinite(end[1]))) {
        return RW_NOT_FINITE;
    }
    low = rw_residual(p, end[0], &slope);
    high = rw_residual(p, end[1], &slope);
    r->evaluations += 2;
    if (!((low < 0.0 && high > 0.0) || (high < 0.0 && low > 0.0))) {
        return RW_NOT_FINITE;
    }
#endif
#if RW_STILL
    rw_still(p, known);
#endif
    x = 0.5 * end[0] + 0.5 * end[1];
    x = rw_inside(end, x, isnan(start) ? rw_guess(p) : start);
#if RW_NEWTON || RW_HALLEY || RW_HOUSEHOLDER
    for (k = isnan(start) ? 0 : RW_STEPS - 1; k < RW_STEPS; k++) { /* one step from a warm start, which is near */
        r->iterations += 1;
        r->evaluations += 1;
#if RW_NEWTON
        g = rw_curve(p, known, x, &slope);
        x = rw_inside(end, x, x - g / slope);
#endif
#if RW_HALLEY
        g = rw_curve(p, known, x, &slope, &curvature);
        product = g * curvature;
        square = slope * slope;
        x = rw_inside(end, x, x - 2.0 * g * slope / (2.0 * square - product));
#endif
#if RW_HOUSEHOLDER
        g = rw_curve(p, known, x, &slope, &curvature, &third);
        product = g * curvature;
        square = slope * slope;
        x = rw_inside(end, x, x - g * (6.0 * square - 3.0 * product) / (6.0 * slope * (square - product) + g * g * third));
#endif
    }
#endif
    for (k = 0; k < RW_TRIALS; k++) {
#if RW_CAREFUL
        g = rw_trial(p, known, x, &slope, &bound, &slope_rounding, &curvature);
#else
        g = rw_trial(p, known, x, &slope, &bound);
#endif
        r->evaluations += 1;
        if (fabs(g) <= bound + fabs(slope) * (0.5 * DBL_EPSILON * fabs(x))) { /* zero up to rounding, of g and of x */
#if RW_CAREFUL
            least = fabs(slope) - slope_rounding;
            error = (fabs(g) + bound) / least;
            turn = fabs(curvature) * error / least;
            if (!(least > 0.0) || rw_is_flat(turn)) {
                break;
            }
            if (fabs(g) > bound) { /* then the next double on the other side of the root tells whether the curve is straight */
                beyond = rw_residual(p, nextafter(x, (g < 0.0) == (slope > 0.0) ? end[1] : end[0]), &next);
                r->evaluations += 1;
                if ((beyond < 0.0) == (g < 0.0) || !(fabs(next - slope) <= 0.25 * fabs(slope))) {
                    break;
                }
            }
            error *= (1.0 + turn) * (1.0 + 0x1p-10); /* as in rw_certify */
#else
            /* The slope is proved, for the whole operating range, to be right to 2^-12 of itself and to change by no more
               within this error: no root is flat there. */
            error = (fabs(g) + bound) / fabs(slope) * (1.0 + 0x1p-10);
#endif
            reach = error + 0x1p-51 * (fabs(x) + error);
            r->lower = x - reach;
            r->upper = x + reach;
            if (!(error > 0.0 && end[0] < r->lower && r->upper < end[1])) {
                break;
            }
#if RW_STEEP
            /* From end to end the residual is monotone and changes by RW_LEAST_RISE at least, as was proved for the whole
               operating range: with so small a residual here the signs at the ends differ. */
            reach = (fabs(g) + bound) * (end[1] - end[0]) / RW_LEAST_RISE;
            if (!(reach < x - end[0] && reach < end[1] - x)) {
                break;
            }
#endif
            r->error_bound = error;
            r->y[0] = x;
            r->residual = g;
            r->slope = slope;
            r->status = 0;
#if RW_SWITCHES
            if (rw_kink(p, x, error)) {
                r->status |= RW_KINK;
            }
#endif
            return r->status;
        }
        x = rw_inside(end, x, x - g / slope);
        r->iterations += 1;
    }
    return RW_NOT_FINITE;
}

/* The safeguarded solver, with all the evaluations that it may need; those spent already are counted in the end. */
static int rw_resume(const double p[], double start, rw_point *r)
{
    const int iterations = r->iterations, evaluations = r->evaluations;
    int status;
    rw_clear(r);
    status = rw_locate(p, start, r);
    r->iterations += iterations;
    r->evaluations += evaluations;
    return status;
}
