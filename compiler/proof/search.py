"""Branch and bound over boxes: what is settled is put aside, the rest is cut in two where it matters most (Moore; W. Tucker, Validated
Numerics, 2011, chapter 5).

Two searches. `judge_ends` takes boxes of parameters and asks for the bracket and the signs at its ends. `judge_inside` takes boxes of parameters
and of the share of the bracket, and asks where a zero may lie, and of what kind it is. Both return plain arrays, one entry a box.
"""

from dataclasses import dataclass

import numpy as np

from rootwright.proof.chart import mean_value, normalised
from rootwright.proof.intervals import Interval, Intervals

_THIN = 2.0 ** -160
# Shares of the bracket within which the sign next to an open end is asked for.
NEAR = (2.0 ** -6, 2.0 ** -20, 2.0 ** -50, 2.0 ** -300, 2.0 ** -1050)


@dataclass
class Ends:
    """Outcome of `judge_ends`."""
    outside: np.ndarray         # no point of the box is in the operating range
    ordered: np.ndarray         # bracket ends are finite, and lower < upper
    change: np.ndarray          # signs at the ends differ, or one is 0
    smear: np.ndarray           # (boxes, variables): how much each variable moves what is not settled


@dataclass
class Inside:
    """Outcome of `judge_inside`."""
    outside: np.ndarray
    undefined: np.ndarray       # the residual may have no value
    active: np.ndarray          # it may be 0
    jump: np.ndarray            # it may be discontinuous along the bracket
    rise: np.ndarray            # sign of g_x: 1, -1, or 0 where it is not settled
    least: np.ndarray           # lower bound of |g_x| where that sign is settled
    switch: np.ndarray          # a switch may be here
    smear: np.ndarray


def unjudged(name, low):
    """What is known of boxes before the search of this name looks at them: nothing."""
    size = len(low)
    no, yes = np.zeros(size, bool), np.ones(size, bool)
    if name == "ends":
        return Ends(no, no, no, np.ones(low.shape))
    return Inside(no, yes, yes, yes, np.zeros(size, int), np.zeros(size), yes, np.ones(low.shape))


def judge_ends(near_lower, near_upper, model, low, high):
    """`near_lower` and `near_upper` are the charts that count t from those ends (the same one for closed ends)."""
    chart = near_lower
    size = len(low)
    outcome = Ends(*(np.zeros(size, bool) for _ in range(3)), np.zeros(low.shape))
    outcome.outside = outside(chart, low, high)
    at = np.nonzero(~outcome.outside)[0]
    if not len(at):
        return outcome
    low, high = low[at], high[at]
    (_, _, wide, _), smear = _at_end(chart, "width", low, high)
    ordered = wide
    for form in chart.bracket:
        undefined = chart.natural(form, low, high).undefined
        ordered &= ~undefined
        broken = np.nonzero(undefined)[0]
        if len(broken):
            smear[broken] += chart.trouble(form, low[broken], high[broken])
    signs = []
    for end, opened, own in (("lower", model.unknown.open_lower, near_lower), ("upper", model.unknown.open_upper, near_upper)):
        if opened:
            sign, part = next_to(own, low, high)
        else:
            (*sign, _, _), part = _at_end(chart, end, low, high)
        signs.append(sign)
        smear = smear + part
    (rise, fall), (rise_above, fall_above) = signs
    change = fall & rise_above | rise & fall_above
    outcome.ordered[at], outcome.change[at], outcome.smear[at] = ordered, change, smear
    return outcome


def outside(chart, low, high):
    """True where some requirement fails in the whole box."""
    result = np.zeros(len(low), bool)
    if chart.requirements:
        values = chart.evaluate(chart.requirements, low, high)
        for node in chart.requirements:
            result |= ~np.broadcast_to(values[node].yes, result.shape)
    for slack in chart.slack_forms:
        at = np.nonzero(~result)[0]
        values = chart.natural(slack, low[at], high[at])
        at = at[(values.low < 0) & ~values.undefined & ~values.jump]
        if len(at):
            result[at] = chart.sharper(slack, low[at], high[at])[1] < 0
    return result


def _signed(chart, form, low, high, opened=False):
    """(strict sign of a form over boxes: 1, -1, or 0 where it is not settled; its least absolute value; the smear of it)."""
    values = chart.natural(form, low, high, opened)
    sign = _strict(values)
    first, last = values.low.copy(), values.high.copy()
    smear = np.zeros(low.shape)
    at = np.nonzero(sign == 0)[0]
    if len(at):
        smear[at] = chart.moves(form)
        broken = at[values.undefined[at]]
        if len(broken):
            smear[broken] = chart.trouble(form, low[broken], high[broken], opened)
        at = at[values.regular[at]]
    if len(at):
        first[at], last[at], below, above = chart.sharper(form, low[at], high[at], opened)
        sign[at] = np.where(first[at] > 0, 1, np.where(last[at] < 0, -1, 0))
        smear[at] = normalised(below, above, low[at], high[at])
    return sign, np.where(sign > 0, np.maximum(first, 0.0), np.where(sign < 0, np.maximum(-last, 0.0), 0.0)), smear


