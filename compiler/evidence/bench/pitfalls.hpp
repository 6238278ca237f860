// SPDX-License-Identifier: 0BSD
// Where differentiation through the iterations goes wrong: three loops on the tape that find the root and lose its
// derivative. Each takes n points; jac is what the tape says.

// Bisection until no double is left in between, or the residual is exactly zero.
static int rw_bisected(const real p[], real *root)
{
    real end[2], slope;
    rw_ends(p, end);
    const bool negative = RW(residual)(p, end[0], &slope) < 0.0;
    for (rw_count = 1; rw_count < 200; rw_count++) {
        const real middle = 0.5 * (end[0] + end[1]);
        const real g = RW(residual)(p, middle, &slope);
        *root = middle;
        if (isnan(g)) {
            return 1;
        }
        if (!(middle > end[0] && middle < end[1]) || !(fabs(g) > 0.0)) {
            return 0;
        }
        end[(g < 0.0) != negative] = middle;
    }
    return 1;
}

// As array libraries choose: both operands are computed, and the one not taken keeps a derivative of zero.
static real rw_chosen(bool condition, const real &a, const real &b)
{
    return rw_make(condition ? a.value : b.value, a, condition ? 1.0 : 0.0, b, condition ? 0.0 : 1.0);
}

// Secants kept inside a bracket, a fixed number of them for every point: once it has converged, `where` holds it still
// while its next secant, which is not taken, is 0/0.
static int rw_held(const real p[], int steps, real *root)
{
    real end[2], slope, before, x, g_before, g;
    rw_ends(p, end);
    const bool negative = RW(residual)(p, end[0], &slope) < 0.0;
    before = end[0] + 0.375 * (end[1] - end[0]);
    x = end[0] + 0.5 * (end[1] - end[0]);
    g_before = RW(residual)(p, before, &slope);
    for (int i = 0; i < steps; i++) {
        g = RW(residual)(p, x, &slope);
        const bool low = (g < 0.0) == negative;
        const bool done = !(fabs(g) > 0.0) || fabs(x - before) <= RW_NEAR * fabs(x);
        end[0] = rw_chosen(low, x, end[0]);
        end[1] = rw_chosen(low, end[1], x);
        const real secant = x - g * (x - before) / (g - g_before);
        const real next = rw_chosen(secant > end[0] && secant < end[1], secant, 0.5 * (end[0] + end[1]));
        before = x;
        g_before = g;
        x = rw_chosen(done, x, next);
    }
    *root = x;
    return isnan(x);
}

// what: 0 bisection; 1 Newton's method stopped after so many steps; 2 and 3 so many secants, swept back and on.
RW_EXPORT void rw_pitfall(int what, int steps, size_t n, const double *p, double *y, double *jac,
                          double *implicit)
{
    for (size_t i = 0; i < n; i++) {
        real q[RW_N], root, results[RW_M];
        rw_independent(RW_N, p + i * RW_N, q);
        if (what == 0) {
            rw_bisected(q, &root);
        } else if (what == 1) {
            rw_textbook(q, NAN, steps, &root);
        } else {
            rw_held(q, steps, &root);
        }
        rw_results(q, root, results);
        rw_jacobian(results, jac + i * RW_M * RW_N, what == 3);
        for (int k = 0; k < RW_M; k++) {
            y[i * RW_M + k] = rw_value(results[k]);
        }
        passive::RW(partials)(p + i * RW_N, root.value, implicit + i * RW_M * RW_N);
    }
}
