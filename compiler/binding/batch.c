/* Solves count points in a row; jac may be NULL. Used by the compiler's own commands; not part of an emitted module. */
#include "rw_name.h"

#include <math.h>

void rw_batch(size_t count, const double *p, rw_point *r, double *jac);

void rw_batch(size_t count, const double *p, rw_point *r, double *jac)
{
    size_t i;
    for (i = 0; i < count; i++) {
        if (jac != NULL) {
            rw_solve_jacobian(p + i*RW_N, NAN, r + i, jac + i*(RW_M*RW_N));
        } else {
            rw_solve(p + i*RW_N, NAN, r + i);
        }
    }
}
