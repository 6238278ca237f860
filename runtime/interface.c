/* SPDX-License-Identifier: 0BSD */

#if RW_KNOWN
/* Fills known as the derivatives want it, at a given root. */
static void rw_recall(const double p[], double root, double known[])
{
#if RW_CAREFUL
    double slope, bound, slope_rounding, curvature;
#if RW_STILL
    rw_still(p, known);
#endif
    (void)rw_trial(p, known, root, &slope, &bound, &slope_rounding, &curvature);
#else
    double slope, bound;
#if RW_STILL
    rw_still(p, known);
#endif
    (void)rw_trial(p, known, root, &slope, &bound);
#endif
}

#endif
static int rw_find(const double p[], double start, double known[], rw_point *r)
{
    int k, finite = 1, outside = rw_outside(p);
#if RW_PLANNED
    r->iterations = 0;
    r->evaluations = 0;
    if (!outside && rw_approach(p, start, known, r) >= 0) {
#if RW_OUTPUTS
        rw_outputs(p, known, r->y[0], r->y);
#endif
        return r->status;
    }
    if (outside) {
        rw_clear(r);
    }
#else
    rw_clear(r);
#endif
    for (k = 0; k < RW_N; k++) {
        finite = finite && isfinite(p[k]);
    }
    if (finite) {
#if RW_PLANNED
        rw_resume(p, start, r);
#else
        rw_locate(p, start, r);
#endif
    }
    if (r->status >= 0) {
        r->status |= outside ? RW_OUTSIDE_RANGE : 0;
#if RW_KNOWN
        rw_recall(p, r->y[0], known);
#endif
#if RW_OUTPUTS
        rw_outputs(p, known, r->y[0], r->y);
#endif
    }
    return r->status;
}

int rw_solve(const double p[RW_N], double start, rw_point *r)
{
#if RW_KNOWN
    double known[RW_K];
#endif
    return rw_find(p, start, known, r);
}

#if RW_JACOBIAN
int rw_solve_jacobian(const double p[RW_N], double start, rw_point *r, double jac[RW_M*RW_N])
{
#if RW_KNOWN
    double known[RW_K];
#endif
    const int status = rw_find(p, start, known, r);
    int k;
    if (status >= 0 && (status & RW_FLAT) == 0) {
        rw_partials(p, known, r->y[0], jac);
    } else {
        for (k = 0; k < RW_M*RW_N; k++) {
            jac[k] = (double)NAN;
        }
    }
    return status;
}

/* True where the root has no usable slope: derivatives there are NaN. Same test as in the solver. */
static int rw_without_slope(const double p[], double root)
{
    double slope, slope_rounding, curvature;
    const double g = rw_residual(p, root, &slope);
    const double rounding = rw_rounding(p, root, &slope_rounding, &curvature);
    return rw_is_flat(rw_bend(p, root, g, slope, rounding, slope_rounding, curvature));
}

void rw_jacobian(const double p[RW_N], double root, double jac[RW_M*RW_N])
{
    int k;
    if (rw_without_slope(p, root)) {
        for (k = 0; k < RW_M*RW_N; k++) {
            jac[k] = (double)NAN;
        }
    } else {
#if RW_KNOWN
        double known[RW_K];
        rw_recall(p, root, known);
#endif
        rw_partials(p, known, root, jac);
    }
}

void rw_tangent(const double p[RW_N], double root, const double p_dot[RW_N], double y_dot[RW_M])
{
    double jac[RW_M*RW_N];
    int i, k;
    rw_jacobian(p, root, jac);
    for (i = 0; i < RW_M; i++) {
        y_dot[i] = jac[RW_N*i]*p_dot[0];
        for (k = 1; k < RW_N; k++) {
            y_dot[i] += jac[RW_N*i + k]*p_dot[k];
        }
    }
}

void rw_adjoint(const double p[RW_N], double root, const double y_bar[RW_M], double p_bar[RW_N])
{
    double jac[RW_M*RW_N];
    int i, k;
    rw_jacobian(p, root, jac);
    for (k = 0; k < RW_N; k++) {
        for (i = 0; i < RW_M; i++) {
            p_bar[k] += jac[RW_N*i + k]*y_bar[i];
        }
    }
}
#endif

#if RW_HESSIAN
void rw_hessian(const double p[RW_N], double root, double hess[RW_M*RW_N*RW_N])
{
    int k;
    if (rw_without_slope(p, root)) {
        for (k = 0; k < RW_M*RW_N*RW_N; k++) {
            hess[k] = (double)NAN;
        }
    } else {
#if RW_KNOWN
        double known[RW_K];
        rw_recall(p, root, known);
#endif
        rw_second_partials(p, known, root, hess);
    }
}

void rw_tangent_adjoint(const double p[RW_N], double root, const double p_dot[RW_N], const double y_bar[RW_M],
                        double p_bar_dot[RW_N])
{
    double hess[RW_M*RW_N*RW_N];
    int i, j, k;
    rw_hessian(p, root, hess);
    for (i = 0; i < RW_N; i++) {
        for (k = 0; k < RW_M; k++) {
            double along = 0.0;
            for (j = 0; j < RW_N; j++) {
                along += hess[(RW_N*k + i)*RW_N + j]*p_dot[j];
            }
            p_bar_dot[i] += along*y_bar[k];
        }
    }
}
#endif

size_t rw_solve_many(size_t n, const double *const p[RW_N], const ptrdiff_t stride[RW_N], const double *start,
#if RW_JACOBIAN
                     double *const y[RW_M], double *error_bound, double *const jac[RW_M*RW_N], int *status)
#else
                     double *const y[RW_M], double *error_bound, int *status)
#endif
{
    size_t i, unsolved = 0;
    for (i = 0; i < n; i++) {
#if RW_JACOBIAN
        double q[RW_N], d[RW_M*RW_N];
#else
        double q[RW_N];
#endif
        rw_point r;
        int k;
        for (k = 0; k < RW_N; k++) {
            q[k] = p[k][(ptrdiff_t)i*stride[k]];
        }
#if RW_JACOBIAN
        if (jac != NULL) {
            rw_solve_jacobian(q, start != NULL ? start[i] : (double)NAN, &r, d);
            for (k = 0; k < RW_M*RW_N; k++) {
                if (jac[k] != NULL) {
                    jac[k][i] = d[k];
                }
            }
        } else {
            rw_solve(q, start != NULL ? start[i] : (double)NAN, &r);
        }
#else
        rw_solve(q, start != NULL ? start[i] : (double)NAN, &r);
#endif
        for (k = 0; k < RW_M; k++) {
            if (y[k] != NULL) {
                y[k][i] = r.y[k];
            }
        }
        if (error_bound != NULL) {
            error_bound[i] = r.error_bound;
        }
        if (status != NULL) {
            status[i] = r.status;
        }
        unsolved += r.status < 0;
    }
    return unsolved;
}
