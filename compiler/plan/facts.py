"""What short proofs in interval arithmetic show for the whole operating range, so that no solve has to look at it."""

from dataclasses import dataclass

import numpy as np

from rootwright.calculus.program import needed
from rootwright.proof.numbers import doubles_are_finite, holds_everywhere, slope_is_sure
from rootwright.proof.search import outside
from rootwright.proof.settle import Domain, Limit

BOXES = 64                  # that a proof may take, and one wave more: more is for `prove`, whose certificate tells
LARGEST = 600               # operations of a residual beyond which neither is tried


@dataclass(frozen=True)
class Facts:
    """ends: what is known of the signs there, "proved", "steep" or "evaluated"; sure: as `proof.numbers.slope_is_sure`; why: in words."""
    ends: str
    least_rise: float
    sure: bool
    why: tuple[str, ...]


def find(closure):
    """The Facts of a Closure."""
    promised = () if closure.promise is None else closure.promise.computed
    if "exists" in promised:
        return Facts("proved", 0.0, "slope" in promised, (_ENDS["proved"], *(_SURE,)*("slope" in promised)))
    charts = domain(closure)
    if charts is None or not computed_finite(charts, closure):
        return Facts("evaluated", 0.0, False, (_ENDS["evaluated"],))
    sure = slope_is_sure(charts, closure, Limit(BOXES), BOXES)
    why = (_SURE,) if sure else ()
    if ends_differ(charts):
        return Facts("proved", 0.0, sure, (_ENDS["proved"], *why))
    least = least_rise(charts)
    ends = "steep" if least > 0.0 else "evaluated"
    return Facts(ends, least, sure, (_ENDS[ends].format(least=least), *why))


_SURE = "slope: proved to be far from 0 and right over the operating range; not looked at"
_ENDS = {
    "proved": "ends: signs proved to differ over the operating range; not evaluated",
    "steep": "ends: not evaluated; the residual is proved monotone over the operating range, and rises by {least:.3g} at least "
             "from end to end",
    "evaluated": "ends: evaluated first, since no short proof shows that their signs differ",
}


def domain(closure):
    """The charts that both proofs are made in; None for a residual too large for a short proof."""
    program = closure.program
    return Domain(closure.model) if len(needed(program.instructions, [program.results["g"]])) <= LARGEST else None


def computed_finite(charts, closure):
    """True if no value of the residual that the module computes overflows or is undefined anywhere in the range.

    What is proved of real numbers says nothing of doubles otherwise.
    """
    return doubles_are_finite(charts, closure, Limit(BOXES), BOXES)


def ends_differ(charts):
    """True if the residual has different signs at both ends of the bracket, or is 0 at one, everywhere in the range; by plain enclosures."""
    unknown, chart = charts.model.unknown, charts.lower
    if unknown.open_lower or unknown.open_upper:
        return False

    def holds(low, high):
        first, last = (chart.natural(form, low, high) for form in (chart.at_lower, chart.at_upper))
        rises = (first.high <= 0.0) & (last.low >= 0.0)
        falls = (first.low >= 0.0) & (last.high <= 0.0)
        return ~first.undefined & ~last.undefined & (rises | falls)

    return holds_everywhere(charts, holds, Limit(BOXES), BOXES, inside=False)


def least_rise(charts):
    """A positive lower bound of |dg/dt|, where t is the share of the bracket, over the bracket and the operating range.

    With it the residual is continuous and monotone, so a residual smaller than this times the share that is left
    towards either end says that the signs at the ends differ. 0 where no such bound was found.
    """
    if len(charts.charts) > 1 or charts.model.unknown.open_lower:
        return 0.0
    chart = charts.lower
    low, high = charts.whole()
    least, spent, variable = np.inf, 0, 0
    while len(low) and spent < BOXES:
        spent += len(low)
        here = ~outside(chart, low, high)
        low, high = low[here], high[here]
        if not len(low):
            break
        value, slope = chart.natural(chart.residual, low, high), chart.natural(chart.slope, low, high)
        bound = np.maximum(slope.low, -slope.high)
        good = ~(value.undefined | value.jump | slope.undefined) & (bound > 0.0)
        least = min(least, float(bound[good].min(initial=np.inf)))
        low, high = low[~good], high[~good]
        middle = low[:, variable] + 0.5 * (high[:, variable] - low[:, variable])
        below, above = high.copy(), low.copy()
        below[:, variable] = above[:, variable] = middle
        low, high = np.concatenate([low, above]), np.concatenate([below, high])
        variable = (variable + 1) % low.shape[1]
    return 0.0 if len(low) or not np.isfinite(least) else least
