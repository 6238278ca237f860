// SPDX-License-Identifier: 0BSD
// Numbers on the operation tape, as `through.cpp` takes them.
#include "tape.hpp"
#include "numbers.hpp"

#define RW_TAPED 1
#define RW_PITFALLS 1

static inline double rw_value(const real &a) { return a.value; }

static void rw_jacobian(const real y[], double jac[], bool forward)
{
    if (forward) {
        rw_forward<RW_N>(RW_M, y, jac);
    } else {
        rw_reverse<RW_M>(y, jac);
    }
}

RW_EXPORT long rw_tape_bytes(long operations) { return rw_bytes(operations, RW_M); }
