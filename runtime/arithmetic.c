/* SPDX-License-Identifier: 0BSD */
/* Small operations that C's maths library lacks. NaN goes through. */

static double rw_sign(double a)
{
    return a > 0.0 ? 1.0 : a < 0.0 ? -1.0 : a;
}

static double rw_min(double a, double b)
{
    return a <= b ? a : b < a ? b : (double)NAN;
}

static double rw_max(double a, double b)
{
    return a >= b ? a : b > a ? b : (double)NAN;
}
