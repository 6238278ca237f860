/* SPDX-License-Identifier: 0BSD */
/* The operations of an emitted C module over a number that carries derivatives.

   Include it after the definition of `real`: a number with a member `value`, made from a double by a constructor, and
   by
       rw_make(value, a, da)           the value of a function of a, with its derivative da
       rw_make(value, a, da, b, db)    the value of a function of a and b, with its derivatives da and db
   Then `#define double real` and the text of a module make the very same solver over that number: values, comparisons
   and branches are those of the doubles, operation for operation. */
#ifndef RW_NUMBERS_HPP
#define RW_NUMBERS_HPP

#include <cfloat>
#include <cmath>
#include <cstddef>
#include <cstdint>
#include <cstring>
#include <float.h>
#include <math.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>

inline real operator-(const real &a) { return rw_make(-a.value, a, -1.0); }

inline real operator+(const real &a, const real &b) { return rw_make(a.value + b.value, a, 1.0, b, 1.0); }
inline real operator+(const real &a, double b) { return rw_make(a.value + b, a, 1.0); }
inline real operator+(double a, const real &b) { return rw_make(a + b.value, b, 1.0); }

inline real operator-(const real &a, const real &b) { return rw_make(a.value - b.value, a, 1.0, b, -1.0); }
inline real operator-(const real &a, double b) { return rw_make(a.value - b, a, 1.0); }
inline real operator-(double a, const real &b) { return rw_make(a - b.value, b, -1.0); }

inline real operator*(const real &a, const real &b) { return rw_make(a.value * b.value, a, b.value, b, a.value); }
inline real operator*(const real &a, double b) { return rw_make(a.value * b, a, b); }
inline real operator*(double a, const real &b) { return rw_make(a * b.value, b, a); }

inline real operator/(const real &a, const real &b)
{
    const double inverse = 1.0 / b.value, value = a.value / b.value;
    return rw_make(value, a, inverse, b, -value * inverse);
}
inline real operator/(const real &a, double b) { return rw_make(a.value / b, a, 1.0 / b); }
inline real operator/(double a, const real &b)
{
    const double value = a / b.value;
    return rw_make(value, b, -value / b.value);
}

inline real &operator+=(real &a, const real &b) { return a = a + b; }
inline real &operator-=(real &a, const real &b) { return a = a - b; }
inline real &operator*=(real &a, const real &b) { return a = a * b; }
inline real &operator/=(real &a, const real &b) { return a = a / b; }

#define RW_COMPARISON(op) \
    inline bool operator op(const real &a, const real &b) { return a.value op b.value; } \
    inline bool operator op(const real &a, double b) { return a.value op b; } \
    inline bool operator op(double a, const real &b) { return a op b.value; }
RW_COMPARISON(<)
RW_COMPARISON(<=)
RW_COMPARISON(>)
RW_COMPARISON(>=)
RW_COMPARISON(==)
RW_COMPARISON(!=)
#undef RW_COMPARISON

inline bool isfinite(const real &a) { return std::isfinite(a.value); }
inline bool isnan(const real &a) { return std::isnan(a.value); }
inline bool isunordered(const real &a, const real &b) { return std::isunordered(a.value, b.value); }

/* v is the value of the function at a.value, called x. */
#define RW_FUNCTION(name, derivative) \
    inline real name(const real &a) \
    { \
        const double x = a.value, v = std::name(x); \
        (void)x; \
        (void)v; \
        return rw_make(v, a, derivative); \
    }
