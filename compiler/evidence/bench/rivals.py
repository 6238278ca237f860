"""Rows in Python: what a user reaches for. Each is a function of a Problem that returns run(n) -> (y, jac, failed).

Formulas come from `plain.py`; starts and tolerances are the best that each method honestly has.
"""

import importlib.util
import warnings

import numpy as np

NEAR = 4.0*np.finfo(float).eps   # the tightest relative tolerance that the root finders accept
STILL = 1e-10                    # a Newton step below this that does not halve the one before is rounding
ENTERED = 2.0**-40               # share of the bracket by which an open end is entered
STEPS = 100
WHOLE = ("newton_array", "find_root", "jax_implicit", "jax_forward")      # rows over all points at once


class Absent(Exception):
    """A row cannot run here; the message says why."""


def _formulas(problem, library, **names):
    namespace = dict(names)
    exec(compile(problem.texts[library], f"{problem.name} for {library}", "exec"), namespace)      # text of our own
    return namespace


def _need(module):
    if importlib.util.find_spec(module) is None:
        raise Absent("not installed")


def _math(problem):
    import math

    return _formulas(problem, "math", m=math)


def _numpy(problem):
    _need("scipy")
    from scipy import special

    return _formulas(problem, "numpy", m=np, special=special)


def _entered(problem, low, high):
    width = high - low
    return low + ENTERED*width*problem.open_ends[0], high - ENTERED*width*problem.open_ends[1]


def _scalar(problem, find):
    """Point by point: find(formulas, p, start) -> root, then outputs and the implicit rule."""
    formulas = _math(problem)
    outputs, jacobian = formulas["outputs"], formulas["jacobian"]
    m, n = len(problem.results), problem.points.shape[1]
    lists = problem.points.tolist()

    def run(count):
        y, jac, failed = np.full((count, m), np.nan), np.full((count, m*n), np.nan), np.zeros(count, bool)
        for i in range(count):
            p = lists[i]
            try:
                root = find(formulas, p, problem.warm[i])
                y[i] = (root, *outputs(root, *p))
                jac[i] = jacobian(root, *p)
            except (ValueError, RuntimeError, ArithmeticError, TypeError):
                failed[i] = True
        return y, jac.reshape(count, m, n), failed
    return run


def brentq(problem):
    _need("scipy")
    from scipy import optimize

    def find(formulas, p, _):
        low, high = _entered(problem, *formulas["bracket"](*p))
        return optimize.brentq(formulas["g"], low, high, args=tuple(p), xtol=5e-324, rtol=NEAR)
    return _scalar(problem, find)


def newton_scalar(problem):
    _need("scipy")
    from scipy import optimize

    def find(formulas, p, start):
        return optimize.newton(formulas["g"], start, fprime=formulas["slope"], args=tuple(p),
                               tol=5e-324, rtol=STILL, maxiter=STEPS)
    return _scalar(problem, find)


def _vectorised(problem, find):
    formulas = _numpy(problem)
    m, n = len(problem.results), problem.points.shape[1]

    def run(count):
        columns = [np.ascontiguousarray(column) for column in problem.points[:count].T]
        with np.errstate(all="ignore"), warnings.catch_warnings():
            warnings.simplefilter("ignore")
            root, good = find(formulas, columns, problem.warm[:count])
            y = np.stack(np.broadcast_arrays(root, *formulas["outputs"](root, *columns)), 1)
            jac = np.stack(np.broadcast_arrays(root, *formulas["jacobian"](root, *columns))[1:], 1)
        return y, jac.reshape(count, m, n), ~good
    return run


def newton_array(problem):
    _need("scipy")
    from scipy import optimize

    def find(formulas, columns, start):
        result = optimize.newton(formulas["g"], start, fprime=formulas["slope"],
                                 args=tuple(columns), tol=1e-15*float(np.median(np.abs(start))), maxiter=20,
                                 full_output=True, disp=False)
        return result[0], np.isfinite(result[0])
    return _vectorised(problem, find)


def find_root(problem):
    _need("scipy")
    try:
        from scipy.optimize import elementwise
    except ImportError:
        raise Absent("needs SciPy 1.15") from None

    def find(formulas, columns, _):
        ends = _entered(problem, *map(np.asarray, formulas["bracket"](*columns)))
        low, high = (np.broadcast_to(end, len(columns[0])) for end in ends)
        found = elementwise.find_root(formulas["g"], (low, high), args=tuple(columns),
                                      tolerances={"xatol": 0.0, "xrtol": NEAR, "fatol": 0.0, "frtol": 0.0})
        return found.x, found.success
    return _vectorised(problem, find)


