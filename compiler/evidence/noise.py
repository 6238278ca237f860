"""The noise of a root: how far one rounding of every operation of the residual can move it.

The sum over all operations v of the author's residual, and over its rounded constants, of |dg/dv| ulp(v), divided by
|g_x|. The derivatives are found without the compiler's rules: every operation's own by a difference at high precision,
then one sweep backwards over the author's trees.
"""

import math

import flint

from rootwright.calculus.balls import ball, precision
from rootwright.evidence.trees import CONSTANT, run
from rootwright.operations import OPERATIONS

BITS = 256
SHIFT = -80                     # local differences: shift of an argument, 2^SHIFT of its size
_ROUNDS_NOTHING = ("input", "neg", "abs", "sign", "min", "max", "where")


def noise(place, x):
    """(noise, slope) as floats: noise of the root x (an exact ball), infinite where there is no slope, and |g_x| there.

    `place` holds the author's expressions at the parameters (`trees.Place`).
    """
    total, slope = sensitivity(place, x)
    return (total / slope if slope > 0.0 and math.isfinite(total) else math.inf), slope


def sensitivity(place, x, target=None):
    """(sum of |dg/dv| ulp(v), |g_x|) at x, as floats, for the residual g or another target of the trees."""
    trees = place.trees
    target = trees.residual if target is None else target
    values = place.values(target, x, BITS)
    _, fixed, moving = trees.order(target)
    adjoints = {target: 1.0}
    total = 0.0
    with precision(BITS):
        for k in sorted((*fixed, *moving), reverse=True):
            step, adjoint = trees.steps[k], adjoints.get(k, 0.0)
            if not adjoint or OPERATIONS[step.op].kind in ("comparison", "logic"):
                continue
            if step.op not in _ROUNDS_NOTHING:
                total += abs(adjoint) * _ulp(values[k])
            for index, arg in enumerate(step.args):
                rounding = _rounding(values[arg]) if trees.steps[arg].depends == CONSTANT else None
                if rounding == 0.0:
                    continue
                flow = adjoint * _partial(step, index, values)
                if rounding is not None:
                    total += abs(flow) * rounding
                elif flow:
                    adjoints[arg] = adjoints.get(arg, 0.0) + flow
    return total, abs(adjoints.get(trees.unknown, 0.0))


def _ulp(value):
    return math.ulp(abs(float(value.mid())))


def _rounding(value):
    """An ulp for a constant that no double holds exactly, else 0."""
    if not hasattr(value, "is_exact"):
        return 0.0              # a condition
    return 0.0 if value.is_exact() and (ball(float(value)) - value).is_zero() else _ulp(value)


def _partial(step, index, values):
    """Derivative of one operation with respect to one argument, by a difference."""
    args = [values[arg] for arg in step.args]
    if step.op == "where":
        return float(index > 0 and args[0] is (index == 1))
    if step.op in ("add", "sub", "neg"):
        return 1.0 if step.op == "add" or (step.op == "sub" and index == 0) else -1.0
    if step.op == "mul":
        return float(args[1 - index].mid())
    here, arg = run(step, values), args[index].mid()
    shift = (abs(arg) if not arg.is_zero() else flint.arb(1)) * flint.arb(2) ** SHIFT
    for h in (shift, -shift):
        args[index] = arg + h
        change = (step.apply(*args) - here) / h
        if change.is_finite():
            return float(change.mid())
    return math.inf
