/* SPDX-License-Identifier: 0BSD */
/* The plain module, and the limit: the least that anyone has to do who returns a checked root and its derivatives. The
   function limit.inc is part of the loop, as if it were written there by hand. */
#include "rows.c"

static inline __attribute__((always_inline)) void RW(limit)(const double p[], double x, double results[]);
#include "limit.inc"

static volatile double rw_sink;

/* start is the root already. */
static int limit(const double q[], double start, double y[], double jac[])
{
    double results[2 + RW_M * RW_N];
    int k;
    RW(limit)(q, start, results);
    for (k = 0; k < RW_M * RW_N; k++) {
        jac[k] = results[2 + k];
    }
    y[0] = start + 0.0 * results[0];
    rw_sink = results[1];
    rw_count = 1;
    return 0;
}
RW_ROW(limit)

static int kernels(const double q[], double start, double y[], double jac[])
{
    double slope;
    const double g = RW(residual)(q, start, &slope);
    RW(partials)(q, start, jac);
    y[0] = start + 0.0 * g;
    rw_sink = slope;
    rw_count = 1;
    return 0;
}
RW_ROW(kernels)