def autograd(problem):
    """Newton's method with bisection, every operation on a general-purpose tape in Python."""
    _need("autograd")
    _need("scipy")
    import autograd.numpy as anp
    from autograd import make_vjp
    from autograd.scipy import special

    formulas = _formulas(problem, "autograd", m=anp, special=special)
    residual = formulas["residual"]
    m, n = len(problem.results), problem.points.shape[1]

    def solve(p, start):
        a, b = _entered(problem, *formulas["bracket"](*p))
        negative = residual(a, *p)[0] < 0.0
        x, before = start, b - a
        for _ in range(STEPS):
            g, slope = residual(x, *p)
            if g == 0.0:
                break
            a, b = (x, b) if (g < 0.0) == negative else (a, x)
            step = g/slope
            following = x - step
            if abs(step) <= NEAR*abs(x) or abs(step) <= STILL*abs(x) and abs(2.0*step) > abs(before):
                return following
            if not a < following < b or abs(2.0*step) > abs(before):
                step = 0.5*(b - a)
                following = a + step
            before, x = step, following
        return x

    def results(p, start):
        p = [p[k] for k in range(n)]
        x = solve(p, start)
        return anp.array([x, *formulas["outputs"](x, *p)])

    units = np.eye(m)
    taped = make_vjp(results)

    def run(count):
        y, jac, failed = np.full((count, m), np.nan), np.full((count, m, n), np.nan), np.zeros(count, bool)
        with np.errstate(all="ignore"), warnings.catch_warnings():
            warnings.simplefilter("ignore")
            for i in range(count):
                back, y[i] = taped(problem.points[i], problem.warm[i])
                jac[i] = [back(unit) for unit in units]
        return y, jac, failed
    return run


def _jax(problem, through):
    """Newton's method with bisection, jitted over all points at once, in double precision."""
    _need("jax")
    import jax
    import jax.numpy as jnp
    from jax.scipy import special

    jax.config.update("jax_enable_x64", True)
    formulas = _formulas(problem, "jax", m=jnp, special=special)
    residual = formulas["residual"]
    m, n = len(problem.results), problem.points.shape[1]

    def solve(p, start):
        low, high = (jnp.asarray(end, float) for end in _entered(problem, *formulas["bracket"](*p)))
        negative = residual(low, *p)[0] < 0.0

        def going(state):
            k, _, _, _, _, done = state
            return (k < STEPS) & ~done

        def advance(state):
            k, x, a, b, before, _ = state
            g, slope = residual(x, *p)
            left = (g < 0.0) == negative
            a, b = jnp.where(left, x, a), jnp.where(left, b, x)
            step = g/slope
            good = (x - step > a) & (x - step < b) & (jnp.abs(2.0*step) <= jnp.abs(before))
            following = jnp.where(good, x - step, a + 0.5*(b - a))
            earlier, before = before, jnp.where(good, step, 0.5*(b - a))
            still = (jnp.abs(step) <= STILL*jnp.abs(x)) & (jnp.abs(2.0*step) > jnp.abs(earlier))
            done = (jnp.abs(step) <= NEAR*jnp.abs(x)) | (g == 0.0) | still
            following = jnp.where(done, x - step, following)
            return k + 1, following, a, b, before, done

        return jax.lax.while_loop(going, advance, (0, start, low, high, high - low, jnp.array(False)))[1]

    def results(p, start):
        p = [p[k] for k in range(n)]
        x = solve(p, start)
        return jnp.stack([x, *(jnp.asarray(value, float) for value in formulas["outputs"](x, *p))])

    def implicit(p, start):
        y = results(p, start)
        flat = formulas["jacobian"](y[0], *(p[k] for k in range(n)))
        return y, jnp.stack([jnp.asarray(entry, float) for entry in flat]).reshape(m, n)

    def forward(p, start):
        return results(p, start), jax.jacfwd(results)(p, start)

    both = jax.jit(jax.vmap(forward if through else implicit))

    def run(count):
        y, jac = both(problem.points[:count], problem.warm[:count])
        y, jac = np.asarray(y), np.asarray(jac)
        return y, jac, ~np.isfinite(y[:, 0])
    return run


def jax_implicit(problem):
    return _jax(problem, False)


def jax_forward(problem):
    return _jax(problem, True)