def _strict(values):
    definite = values.definite()
    return np.where(definite & (values.low >= 0), 1, np.where(definite & (values.high <= 0), -1, 0))


def _at_end(chart, name, low, high):
    """((>= 0, <= 0, > 0, < 0), smear) of the residual at a closed end, or of the bracket's width, from the signs of its factors."""
    form = {"lower": chart.at_lower, "upper": chart.at_upper, "width": chart.width}[name]
    values = chart.natural(form, low, high)
    known = [values.low >= 0, values.high <= 0, values.low > 0, values.high < 0]
    smear = np.zeros(low.shape)
    broken = np.nonzero(values.undefined)[0]
    if len(broken):
        smear[broken] = chart.trouble(form, low[broken], high[broken])
    left = np.nonzero(~values.undefined & ~values.jump & ~(known[2] if name == "width" else known[0] | known[1]))[0]
    if len(left):
        signs, smear[left] = _product(chart, chart.products[name], low[left], high[left])
        for have, new in zip(known, signs):
            have[left] |= new
        open_ = left[~known[2][left] if name == "width" else ~(known[0][left] | known[1][left])]
        if len(open_):
            (bottom, top), part = _factor(chart, chart.products[name][0], low[open_], high[open_])
            smear[open_] = part
            for have, new in zip(known, (bottom >= 0, top <= 0, bottom > 0, top < 0)):
                have[open_] |= new
    return tuple(part & ~values.undefined for part in known), smear


def _product(chart, product, low, high):
    _, constant, parts = product
    value = chart.evaluate([constant], low[:1], high[:1])[constant]
    size = len(low)
    signs = [np.full(size, bool(part)) for part in (value.low[0] >= 0, value.high[0] <= 0, value.low[0] > 0, value.high[0] < 0)]
    smear = np.zeros(low.shape)
    for factor in parts:
        (bottom, top), part = _factor(chart, factor, low, high)
        ge, le, gt, lt = bottom >= 0, top <= 0, bottom > 0, top < 0
        if factor.count % 2 == 0:
            ge, le, gt, lt = np.ones(size, bool), np.zeros(size, bool), gt | lt, np.zeros(size, bool)
        a, b, c, d = signs
        signs = [a & ge | b & le, a & le | b & ge, c & gt | d & lt, c & lt | d & gt]
        smear += part
    return signs, smear


def _factor(chart, factor, low, high):
    """((low, high), smear) of a factor over the part of the boxes in the operating range."""
    values = chart.natural(factor.form, low, high)
    bottom, top = values.low.copy(), values.high.copy()
    smear = np.zeros(low.shape)
    left = np.nonzero(~((bottom > 0) | (top < 0)))[0]
    left = left[values.regular[left]]
    if len(left):
        first, last, below, above = chart.sharper(factor.form, low[left], high[left])
        smear[left] = normalised(below, above, low[left], high[left])
        bottom[left], top[left] = np.maximum(bottom[left], first), np.minimum(top[left], last)
        open_ = ~((bottom[left] > 0) | (top[left] <= 0))
        rest = left[open_]
        if len(rest):
            _relaxations(chart, factor, low, high, bottom, top, smear, rest)
        keep = np.nonzero(open_ & ~((bottom[left] >= 0) | (top[left] <= 0)))[0]
        if len(keep) and chart.slack_forms:
            at = left[keep]
            bottom[at], top[at] = _within_range(chart, factor.form, low[at], high[at], below[keep], above[keep], bottom[at], top[at])
    return (bottom, top), smear


def _in_range(chart, low, high, at, first, last, below, above, smear, opened):
    """Bounds of the residual over the part in the operating range of the boxes `at`, those that some requirement cuts, into `first` and `last`."""
    cut = np.zeros(len(at), bool)
    for slack in chart.slack_forms:
        cut |= chart.natural(slack, low[at], high[at], opened).low < 0
    at = at[cut]
    if len(at):
        _relaxations(chart, chart.whole, low, high, first, last, smear, at, opened)
        at = at[(first[at] <= 0) & (last[at] >= 0)]
    if len(at) and not chart.whole.relaxed:
        first[at], last[at] = _within_range(chart, chart.residual, low[at], high[at], below[at], above[at], first[at], last[at], opened)


