/* SPDX-License-Identifier: 0BSD */
/* A row of the benchmark: one way to a root and its jacobian, over n points.

   A row is defined by a function `int point(const double q[], double start, double y[], double jac[])` that returns 0,
   or 1 where it fails, and leaves a count in rw_count. RW_ROW makes of it a function over many points, independent or
   one after another: then all parameters of a point wait for the root of the one before, by a zero made of it. */
#ifndef RW_LOOP_H
#define RW_LOOP_H

#include <stddef.h>

#define RW_JOIN(a, b) RW_JOIN_(a, b)
#define RW_JOIN_(a, b) a##_##b
#define RW(name) RW_JOIN(RW_NAME, name) /* a function of the module */

#ifdef __cplusplus
#define RW_EXPORT extern "C"
#else
#define RW_EXPORT
#endif

static long rw_count;                     /* of a point: evaluations, or operations on a tape */
static double rw_floor[RW_N];             /* a parameter counts as at least so large where its size scales a step */
static double rw_middle[RW_N];            /* of its range */
static int rw_wanted[RW_N];               /* differentiated */

RW_EXPORT void rw_prepare(const double *floor, const double *middle, const int *wanted)
{
    int k;
    for (k = 0; k < RW_N; k++) {
        rw_floor[k] = floor[k];
        rw_middle[k] = middle[k];
        rw_wanted[k] = wanted[k];
    }
}

#define RW_POINTS(point, waiting, carried) \
    for (i = 0; i < n; i++) { \
        double q[RW_N]; \
        int k; \
        for (k = 0; k < RW_N; k++) { \
            q[k] = p[i * RW_N + (size_t)k] waiting; \
        } \
        failed[i] = point(q, start[i], y + i * RW_M, jac + i * RW_M * RW_N); \
        count[i] = rw_count; \
        carried; \
    }

#define RW_ROW(point) \
    RW_EXPORT void rw_row_##point(size_t n, const double *p, const double *start, int dependent, double *y, \
                                  double *jac, int *failed, long *count) \
    { \
        double carry = 0.0; \
        size_t i; \
        if (dependent) { \
            RW_POINTS(point, + carry, carry = failed[i] ? 0.0 : 0.0 * y[i * RW_M]) \
        } else { \
            RW_POINTS(point, , (void)carry) \
        } \
    }

#endif
