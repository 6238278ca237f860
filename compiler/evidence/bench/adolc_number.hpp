// SPDX-License-Identifier: 0BSD
// Numbers on the tape of ADOL-C, a C++ library, as `through.cpp` takes them. What the library has not is left out: a
// module that needs it does not compile, and its row says so.
#include <adolc/adolc.h>
#include <math.h>

typedef adouble real;

static inline double rw_value(const adouble &a) { return a.value(); }

inline bool isfinite(const adouble &a) { return std::isfinite(a.value()); }
inline bool isnan(const adouble &a) { return std::isnan(a.value()); }
inline bool isunordered(const adouble &a, const adouble &b) { return std::isunordered(a.value(), b.value()); }
inline adouble copysign(const adouble &a, const adouble &b)
{
    return std::signbit(a.value()) == std::signbit(b.value()) ? adouble(a) : adouble(-a);
}
inline adouble nextafter(const adouble &a, const adouble &b)
{
    return a + (std::nextafter(a.value(), b.value()) - a.value());
}
inline adouble ldexp(const adouble &a, int n) { return a * std::ldexp(1.0, n); }
inline adouble frexp(const adouble &a, int *n) { return adouble(std::frexp(a.value(), n)); }
inline adouble log2(const adouble &a) { return log(a) * 1.4426950408889634074; }
inline adouble hypot(const adouble &a, const adouble &b) { return sqrt(a * a + b * b); }

inline void rw_copy(int64_t *bits, const adouble *a, std::size_t)
{
    const double value = a->value();
    std::memcpy(bits, &value, sizeof value);
}
inline void rw_copy(adouble *a, const int64_t *bits, std::size_t)
{
    double value;
    std::memcpy(&value, bits, sizeof value);
    *a = value;
}

static void rw_independent(int n, const double p[], adouble x[])
{
    trace_on(1, 1); /* keeping the values that a sweep back needs: no second run */
    for (int k = 0; k < n; k++) {
        x[k] <<= p[k];
    }
}

static inline long rw_operations() { return 0; }

static void rw_jacobian(adouble y[], double jac[], bool)
{
    double value, unit[RW_M][RW_M], *units[RW_M], *rows[RW_M];
    for (int k = 0; k < RW_M; k++) {
        y[k] >>= value;
        for (int j = 0; j < RW_M; j++) {
            unit[k][j] = j == k;
        }
        units[k] = unit[k];
        rows[k] = jac + RW_N * k;
    }
    trace_off();
    if (RW_M == 1) {
        fos_reverse(1, RW_M, RW_N, unit[0], jac);
    } else {
        fov_reverse(1, RW_M, RW_N, RW_M, units, rows);
    }
}
