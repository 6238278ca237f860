# SPDX-License-Identifier: 0BSD


#if KNOWN
def _recall(p, root):
    """What the derivatives share with the certificate of a root."""
    known = [math.nan] * K
#if STILL
    known[:STANDING] = _still(p)
#endif
    _trial(p, known, root)
    return known


#endif
def _find(p, start, known):
    r = Point()
    outside = _outside(p)
#if PLANNED
    if not outside:
        r.status = _approach(p, start, known, r)
    if r.status < 0 and all(math.isfinite(value) for value in p):
        r.status = _resume(p, start, r)
#if KNOWN
        if r.status >= 0:
            known[:] = _recall(p, r.y[0])
#endif
#else
    if all(math.isfinite(value) for value in p):
        r.status = _locate(p, start, r)
#endif
    if r.status >= 0:
        r.status |= OUTSIDE_RANGE if outside else 0
#if OUTPUTS
        r.y[1:] = _outputs(p, known, r.y[0])
#endif
    return r


def solve(p, start=math.nan):
    """Root and outputs at the parameters p; start: a warm start, NaN for none. Returns a Point."""
#if KNOWN
    return _find(_parameters(p), start, [math.nan] * K)
#else
    return _find(_parameters(p), start)
#endif


#if JACOBIAN
def solve_jacobian(p, start=math.nan):
    """A Point, and the jacobian as M rows of N; NaN where there is no root or no slope."""
    p = _parameters(p)
#if KNOWN
    known = [math.nan] * K
    r = _find(p, start, known)
#else
    r = _find(p, start)
#endif
    if r.status < 0 or r.status & FLAT:
        return r, [[math.nan]*N for _ in range(M)]
    return r, _partials(p, known, r.y[0])


def _without_slope(p, root):
    """True where the root has no usable slope: derivatives there are NaN. Same test as in the solver."""
    g, slope = _residual(p, root)
    return _is_flat(_bend(p, root, g, slope, *_rounding(p, root)))


def jacobian(p, root):
    """Derivatives of the M results with respect to the N parameters at a given root, as M rows of N."""
    p = _parameters(p)
    if _without_slope(p, root):
        return [[math.nan]*N for _ in range(M)]
#if KNOWN
    return _partials(p, _recall(p, root), root)
#else
    return _partials(p, root)
#endif


def tangent(p, root, p_dot):
    """y_dot of the M results for the direction p_dot of the N parameters."""
    y_dot = []
    for row in jacobian(p, root):
        total = row[0]*p_dot[0]
        for d, s in zip(row[1:], p_dot[1:]):
            total += d*s
        y_dot.append(total)
    return y_dot


def adjoint(p, root, y_bar, p_bar):
    """Adds the adjoint of the N parameters for the weights y_bar of the M results into the list p_bar; returns it."""
    for row, weight in zip(jacobian(p, root), y_bar):
        for k, d in enumerate(row):
            p_bar[k] += d*weight
    return p_bar


#endif
#if HESSIAN
def hessian(p, root):
    """Second derivatives of the M results with respect to the N parameters at a given root, as M matrices of N by N."""
    p = _parameters(p)
    if _without_slope(p, root):
        return [[[math.nan]*N for _ in range(N)] for _ in range(M)]
#if KNOWN
    return _second_partials(p, _recall(p, root), root)
#else
    return _second_partials(p, root)
#endif


def tangent_adjoint(p, root, p_dot, y_bar, p_bar_dot):
    """Adds the derivative of what `adjoint` adds, in the direction p_dot of the parameters, into the list p_bar_dot;
    returns it."""
    hess = hessian(p, root)
    for i in range(N):
        for matrix, weight in zip(hess, y_bar):
            along = 0.0
            for d, s in zip(matrix[i], p_dot):
                along += d*s
            p_bar_dot[i] += along*weight
    return p_bar_dot


#endif
def _parameters(p):
    p = tuple(float(value) for value in p)
    if len(p) != N:
        raise ValueError(f"{N} parameters wanted, {len(p)} given")
    return p
