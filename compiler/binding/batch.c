/* Runs the functions of a module over many points, for the compiler's own commands and for arrays in Python; not part
   of an emitted module. Column c of point i is in[c][i*stride[c]]: the parameters, then what the function takes
   besides. Row i of an array of results begins at out[k] + i times its length; NULL: not wanted. */
#include "rw_name.h"

#include <stddef.h>

#define RW_BATCH(what) \
    void rw_batch_##what(size_t first, size_t last, const double *const *in, const ptrdiff_t *stride, \
                         double *const *out, int *const *codes)
#define RW_ARGUMENTS size_t, size_t, const double *const *, const ptrdiff_t *, double *const *, int *const *

static void rw_gather(size_t i, const double *const *in, const ptrdiff_t *stride, int count, double *to)
{
    int k;
    for (k = 0; k < count; k++) {
        to[k] = in[k][(ptrdiff_t)i*stride[k]];
    }
}

void rw_batch_solve(RW_ARGUMENTS);

/* Besides: start. Results: unknown and outputs, error_bound, jacobian; codes: status, iterations. */
RW_BATCH(solve)
{
    size_t i;
    for (i = first; i < last; i++) {
        double q[RW_N + 1];
        rw_point r;
        int k;
        rw_gather(i, in, stride, RW_N + 1, q);
#if RW_ORDER >= 1
        if (out[RW_M + 1] != NULL) {
            rw_solve_jacobian(q, q[RW_N], &r, out[RW_M + 1] + i*(RW_M*RW_N));
        } else {
            rw_solve(q, q[RW_N], &r);
        }
#else
        rw_solve(q, q[RW_N], &r);
#endif
        for (k = 0; k < RW_M; k++) {
            out[k][i] = r.y[k];
        }
        out[RW_M][i] = r.error_bound;
        codes[0][i] = r.status;
        codes[1][i] = r.iterations;
    }
}

#if RW_ORDER >= 1
void rw_batch_jacobian(RW_ARGUMENTS);
void rw_batch_tangent(RW_ARGUMENTS);
void rw_batch_adjoint(RW_ARGUMENTS);

/* Besides: root. */
RW_BATCH(jacobian)
{
    size_t i;
    (void)codes;
    for (i = first; i < last; i++) {
        double q[RW_N + 1];
        rw_gather(i, in, stride, RW_N + 1, q);
        rw_jacobian(q, q[RW_N], out[0] + i*(RW_M*RW_N));
    }
}

/* Besides: root, p_dot. */
RW_BATCH(tangent)
{
    size_t i;
    (void)codes;
    for (i = first; i < last; i++) {
        double q[RW_N + 1 + RW_N];
        rw_gather(i, in, stride, RW_N + 1 + RW_N, q);
        rw_tangent(q, q[RW_N], q + RW_N + 1, out[0] + i*RW_M);
    }
}

/* Besides: root, y_bar. */
RW_BATCH(adjoint)
{
    size_t i;
    (void)codes;
    for (i = first; i < last; i++) {
        double q[RW_N + 1 + RW_M];
        int k;
        rw_gather(i, in, stride, RW_N + 1 + RW_M, q);
        for (k = 0; k < RW_N; k++) {
            out[0][i*RW_N + (size_t)k] = 0.0;
        }
        rw_adjoint(q, q[RW_N], q + RW_N + 1, out[0] + i*RW_N);
    }
}
#endif

#if RW_ORDER >= 2
void rw_batch_hessian(RW_ARGUMENTS);
void rw_batch_tangent_adjoint(RW_ARGUMENTS);

/* Besides: root. */
RW_BATCH(hessian)
{
    size_t i;
    (void)codes;
    for (i = first; i < last; i++) {
        double q[RW_N + 1];
        rw_gather(i, in, stride, RW_N + 1, q);
        rw_hessian(q, q[RW_N], out[0] + i*(RW_M*RW_N*RW_N));
    }
}

/* Besides: root, p_dot, y_bar. */
RW_BATCH(tangent_adjoint)
{
    size_t i;
    (void)codes;
    for (i = first; i < last; i++) {
        double q[RW_N + 1 + RW_N + RW_M];
        int k;
        rw_gather(i, in, stride, RW_N + 1 + RW_N + RW_M, q);
        for (k = 0; k < RW_N; k++) {
            out[0][i*RW_N + (size_t)k] = 0.0;
        }
        rw_tangent_adjoint(q, q[RW_N], q + RW_N + 1, q + RW_N + 1 + RW_N, out[0] + i*RW_N);
    }
}
#endif
