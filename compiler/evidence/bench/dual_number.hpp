// SPDX-License-Identifier: 0BSD
// Dual numbers, as `through.cpp` takes them.
#include "dual.hpp"
#include "numbers.hpp"

static inline double rw_value(const real &a) { return a.value; }
static inline long rw_operations() { return 0; }

static void rw_jacobian(const real y[], double jac[], bool)
{
    for (int k = 0; k < RW_M; k++) {
        for (int j = 0; j < RW_N; j++) {
            jac[k * RW_N + j] = y[k].dot[j];
        }
    }
}
