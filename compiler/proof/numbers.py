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
from rootwright.proof.search import at_share, outside, split
from rootwright.proof.sensitivities import program_inputs

_LARGEST = 1e307                # a value below it in exact arithmetic is finite in doubles, rounding included
_SMALLEST = 2.3e-308            # a value above it in exact arithmetic keeps its digits
_NOTABLE, _FACTOR = 1e-100, 1e20
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
    """True where no value that the module computes at a root's bracket can overflow, be undefined or vanish by underflow, over the whole range.

    Then what is proved of the signs at the ends holds for the module: a computed residual is within its rounding bound
    of the exact one, and within that bound it counts as zero.
    """
    program, unknown = closure.program, domain.model.unknown
    if unknown.open_lower or unknown.open_upper:
        return False
    names = [name for kernel in ("bracket", "residual", "rounding") for name in closure.kernels[kernel]]
    nodes = needed(program.instructions, [program.results[name] for name in names])

    def holds(low, high):
        values, fine = enclosures(domain, program, nodes, low, high)
        for value in values:
            fine = fine & (value.low >= -_LARGEST) & (value.high <= _LARGEST)
        for share in (0.0, 1.0):
            fine &= ~_vanishes(domain, program, *at_share(low, high, share))
        return fine

    return holds_everywhere(domain, holds, limit, boxes)


def slope_is_sure(domain, closure, limit, boxes=4000):
    """True if all over the brackets of the operating range the slope's rounding error is below 2^-12 of it, and the slope
    changes by no more of itself within the error of a certified root, which is 2*rounding/|g_x| + 2^-53*|x| at most; here
    with a factor of two to spare. Then no root that the module finds is flat.
    """
    program = closure.program
    nodes = [program.results[name] for name in ("slope", "rounding", "slope_rounding", "curvature")]
    nodes.append(next(node for node, instruction in enumerate(program.instructions)
                      if instruction.op == "input" and instruction.value == domain.model.unknown.name))

    def holds(low, high):
        (slope, rounding, slope_rounding, curvature, x), fine = enclosures(domain, program, nodes, low, high)
        least = np.maximum(slope.low, -slope.high)
        bend = np.maximum(curvature.high, -curvature.low)
        with np.errstate(all="ignore"):
            error = 2.0 * rounding.high / least + 2.0**-53 * np.maximum(x.high, -x.low)
            return fine & (least > 0.0) & (slope_rounding.high < 2.0**-12 * least) & (2.0 * bend * error < 2.0**-12 * least)

    return holds_everywhere(domain, holds, limit, boxes)


def holds_everywhere(domain, holds, limit, boxes, inside=True):
    """True where holds(low, high), one truth value a box, is true all over the operating range and, `inside`, the brackets; by subdivision."""
    low, high = domain.ranges.low[None, :].copy(), domain.ranges.high[None, :].copy()
    if not inside:
        high[:, -1] = low[:, -1]
    spent = 0
    while len(low) and spent < boxes:
        count = min(limit.wave(np.inf), CHUNK, boxes - spent)
        if not count:
            return False
        now, low, high = (low[:count], high[:count]), low[count:], high[count:]
        spent += len(now[0])
        bad = ~outside(domain.lower, *now) & ~holds(*now)
        if bad.any():
            a, b = now[0][bad], now[1][bad]
            first, last, stuck = split(a, b, np.ones(a.shape), domain.ranges.widths(a, b), domain.ranges.logs)
            if stuck.any():
                return False
            low, high = np.concatenate([low, first]), np.concatenate([high, last])
        limit.take(len(now[0]), "doubles", len(low), lambda: domain.ranges.settled(low, high))
    return not len(low)


def enclosures(domain, program, nodes, low, high):
    """(Intervals of the program's numbers, over the real numbers; truth, one a box, that all of them are defined)."""
    with np.errstate(all="ignore"):
        values = evaluate(program.instructions, nodes, domain.lower.arithmetic, program_inputs(domain, low, high))
    values = [values[node] for node in nodes if isinstance(values[node], Interval)]
    fine = np.ones(len(low), bool)
    for value in values:
        fine &= np.broadcast_to(~np.asarray(value.undefined), fine.shape)
    return values, fine


def _vanishes(domain, program, low, high):
    """True where at an end of the bracket a value that is not 0 may underflow, and is not lost in a sum anyway.

    Then a residual of one sign would count as zero, and a sign change would be mere rounding.
    """
    instructions, roots = program.instructions, [program.results[name] for name in ("lower", "upper", "g")]
    with np.errstate(all="ignore"):
        values = evaluate(instructions, roots, domain.lower.arithmetic, program_inputs(domain, low, high))
        return _underflow(instructions, roots, values, np.zeros(len(low), bool))


def _underflow(instructions, roots, values, gone):
    order = needed(instructions, roots)
    fades = {node: ~gone for node in order}         # an error below _SMALLEST changes nothing of note
    for root in roots:
        fades[root] = np.broadcast_to((values[root].low > _NOTABLE) | (values[root].high < -_NOTABLE), gone.shape)
    for node in reversed(order):
        instruction, value = instructions[node], values[node]
        if not isinstance(value, Interval):
            continue
        args = [values[arg] for arg in instruction.args]
        if instruction.op in ("mul", "div"):
            first, second = _size(args[0]), _size(args[1])
            gone = gone | ((first * second if instruction.op == "mul" else first / second) < _SMALLEST) & ~fades[node]
        elif instruction.op in ("exp", "pow"):
            gone = gone | (value.low < _SMALLEST) & (value.high > -_SMALLEST) & ~fades[node]
        for place, arg in enumerate(instruction.args):
            if arg in fades:
                fades[arg] = fades[arg] & _absorbs(instruction.op, place, args, fades[node])
    return gone


def _size(value):
    """The least size of a value, or the largest where it may be 0: next to 0 a product is small for a good reason."""
    least = np.maximum(value.low, -value.high)
    most = np.maximum(-value.low, value.high)
    return np.where(least > 0.0, least, np.where(most > 0.0, most, 1.0))


def _absorbs(op, place, args, later):
    """Where an error below _SMALLEST of one operand is lost in this operation, or in `later` ones."""
    if op in ("neg", "abs", "named"):
        return later
    if op in ("add", "sub"):
        other = args[1 - place]
        return later | (other.low > _NOTABLE) | (other.high < -_NOTABLE)
    if op == "mul":
        other = args[1 - place]
        return later & (other.low > -_FACTOR) & (other.high < _FACTOR)
    if op == "div" and place == 0:
        return later & ((args[1].low > 1.0 / _FACTOR) | (args[1].high < -1.0 / _FACTOR))
    return False