def _relaxations(chart, factor, low, high, bottom, top, smear, at, opened=False):
    """Bounds from a form less multiples of a slack that cuts a box, into `bottom` and `top` of the boxes `at`.

    `smear` becomes that of the form whose bound is best on the side that the box seems to lie: next to the edge of the range no cut of the
    form itself helps.
    """
    best = np.full(len(low), -np.inf)
    with np.errstate(all="ignore"):
        positive = ~(bottom + top < 0)
    for sign, relaxed, slack in factor.relaxed:
        at = at[(bottom[at] <= 0) & (top[at] >= 0)]
        here = at[chart.natural(slack, low[at], high[at], opened).low < 0] if len(at) else at
        if not len(here):
            continue
        part = chart.natural(relaxed, low[here], high[here], opened)
        first, last = part.low.copy(), part.high.copy()
        open_ = ~((first > 0) if sign < 0 else (last < 0))
        stuck = here[open_ & ~part.regular & (positive[here] == (sign < 0)) & (best[here] == -np.inf)]
        smear[stuck] = chart.moves(relaxed)
        open_ = np.nonzero(open_ & part.regular)[0]
        if len(open_):
            rows = here[open_]
            first[open_], last[open_], below, above = chart.sharper(relaxed, low[rows], high[rows], opened)
            bound = first[open_] if sign < 0 else -last[open_]
            better = (positive[rows] == (sign < 0)) & (bound > best[rows])
            best[rows[better]] = bound[better]
            smear[rows[better]] = normalised(below, above, low[rows], high[rows])[better]
        if sign < 0:
            bottom[here] = np.maximum(bottom[here], first)
        else:
            top[here] = np.minimum(top[here], last)


def _within_range(chart, form, low, high, below, above, bottom, top, opened=False):
    """Bounds of a form over the part of the boxes in the operating range, by Lagrange's multipliers.

    Where a slack c is not negative, g >= g - m*c for m >= 0 and g <= g - m*c for m <= 0. m is chosen to cancel the slope in the
    variable that moves c most; the mean-value form of g - m*c is then bounded over the whole box.
    """
    centre = low + 0.5 * (high - low)
    centre = np.clip(centre, low, high)
    at_centre = chart.natural(form, centre, centre, opened)
    for slack in chart.slack_forms:
        whole = chart.natural(slack, low, high, opened)
        usable = ~whole.undefined & ~whole.jump
        c_below, c_above = chart.slopes(slack, low, high, opened)
        c_centre = chart.natural(slack, centre, centre, opened)
        rows = np.arange(len(low))
        with np.errstate(all="ignore"):
            middle, c_middle = 0.5 * (below + above), 0.5 * (c_below + c_above)
            most = np.argmax(np.where(np.isfinite(c_middle), np.abs(c_middle) * (high - low), -1.0), axis=1)
            factor = middle[rows, most] / c_middle[rows, most]
            good = usable & np.isfinite(factor) & (factor != 0.0)
            if not good.any():
                continue
            bound = _relaxed_bound(at_centre, c_centre, (below, above), (c_below, c_above), np.where(good, factor, 0.0), low, high, centre)
            bottom = np.where(good & (factor > 0) & (bound[0] > bottom), bound[0], bottom)
            top = np.where(good & (factor < 0) & (bound[1] < top), bound[1], top)
    return bottom, top


def _relaxed_bound(value, slack, slopes, slack_slopes, m, low, high, centre):
    """Mean-value enclosure of value - m*slack; m is an array of either sign, one a box."""
    arithmetic = Intervals()
    factor = Interval(m, m)
    start = arithmetic.sub(Interval(value.low, value.high), arithmetic.mul(factor, Interval(slack.low, slack.high)))
    column = Interval(m[:, None], m[:, None])
    combined = arithmetic.sub(Interval(*slopes), arithmetic.mul(column, Interval(*slack_slopes)))
    reach = mean_value(combined.low, combined.high, low, high, centre)
    total = arithmetic.add(start, Interval(*reach))
    undefined = value.undefined | slack.undefined
    return np.where(undefined, -np.inf, total.low), np.where(undefined, np.inf, total.high)


def next_to(chart, low, high, form=None):
    """((g > 0, g < 0), smear) in some half-open interval of the bracket next to an open end; `form` stands for g at a single point."""
    sign, smear = np.zeros(len(low), int), np.zeros(low.shape)
    for near in NEAR:
        left = np.nonzero(sign == 0)[0]
        if len(left):
            inside_low, inside_high = low[left].copy(), high[left].copy()
            inside_low[:, -1], inside_high[:, -1] = 0.0, near
            sign[left], _, smear[left] = _signed(chart, form or chart.residual, inside_low, inside_high, True)
    smear[:, -1] = 0.0
    return (sign > 0, sign < 0), smear


