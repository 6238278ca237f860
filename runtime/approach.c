/* SPDX-License-Identifier: 0BSD */

/* The short way to the root: a few of Halley's steps from a good first guess, then the certificate of the point that
   they lead to. Fills r but for the outputs. Inside the operating range only. Any doubt returns RW_NOT_FINITE and leaves
   the point to rw_locate, which needs no luck: a step that leaves the bracket or does not contract, a residual that is
   not zero up to rounding, a curve that is not straight, an error bound that reaches an end of the bracket.
   That the residual's signs at the ends differ is looked at, or was proved for the whole operating range. */
static int rw_approach(const double p[], double start, rw_point *r)
{
    double end[2], rounding[2], x, g, slope, bound, slope_rounding, curvature, least, error, bend, step;
#if RW_STILL
    double kept[RW_KEPT];
#endif
    double longest = HUGE_VAL; /* the next step must be shorter */
    int trials = 0, closing = 0;
#if RW_ENDS
    double low, high;
#endif

    rw_bracket(p, end, rounding);
    if (!(isfinite(end[0]) && isfinite(end[1]))) {
        return RW_NOT_FINITE;
    }
#if RW_STILL
    rw_still(p, kept);
#endif
#if RW_ENDS
    low = rw_trial(p, kept, end[0], &slope, &bound, &slope_rounding, &curvature);
    high = rw_trial(p, kept, end[1], &slope, &bound, &slope_rounding, &curvature);
    r->evaluations += 2;
    if (!((low < 0.0 && high > 0.0) || (high < 0.0 && low > 0.0))) {
        return RW_NOT_FINITE;
    }
#endif
    x = isnan(start) ? rw_guess(p) : start;
    if (!(end[0] < x && x < end[1])) {
        x = 0.5 * end[0] + 0.5 * end[1];
    }
    while (!closing) {
        g = rw_curve(p, kept, x, &slope, &curvature);
        trials += 1;
        /* Halley's step, which leaves an error of about bend^2 of itself. */
        step = -g * slope / (slope * slope - 0.5 * g * curvature);
        bend = g * curvature / (slope * slope);
        if (!(fabs(step) <= longest && fabs(bend) <= 1.0)) {
            break;
        }
        closing = bend * bend * fabs(step) <= 0x1p-53 * fabs(x);
        longest = 0.5 * fabs(step);
        x += step;
        if (!(end[0] < x && x < end[1]) || trials >= RW_TRIALS) {
            closing = 0;
            break;
        }
    }
    r->iterations += trials;
    r->evaluations += trials;
    for (trials = 0; closing && trials < 2; trials++) {
        g = rw_trial(p, kept, x, &slope, &bound, &slope_rounding, &curvature);
        r->evaluations += 1;
        if (fabs(g) <= bound) {
            least = fabs(slope) - slope_rounding;
            if (!(least > 0.0)) {
                break;
            }
            error = (fabs(g) + bound) / least;
            bend = fabs(curvature) * error / least;
            if (rw_is_flat(bend)) {
                break;
            }
            /* As in rw_certify. */
            error *= (1.0 + bend) * (1.0 + 0x1p-10);
            if (fabs(g) + bound > 0.0) {
                error = fmax(error, 0x1p-1074);
            }
            r->lower = error > 0.0 ? nextafter(x - error, -HUGE_VAL) : x;
            r->upper = error > 0.0 ? nextafter(x + error, HUGE_VAL) : x;
            if (!(end[0] < r->lower && r->upper < end[1])) {
                break;
            }
#if RW_STEEP
            /* From end to end the residual is monotone and changes by RW_LEAST_RISE at least, as was proved for the whole
               operating range: with so small a residual here the signs at the ends differ. */
            if (!((fabs(g) + bound) * (end[1] - end[0]) < RW_LEAST_RISE * fmin(x - end[0], end[1] - x))) {
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
        x -= g / slope;
        r->iterations += 1;
    }
    return RW_NOT_FINITE;
}

/* The safeguarded solver, with all the evaluations that it may need; those spent already are counted in the end. */
static int rw_resume(const double p[], double start, rw_point *r)
{
    const int iterations = r->iterations, evaluations = r->evaluations;
    int status;
    r->iterations = 0;
    r->evaluations = 0;
    r->lower = NAN;
    r->upper = NAN;
    status = rw_locate(p, start, r);
    r->iterations += iterations;
    r->evaluations += evaluations;
    return status;
}
