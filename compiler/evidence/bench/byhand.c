/* SPDX-License-Identifier: 0BSD */
/* Solvers written by hand in C around the module's residual, with the implicit rule after them: rivals that language
   does not hold back. The residual is part of their loops, and what they leave unused of it is not computed. */
#include "loop.h"

static inline __attribute__((always_inline)) double RW(residual)(const double p[], double x, double *slope);

#include RW_SOURCE
#include "textbook.c"

static void outputs(const double q[], double root, double y[])
{
    y[0] = root;
#if RW_M > 1
    RW(outputs)(q, root, y);
#else
    (void)q;
#endif
}

/* Brent, R. P. (1973), Algorithms for Minimization without Derivatives, chapter 4: bisection, secant and inverse
   quadratic interpolation. b is the best point, a the one before, [b, c] the bracket. */
static int rw_brent(const double p[], double *root)
{
    double end[2], a, b, c, ga, gb, gc, d, e, s, t, u, v, near, middle, slope;
    int i;
    rw_ends(p, end);
    a = end[0];
    b = end[1];
    ga = RW(residual)(p, a, &slope);
    gb = RW(residual)(p, b, &slope);
    rw_count = 2;
    if (!((ga <= 0.0 && gb >= 0.0) || (ga >= 0.0 && gb <= 0.0))) {
        return 1;
    }
    c = b;
    gc = gb;
    d = e = b - a;
    for (i = 0; i < 200; i++) {
        if ((gb > 0.0) == (gc > 0.0)) {
            c = a;
            gc = ga;
            d = e = b - a;
        }
        if (fabs(gc) < fabs(gb)) {
            a = b;
            b = c;
            c = a;
            ga = gb;
            gb = gc;
            gc = ga;
        }
        near = RW_NEAR * 0.5 * fabs(b);
        middle = 0.5 * (c - b);
        if (!(fabs(middle) > near) || !(fabs(gb) > 0.0)) {
            break;
        }
        if (fabs(e) >= near && fabs(ga) > fabs(gb)) {
            s = gb / ga;
            if (a == c) {
                u = 2.0 * middle * s;
                v = 1.0 - s;
            } else {
                t = gb / gc;
                v = ga / gc;
                u = s * (2.0 * middle * v * (v - t) - (b - a) * (t - 1.0));
                v = (v - 1.0) * (t - 1.0) * (s - 1.0);
            }
            v = u > 0.0 ? -v : v;
            u = fabs(u);
            if (2.0 * u < 3.0 * middle * v - fabs(near * v) && 2.0 * u < fabs(e * v)) {
                e = d;
                d = u / v;
            } else {
                d = e = middle;
            }
        } else {
            d = e = middle;
        }
        a = b;
        ga = gb;
        b += fabs(d) > near ? d : copysign(near > 0.0 ? near : DBL_MIN, middle);
        gb = RW(residual)(p, b, &slope);
        rw_count += 1;
        if (isnan(gb)) {
            return 1;
        }
    }
    *root = b;
    return 0;
}

static int brent(const double q[], double start, double y[], double jac[])
{
    double root = 0.0;
    const int failed = rw_brent(q, &root);
    (void)start;
    if (!failed) {
        outputs(q, root, y);
        RW(partials)(q, root, jac);
    }
    return failed;
}
RW_ROW(brent)

static int newton(const double q[], double start, double y[], double jac[])
{
    double root = 0.0;
    const int failed = rw_textbook(q, start, 100, &root);
    if (!failed) {
        outputs(q, root, y);
        RW(partials)(q, root, jac);
    }
    return failed;
}
RW_ROW(newton)