def judge_inside(chart, low, high, opened, steep=False):
    """`opened`: the boxes leave out t = 0. `steep`: what moves the slope alone is cut, as if it had one sign all over the bracket."""
    size = len(low)
    flags = [np.zeros(size, bool) for _ in range(4)]
    outcome = Inside(outside(chart, low, high), *flags[:3], np.zeros(size, int), np.zeros(size), flags[3], np.zeros(low.shape))
    at = np.nonzero(~outcome.outside)[0]
    if not len(at):
        return outcome
    low, high = low[at], high[at]
    values = chart.natural(chart.residual, low, high, opened)
    active, smear = ~values.definite(), np.zeros(low.shape)
    jump = values.jump & chart.steps_along          # a choice on parameters alone is made once, on the way along the bracket
    calm = np.nonzero(active & ~values.undefined & ~jump)[0]
    smooth = calm[~values.jump[calm]]
    smear[active] = 1.0
    broken = np.nonzero(values.undefined)[0]
    if len(broken):
        smear[broken] = chart.trouble(chart.residual, low[broken], high[broken], opened)
    rise, least, part = np.zeros(len(at), int), np.zeros(len(at)), np.zeros(low.shape)
    if steep:
        rise[calm], least[calm], part[calm] = _signed(chart, chart.slope, low[calm], high[calm], opened)
        smooth = smooth[rise[smooth] == 0]
    if len(smooth):
        active[smooth], smear[smooth] = may_vanish(chart, low[smooth], high[smooth], opened)
    left = calm[active[calm] & ((rise[calm] == 0) | (not steep))]
    if not steep and len(left):
        rise[left], least[left], part[left] = _signed(chart, chart.slope, low[left], high[left], opened)
    smear[left] = part[left] if steep else smear[left] + part[left]
    switch = np.zeros(len(at), bool)
    left = np.nonzero(active)[0]
    if len(left) and chart.switches:
        touched, part = _on_switch(chart, low[left], high[left], opened)
        switch[left] = touched
        smear[left] += part
    outcome.undefined[at], outcome.active[at], outcome.jump[at] = values.undefined, active, jump
    outcome.rise[at], outcome.least[at], outcome.switch[at], outcome.smear[at] = rise, least, switch, smear
    return outcome


def may_vanish(chart, low, high, opened):
    """(where the residual may be 0 in the operating range, smear) of boxes over which it is defined and continuous."""
    first, last, below, above = chart.sharper(chart.residual, low, high, opened)
    smear = normalised(below, above, low, high)
    open_ = np.nonzero((first <= 0) & (last >= 0))[0]
    if len(open_) and chart.slack_forms:
        _in_range(chart, low, high, open_, first, last, below, above, smear, opened)
    return ~((first > 0) | (last < 0)), smear


def _on_switch(chart, low, high, opened):
    touched, smear = np.zeros(len(low), bool), np.zeros(low.shape)
    for guard, form in chart.switches:
        sign, _, part = _signed(chart, form, low, high, opened)
        near = sign == 0
        if guard is not None:
            near &= np.broadcast_to(chart.evaluate([guard], low, high, opened)[guard].yes, near.shape)
        touched |= near
        smear += np.where(near[:, None], part, 0.0)
    return touched, smear


def split(low, high, smear, widths, logs, finest=_THIN):
    """Halves of boxes, cut in the variable of the largest smear; `widths` (boxes, variables) are shares of the range, which break ties.

    Returns (low, high) of twice as many boxes, and where a box is too thin to cut: its share of the bracket below `finest`, its share of
    a parameter's range below _THIN, or its ends next to each other.
    """
    room = (high > np.nextafter(low, np.inf)) & (widths > _THIN)
    room[:, -1] &= high[:, -1] - low[:, -1] >= finest
    score = (smear + 1e-3) * np.sqrt(widths) + 0.05 * widths
    score = np.where(smear == 0.0, 1e-9 * widths, score)        # what does not move it is cut where nothing else can be
    choice = np.argmax(np.where(room, score, -np.inf), axis=1)
    rows = np.arange(len(low))
    a, b = low[rows, choice], high[rows, choice]
    with np.errstate(all="ignore"):
        middle = np.where(logs[choice] & (a > 0), np.sqrt(a) * np.sqrt(b), 0.5 * a + 0.5 * b)
    stuck = ~room.any(axis=1) | ~((middle > a) & (middle < b))
    first_high, second_low = high.copy(), low.copy()
    first_high[rows, choice], second_low[rows, choice] = middle, middle
    return np.concatenate([low, second_low]), np.concatenate([first_high, high]), stuck


def at_share(low, high, value):
    """Boxes with the share of the bracket set to one value."""
    low, high = low.copy(), high.copy()
    low[:, -1] = high[:, -1] = value
    return low, high
