"""Bounds that come along with the proof: the least slope at a zero, and whether the module's doubles stay finite."""

import flint
import numpy as np

from rootwright.calculus.balls import ball, precision
from rootwright.calculus.program import evaluate, needed
from rootwright.proof.chart import normalised
from rootwright.proof.crew import CHUNK
from rootwright.proof.functions import ends
from rootwright.proof.intervals import Interval
from rootwright.proof.ranges import as_ball, exact_ends
from rootwright.proof.narrowing import narrowed
from rootwright.proof.search import outside, split
from rootwright.proof.sensitivities import program_inputs

_LARGEST = 1e307                # a value below it in exact arithmetic is finite in doubles, rounding included
_ROUNDS, _ROUND = 24, 64        # of cutting boxes for the least slope, and boxes cut in a round
_WORK = 5000                    # operations of the slope and its derivatives, times rounds, where they are many
_WORTH = 1.05                   # what four rounds must gain


def slope_bound(domain, outcome, limit):
    """Lower bound of |g_x| over all zeros, from the boxes that may hold one, the least bound cut first; 0 where there is none that is positive."""
    least = np.inf
    for index in range(len(domain.charts)):
        parts = [(low, high, bounds) for (chart, low, high, _), bounds in zip(outcome.active, outcome.least) if chart == index]
        if parts:
            least = min(least, _least(domain, index, *(np.concatenate(ends_) for ends_ in zip(*parts)), limit))
    return _in_units(domain, least) if np.isfinite(least) else 0.0


def slope_is_bounded(domain, outcome):
    """True where |g_x| has a positive lower bound although none was found: over finitely many closed boxes it is continuous and not 0.

    One form of it must be all of that at every point of a box: one that is undefined somewhere says nothing of the points it leaves out.
    """
    if domain.opened[0] or len(domain.charts) > 1:
        return False
    chart = domain.lower
    for _, low, high, _ in outcome.active:
        for start in range(0, len(low), CHUNK):
            at = slice(start, start + CHUNK)
            values = chart.evaluate(chart.slope.nodes, low[at], high[at])
            parts = [values[node] for node in chart.slope.nodes]
            known = np.zeros(len(low[at]), bool)
            for part in parts:
                signed = (part.low > 0) | (part.high < 0) | part.nonzero & ((part.low >= 0) | (part.high <= 0))
                known |= signed & ~np.asarray(part.undefined | part.jump)
            if not known.all():
                return False
    return True


def _least(domain, index, low, high, bounds, limit):
    stuck, before = np.zeros(len(low), bool), 0.0
    for k in range(max(4, min(_ROUNDS, _WORK // domain.charts[index].effort))):
        if k % 4 == 3 and k > 8:
            now = bounds.min(initial=np.inf)
            if before > 0.0 and now < _WORTH * before:
                break
            before = now
        order = np.argsort(np.where(stuck, np.inf, bounds), kind="stable")[:_ROUND]
        if not len(order) or stuck[order[0]] or stuck.any() and bounds[stuck].min() <= bounds[order[0]] or limit.reached(np.inf):
            break
        rest = np.ones(len(low), bool)
        rest[order] = False
        a, b = low[order], high[order]
        first, last, thin = split(a, b, _slopes(domain, index, a, b)[1] + 0.1, domain.ranges.widths(a, b), domain.ranges.logs)
        fresh, worth = np.tile(~thin, 2), bounds[order]
        parts = narrowed(domain, index, first[fresh], last[fresh])
        new = np.maximum(worth[0], _slopes(domain, index, *parts)[0]) if len(parts[0]) else np.zeros(0)
        limit.take(len(order), "least slope", len(low), lambda: 1.0)
        low, high = np.concatenate([low[rest], a[thin], parts[0]]), np.concatenate([high[rest], b[thin], parts[1]])
        bounds = np.concatenate([bounds[rest], worth[thin], new])
        stuck = np.concatenate([stuck[rest], np.ones(int(thin.sum()), bool), np.zeros(len(new), bool)])
    return float(bounds.min(initial=np.inf))


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
    """(|g_x| from below, smear of it), one a box."""
    chart, opened = domain.charts[index], domain.opened[index]
    slope = chart.natural(chart.slope, low, high, opened)
    first, last, smear = slope.low.copy(), slope.high.copy(), np.ones(low.shape)
    at = np.nonzero(slope.regular)[0]
    if len(at):
        bottom, top, below, above = chart.sharper(chart.slope, low[at], high[at], opened)
        first[at], last[at] = np.maximum(first[at], bottom), np.minimum(last[at], top)
        smear[at] = normalised(below, above, low[at], high[at])
    return np.maximum(np.maximum(first, -last), 0.0), smear


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
