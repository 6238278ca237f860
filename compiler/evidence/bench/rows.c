/* SPDX-License-Identifier: 0BSD */
/* The module itself, and finite differences of it. RW_SOURCE is the emitted C file, compiled with
   the flags of a module; its kernels are in reach here. */
#include "loop.h"
#include RW_SOURCE

/* Steps, as shares of the parameter: the square and the cube root of 2^-52, where truncation and rounding balance. */
#define RW_ONE_SIDED 1.4901161193847656e-08
#define RW_CENTRAL 6.055454452393343e-06

static int solve(const double q[], double start, double y[], double jac[])
{
    RW(point) r;
    int k;
    RW(solve)(q, start, &r);
    for (k = 0; k < RW_M; k++) {
        y[k] = r.y[k];
    }
    (void)jac;
    rw_count = r.evaluations;
    return r.status < 0;
}
RW_ROW(solve)

static int jacobian(const double q[], double start, double y[], double jac[])
{
    RW(point) r;
    int k;
    RW(solve_jacobian)(q, start, &r, jac);
    for (k = 0; k < RW_M; k++) {
        y[k] = r.y[k];
    }
    rw_count = r.evaluations;
    return r.status < 0;
}
RW_ROW(jacobian)

static int differences(const double q[], double start, double y[], double jac[], int central)
{
    double moved[RW_N];
    RW(point) r, above, below;
    long evaluations;
    int i, k;
    RW(solve)(q, start, &r);
    evaluations = r.evaluations;
    for (k = 0; k < RW_N; k++) {
        moved[k] = q[k];
    }
    for (i = 0; i < RW_M; i++) {
        y[i] = r.y[i];
    }
    for (k = 0; k < RW_N; k++) {
        const double size = fabs(q[k]) > rw_floor[k] ? fabs(q[k]) : rw_floor[k];
        double h = (central ? RW_CENTRAL : RW_ONE_SIDED) * size;
        if (!rw_wanted[k]) {
            for (i = 0; i < RW_M; i++) {
                jac[i * RW_N + k] = 0.0;
            }
            continue;
        }
        if (!central && q[k] > rw_middle[k]) {
            h = -h; /* into the range */
        }
        moved[k] = q[k] + h;
        RW(solve)(moved, r.y[0], &above);
        evaluations += above.evaluations;
        below = r;
        h = moved[k] - q[k];
        if (central) {
            h = moved[k];
            moved[k] = q[k] - (h - q[k]);
            RW(solve)(moved, r.y[0], &below);
            evaluations += below.evaluations;
            h = h - moved[k];
        }
        for (i = 0; i < RW_M; i++) {
            jac[i * RW_N + k] = (above.y[i] - below.y[i]) / h;
        }
        moved[k] = q[k];
    }
    rw_count = evaluations;
    return r.status < 0;
}

static int one_sided(const double q[], double start, double y[], double jac[])
{
    return differences(q, start, y, jac, 0);
}
RW_ROW(one_sided)

static int central(const double q[], double start, double y[], double jac[])
{
    return differences(q, start, y, jac, 1);
}
RW_ROW(central)
