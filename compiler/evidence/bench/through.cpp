// SPDX-License-Identifier: 0BSD
// Differentiation through the iterations: the module's own loop, and a textbook one, over a number that carries
// derivatives. RW_NUMBER is its header. RW_PASSIVE and RW_RECORDED are the text of the plain module, over doubles and
// over that number; in the second one the bounds of rounding errors, the range and the switches, which only decide, are
// left to the first: they cost no derivative, as a careful user would have it. RW_PLANNED is the module as it ships.
#include <cfloat>
#include <cmath>
#include <cstddef>
#include <cstdint>
#include <cstring>

#include "loop.h"
#include RW_NUMBER

namespace passive {
#include RW_PASSIVE
}
namespace planned {
#include RW_PLANNED
}

static void rw_values(const real p[], double q[])
{
    for (int k = 0; k < RW_N; k++) {
        q[k] = rw_value(p[k]);
    }
}

static real RW(rounding)(const real p[], const real &x, real *slope_rounding, real *curvature)
{
    double q[RW_N], s, c;
    rw_values(p, q);
    const double rounding = passive::RW(rounding)(q, rw_value(x), &s, &c);
    *slope_rounding = s;
    *curvature = c;
    return rounding;
}

static int RW(outside)(const real p[])
{
    double q[RW_N];
    rw_values(p, q);
    return passive::RW(outside)(q);
}

#if RW_SWITCHES
static int RW(kink)(const real p[], const real &x, const real &error_bound)
{
    double q[RW_N];
    rw_values(p, q);
    return passive::RW(kink)(q, rw_value(x), rw_value(error_bound));
}
#endif

#define double real
#define memcpy rw_copy
#include RW_RECORDED
#include "textbook.c"

static void rw_results(const double p[], double root, double y[])
{
    y[0] = root;
#if RW_M > 1
    RW(outputs)(p, root, y);
#endif
}
#undef memcpy
#undef double

static int rw_by_loop(const real p[], double start, real y[])
{
    RW(point) r;
    RW(solve)(p, start, &r);
    for (int k = 0; k < RW_M; k++) {
        y[k] = r.y[k];
    }
    return r.status < 0;
}

static int rw_by_textbook(const real p[], double start, real y[])
{
    real root;
    const int failed = rw_textbook(p, start, 100, &root);
    rw_results(p, root, y);
    return failed;
}

// Solved without a tape; then one step of Newton's method on it, from the root as a constant.
static int rw_by_last_step(const real p[], double start, real y[])
{
    double q[RW_N];
    planned::RW(point) r;
    real slope;
    rw_values(p, q);
    planned::RW(solve)(q, start, &r);
    const real g = RW(residual)(p, real(r.y[0]), &slope);
    rw_results(p, real(r.y[0]) - g / rw_value(slope), y);
    return r.status < 0;
}

typedef int (*rw_way)(const real p[], double start, real y[]);

template <rw_way way, bool forward> static int rw_through(const double q[], double start, double y[], double jac[])
{
    real p[RW_N], results[RW_M];
    rw_independent(RW_N, q, p);
    const int failed = way(p, start, results);
    rw_jacobian(results, jac, forward);
    for (int k = 0; k < RW_M; k++) {
        y[k] = rw_value(results[k]);
    }
    rw_count = rw_operations();
    return failed;
}

#define RW_WAY(name, way, forward) \
    static int name(const double q[], double start, double y[], double jac[]) \
    { \
        return rw_through<way, forward>(q, start, y, jac); \
    } \
    RW_ROW(name)

RW_WAY(loop, rw_by_loop, false)
RW_WAY(textbook, rw_by_textbook, false)
#if RW_TAPED
RW_WAY(loop_forward, rw_by_loop, true)
RW_WAY(last_step, rw_by_last_step, false)
#endif
#if RW_PITFALLS
#include "pitfalls.hpp"
#endif
