"""Bounds that come along with the proof: the least slope at a zero, and whether the module's doubles stay finite."""

import flint
import numpy as np

from rootwright.calculus.balls import ball, precision
from rootwright.calculus.program import evaluate, needed
from rootwright.proof.crew import CHUNK
from rootwright.proof.functions import ends
from rootwright.proof.intervals import Interval
from rootwright.proof.ranges import as_ball, exact_ends
from rootwright.proof.search import outside, split
from rootwright.proof.sensitivities import program_inputs

_LARGEST = 1e307                # a value below it in exact arithmetic is finite in doubles, rounding included
_ROUNDS = 40


def slope_bound(domain, outcome, limit):
    """Lower bound of |g_x| over all zeros, from the boxes that may hold one; 0 where there is none that is positive."""
    least = np.inf
    for index, low, high, _ in outcome.active:
        for start in range(0, len(low), CHUNK):
            at = slice(start, start + CHUNK)
            if len(low[at]):
                least = min(least, float(_slopes(domain, index, low[at], high[at]).min()))
    return _in_units(domain, least) if np.isfinite(least) else 0.0


def _in_units(domain, least):
    """A bound relative to the pivots of a scaling, over all of their ranges."""
    if domain.scaling:
        exact = exact_ends(domain.model)
        with precision(100):
            bound = flint.arb(least)
            for pivot, power in domain.scaling.slope.items():
                bound *= as_ball(exact[pivot][0 if power > 0 else 1]) ** ball(power)
            least = max(ends(bound)[0], 0.0)
    return least


def _slopes(domain, index, low, high):
    """|g_x| from below, one a box, in the units of the spec."""
    chart, opened = domain.charts[index], domain.opened[index]
    slope = chart.natural(chart.slope, low, high, opened)
    first, last = slope.low.copy(), slope.high.copy()
    at = np.nonzero((first <= 0.0) & (last >= 0.0) & slope.regular)[0]
    if len(at):
        first[at], last[at], _, _ = chart.sharp(chart.slope, low[at], high[at], opened)
    below = np.maximum(np.maximum(first, -last), 0.0)
    return below


def doubles_are_finite(domain, closure, limit, boxes=4000):
    """True where no value that the module computes at a root's bracket can overflow or be undefined, over the whole range.

    Then what is proved of the signs at the ends holds for the module: a computed residual is within its rounding bound
    of the exact one, and within that bound it counts as zero.
    """
    program, unknown = closure.program, domain.model.unknown
    if unknown.open_lower or unknown.open_upper:
        return False
    chart = domain.lower
    names = [name for kernel in ("bracket", "residual", "rounding") for name in closure.kernels[kernel]]
    roots = [program.results[name] for name in names]
    order = needed(program.instructions, roots)
    low, high = domain.ranges.low[None, :].copy(), domain.ranges.high[None, :].copy()
    spent = 0
    while len(low) and spent < boxes:
        count = min(limit.wave(np.inf), CHUNK, boxes - spent)
        if not count:
            return False
        now, low, high = (low[:count], high[:count]), low[count:], high[count:]
        spent += len(now[0])
        bad = ~outside(chart, *now) & ~_finite(domain, program, roots, order, *now)
        if bad.any():
            a, b = now[0][bad], now[1][bad]
            first, last, stuck = split(a, b, np.ones(a.shape), domain.ranges.widths(a, b), domain.ranges.logs)
            if stuck.any():
                return False
            low, high = np.concatenate([low, first]), np.concatenate([high, last])
        limit.take(len(now[0]), "doubles", len(low), lambda: domain.ranges.settled(low, high))
    return not len(low)


def _finite(domain, program, roots, order, low, high):
    inputs = program_inputs(domain, low, high)
    with np.errstate(all="ignore"):
        values = evaluate(program.instructions, roots, domain.lower.arithmetic, inputs)
    fine = np.ones(len(low), bool)
    for node in order:
        value = values[node]
        if isinstance(value, Interval):
            fine &= np.broadcast_to(~np.asarray(value.undefined | (value.low < -_LARGEST) | (value.high > _LARGEST)), fine.shape)
    return fine
