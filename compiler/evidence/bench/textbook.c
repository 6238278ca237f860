/* SPDX-License-Identifier: 0BSD */
/* Newton's method kept inside its bracket by bisection, as textbooks have it: what a careful user writes by hand. It
   has no error bound and no caveats, so it is leaner than the module's loop. Included with `double` as it is, or as a
   number that carries derivatives. */

#define RW_NEAR 8.881784197001252e-16 /* a step of four units of the last place ends the iteration */
#define RW_STILL 1e-10                /* so does one below this that does not halve the one before: it is rounding */

/* An open end is entered by this share of the bracket. */
#define RW_ENTERED 9.094947017729282e-13

static void rw_ends(const double p[], double end[2])
{
    double rounding[2], width;
    RW(bracket)(p, end, rounding);
    width = end[1] - end[0];
    if (RW_OPEN_LOWER) {
        end[0] = end[0] + RW_ENTERED * width;
    }
    if (RW_OPEN_UPPER) {
        end[1] = end[1] - RW_ENTERED * width;
    }
}

static double rw_first(const double p[], double start, const double end[2])
{
#if RW_START
    if (isnan(start)) {
        start = RW(start)(p);
    }
#else
    (void)p;
#endif
    return start > end[0] && start < end[1] ? start : 0.5 * (end[0] + end[1]);
}

/* The root in *root; 1 where there is none. At most `most` steps. */
static int rw_textbook(const double p[], double start, int most, double *root)
{
    double end[2], x, g, slope, step, before, next;
    int i, negative;
    rw_ends(p, end);
    g = RW(residual)(p, end[0], &slope);
    rw_count = 1;
    if (isnan(g)) {
        return 1;
    }
    if (!(fabs(g) > 0.0)) {
        *root = end[0];
        return 0;
    }
    negative = g < 0.0;
    before = end[1] - end[0];
    x = rw_first(p, start, end);
    for (i = 0; i < most; i++) {
        g = RW(residual)(p, x, &slope);
        rw_count += 1;
        if (isnan(g)) {
            return 1;
        }
        if (!(fabs(g) > 0.0)) {
            break;
        }
        end[(g < 0.0) != negative] = x;
        step = g / slope;
        next = x - step;
        if (fabs(step) <= RW_NEAR * fabs(x)
            || (fabs(step) <= RW_STILL * fabs(x) && fabs(2.0 * step) > fabs(before))) {
            x = next;
            break;
        }
        if (!(next > end[0] && next < end[1]) || fabs(2.0 * step) > fabs(before)) {
            step = 0.5 * (end[1] - end[0]); /* Newton's step leaves the bracket, or does not halve the one before */
            next = end[0] + step;
        }
        before = step;
        x = next;
    }
    *root = x;
    return isnan(x);
}