RW_FUNCTION(fabs, x < 0.0 ? -1.0 : 1.0)
RW_FUNCTION(sqrt, 0.5 / v)
RW_FUNCTION(cbrt, 1.0 / (3.0 * v * v))
RW_FUNCTION(exp, v)
RW_FUNCTION(expm1, v + 1.0)
RW_FUNCTION(log, 1.0 / x)
RW_FUNCTION(log10, 0.43429448190325182765 / x)
RW_FUNCTION(log2, 1.4426950408889634074 / x)
RW_FUNCTION(log1p, 1.0 / (1.0 + x))
RW_FUNCTION(sin, std::cos(x))
RW_FUNCTION(cos, -std::sin(x))
RW_FUNCTION(tan, 1.0 + v * v)
RW_FUNCTION(asin, 1.0 / std::sqrt((1.0 - x) * (1.0 + x)))
RW_FUNCTION(acos, -1.0 / std::sqrt((1.0 - x) * (1.0 + x)))
RW_FUNCTION(atan, 1.0 / (1.0 + x * x))
RW_FUNCTION(sinh, std::cosh(x))
RW_FUNCTION(cosh, std::sinh(x))
RW_FUNCTION(tanh, 1.0 / (std::cosh(x) * std::cosh(x)))
RW_FUNCTION(asinh, 1.0 / std::hypot(1.0, x))
RW_FUNCTION(acosh, 1.0 / (std::sqrt(x - 1.0) * std::sqrt(x + 1.0)))
RW_FUNCTION(atanh, 1.0 / ((1.0 - x) * (1.0 + x)))
RW_FUNCTION(erf, 1.1283791670955125739 * std::exp(-x * x))
RW_FUNCTION(erfc, -1.1283791670955125739 * std::exp(-x * x))
#undef RW_FUNCTION

inline real hypot(const real &a, const real &b)
{
    const double v = std::hypot(a.value, b.value);
    return rw_make(v, a, a.value / v, b, b.value / v);
}

inline real atan2(const real &a, const real &b)
{
    const double r = std::hypot(a.value, b.value);
    return rw_make(std::atan2(a.value, b.value), a, b.value / r / r, b, -a.value / r / r);
}

inline real pow(const real &a, const real &b)
{
    const double v = std::pow(a.value, b.value);
    return rw_make(v, a, b.value * std::pow(a.value, b.value - 1.0), b, a.value > 0.0 ? v * std::log(a.value) : 0.0);
}
inline real pow(const real &a, double b) { return rw_make(std::pow(a.value, b), a, b * std::pow(a.value, b - 1.0)); }
inline real pow(double a, const real &b)
{
    const double v = std::pow(a, b.value);
    return rw_make(v, b, a > 0.0 ? v * std::log(a) : 0.0);
}

inline real fmin(const real &a, const real &b) { return b.value < a.value || std::isnan(a.value) ? b : a; }
inline real fmin(const real &a, double b) { return fmin(a, real(b)); }
inline real fmin(double a, const real &b) { return fmin(real(a), b); }
inline real fmax(const real &a, const real &b) { return b.value > a.value || std::isnan(a.value) ? b : a; }
inline real fmax(const real &a, double b) { return fmax(a, real(b)); }
inline real fmax(double a, const real &b) { return fmax(real(a), b); }

inline real copysign(const real &a, const real &b)
{
    return rw_make(std::copysign(a.value, b.value), a, std::signbit(a.value) == std::signbit(b.value) ? 1.0 : -1.0);
}
inline real nextafter(const real &a, const real &b) { return rw_make(std::nextafter(a.value, b.value), a, 1.0); }
inline real nextafter(const real &a, double b) { return nextafter(a, real(b)); }
inline real ldexp(const real &a, int n) { return rw_make(std::ldexp(a.value, n), a, std::ldexp(1.0, n)); }
inline real frexp(const real &a, int *n) { return real(std::frexp(a.value, n)); }

/* The bits of a number, and a number from bits. No derivative passes: bits have none. */
inline void rw_copy(int64_t *bits, const real *a, std::size_t) { std::memcpy(bits, &a->value, sizeof *bits); }
inline void rw_copy(real *a, const int64_t *bits, std::size_t)
{
    double value;
    std::memcpy(&value, bits, sizeof value);
    *a = real(value);
}

#endif
