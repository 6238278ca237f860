"""The two searches over the whole operating range: what is settled, what is left, and where."""

import time
from dataclasses import dataclass, field
from functools import partial

import numpy as np

from rootwright.proof.chart import Chart
from rootwright.proof.crew import WAVE
from rootwright.proof.functions import ends
from rootwright.proof.ranges import as_ball, exact_ends, ranges
from rootwright.proof.search import judge_ends, judge_inside, split


@dataclass
class Left:
    """Boxes left open, one row of the arrays a box."""
    low: np.ndarray
    high: np.ndarray
    chart: int


@dataclass
class Outcome:
    """`open` maps what is asked for (`needs_of`, and `ordered` and `change` of the bracket) to the boxes where it is not settled."""
    open: dict = field(default_factory=dict)
    active: list = field(default_factory=list)      # (chart, low, high, sign of slope): boxes that may hold a zero
    rises: set = field(default_factory=set)         # signs of g_x in them
    inside_range: float = 1.0                       # share of the ranges that meets the requirements, from above

    def leave(self, claim, need, low, high, index):
        if need.any():
            self.open.setdefault(claim, []).append(Left(low[need], high[need], index))

    def keep(self, judged, done, low, high, index):
        """Notes the boxes that are done with and may hold a zero."""
        active = judged.active & ~judged.outside & done
        if active.any():
            self.rises |= set(judged.rise[active & (judged.rise != 0)].tolist())
            self.active.append((index, low[active], high[active], judged.rise[active]))


class Limit:
    """How much work may be done: a number of boxes, and a time that is looked at between waves only."""

    def __init__(self, boxes, seconds=None, progress=None):
        self.boxes, self.progress = boxes, progress
        self.waves = 0
        self.until = None if seconds is None else time.monotonic() + seconds
        self.spent = 0

    def take(self, count, stage, waiting):
        self.spent += count
        self.waves += 1
        if self.progress:
            self.progress(stage, self.spent, waiting)

    def reached(self, ceiling):
        return self.spent >= ceiling or self.late()

    def late(self):
        """True where the time is over."""
        return self.until is not None and time.monotonic() > self.until


class Domain:
    """Charts of one model, plain or relative to the pivots of a scaling, with their ranges."""

    def __init__(self, model, scaling=None, edges=False):
        self.model, self.scaling = model, scaling
        fixed = scaling.pivots if scaling else ()
        self.lower = Chart(model, fixed, edges=edges)
        self.charts = [self.lower]
        if model.unknown.open_upper:
            self.charts.append(Chart(model, fixed, from_upper=True, edges=edges))
        self.upper = self.charts[-1]
        self.ranges = ranges(model, self.lower.variables, scaling)
        self.opened = [model.unknown.open_lower, True]
        self.bounds = [(ends(as_ball(low))[0], ends(as_ball(high))[1]) for low, high in exact_ends(model).values()]

    def whole(self):
        """The box of everything that each chart has to look after."""
        high = self.ranges.high.copy()
        high[-1] = 1.0 if len(self.charts) == 1 else 0.5
        return self.ranges.low[None, :].copy(), high[None, :]


    def judges(self):
        """{name: function of arrays (low, high)} for a Crew."""
        inside = {f"inside {index}": partial(judge_inside, chart, opened=opened)
                  for index, (chart, opened) in enumerate(zip(self.charts, self.opened))}
        return {"ends": partial(judge_ends, self.lower, self.upper, self.model)} | inside


def search_ends(domain, crew, limit, ceiling, outcome):
    """Cuts boxes of parameters until the bracket is in order and the signs differ at its ends; fills the outcome."""
    low, high = domain.ranges.low[None, :].copy(), domain.ranges.high[None, :].copy()
    low[:, -1] = high[:, -1] = 0.0
    kept, beyond = [], 0.0
    while len(low) and not limit.reached(ceiling):
        now, low, high = (low[:WAVE], high[:WAVE]), low[WAVE:], high[WAVE:]
        judged = crew.judge("ends", *now)
        limit.take(len(now[0]), "ends", len(low))
        beyond += domain.ranges.volume(*now)[judged.outside].sum()
        open_ = ~judged.outside & ~(judged.ordered & judged.change)
        low, high = _append(domain, now, open_, judged.smear, low, high, kept)
    outcome.inside_range = max(1.0 - beyond, 0.0)
    low, high = _together(kept, low, high)
    if len(low):
        judged = crew.judge("ends", low, high)
        for claim, good in (("ordered", judged.ordered), ("change", judged.change)):
            outcome.leave(claim, ~judged.outside & ~good, low, high, 0)


def search_inside(domain, index, crew, limit, ceiling, outcome, wanted):
    """Cuts boxes of parameters and share until nothing that the claims in `wanted` need is open; fills the outcome."""
    low, high = domain.whole()
    kept = []
    while len(low) and not limit.reached(ceiling):
        now, low, high = (low[:WAVE], high[:WAVE]), low[WAVE:], high[WAVE:]
        judged = crew.judge(f"inside {index}", *now)
        limit.take(len(now[0]), "inside", len(low))
        needs = needs_of(judged)
        open_ = np.logical_or.reduce([needs[claim] for claim in wanted])
        outcome.keep(judged, ~open_, *now, index)
        low, high = _append(domain, now, open_, judged.smear, low, high, kept, 2.0 ** -160)
    low, high = _together(kept, low, high)
    if len(low):
        judged = crew.judge(f"inside {index}", low, high)
        for claim, need in needs_of(judged).items():
            outcome.leave(claim, need, low, high, index)
        outcome.keep(judged, np.ones(len(low), bool), low, high, index)


def needs_of(judged):
    """Claim -> where it is not settled."""
    here = ~judged.outside
    active = here & judged.active
    return {"defined": here & judged.undefined,
            "continuous": here & judged.undefined | active & judged.jump,
            "unique": here & judged.undefined | active & (judged.jump | (judged.rise == 0)),
            "kink": active & judged.switch}


def _together(kept, low, high):
    parts = [*kept, (low, high)]
    return np.concatenate([part[0] for part in parts]), np.concatenate([part[1] for part in parts])


def _append(domain, now, open_, smear, low, high, kept, finest=0.0):
    if not open_.any():
        return low, high
    a, b = now[0][open_], now[1][open_]
    pieces = split(a, b, smear[open_], domain.ranges.widths(a, b), domain.ranges.logs, finest)
    stuck = pieces[2]
    if stuck.any():
        kept.append((a[stuck], b[stuck]))
    fresh = np.tile(~stuck, 2)
    return np.concatenate([low, pieces[0][fresh]]), np.concatenate([high, pieces[1][fresh]])


def share(domain, lefts, inside_range):
    """Share of the operating range that boxes left open hold, in the coordinates of the spreads; the unknown is left out."""
    if not lefts:
        return 0.0
    low, high = (np.concatenate([getattr(left, end)[:, :-1] for left in lefts]) for end in ("low", "high"))
    boxes = np.unique(np.concatenate([low, high], axis=1), axis=0)
    half, pad = low.shape[1], np.zeros((len(boxes), 1))
    volume = domain.ranges.volume(np.concatenate([boxes[:, :half], pad], 1), np.concatenate([boxes[:, half:], pad], 1))
    return float(min(1.0, volume.sum() / max(inside_range, 1e-300)))
