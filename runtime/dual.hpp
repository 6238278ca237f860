/* SPDX-License-Identifier: 0BSD */
/* Dual numbers: a value and its derivatives with respect to RW_N inputs, carried along by every operation. */
#ifndef RW_DUAL_HPP
#define RW_DUAL_HPP

struct real {
    double value;
    double dot[RW_N];
    real() : value(0.0), dot() {}
    real(double v) : value(v), dot() {}
};

static inline real rw_make(double value, const real &a, double da)
{
    real r;
    r.value = value;
    for (int j = 0; j < RW_N; j++) {
        r.dot[j] = da * a.dot[j];
    }
    return r;
}

static inline real rw_make(double value, const real &a, double da, const real &b, double db)
{
    real r;
    r.value = value;
    for (int j = 0; j < RW_N; j++) {
        r.dot[j] = da * a.dot[j] + db * b.dot[j];
    }
    return r;
}

/* x are the n inputs, with the values p. */
static void rw_independent(int n, const double p[], real x[])
{
    for (int k = 0; k < n; k++) {
        x[k] = real(p[k]);
        x[k].dot[k] = 1.0;
    }
}

#endif
