"""The two searches over the whole operating range: what is settled, what is left, and where."""

import math
import time
from dataclasses import dataclass, field, fields
from functools import partial

import numpy as np

from rootwright.calculus.program import evaluate
from rootwright.proof.chart import Chart
from rootwright.proof.crew import WAVE
from rootwright.proof.functions import ends
from rootwright.proof.groups import shaved
from rootwright.proof.intervals import Interval
from rootwright.proof.ranges import WIDE, Ranges, as_ball, exact_ends, ranges
from rootwright.proof.search import judge_ends, judge_inside, outside as judge_outside, split, unjudged

_PIECES = 4096              # of a box over which the range of a group's values is found
_FIRST, _FEWEST = 128, 128  # boxes of the first wave and of the shortest, where there is a time
_SHORT = 0.5                # seconds that a wave should take then


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
    least: list = field(default_factory=list)       # lower bounds of |g_x| in them
    rises: set = field(default_factory=set)         # signs of g_x in them
    inside_range: float = 1.0                       # share of the ranges that meets the requirements, from above

    def leave(self, claim, need, low, high, index):
        if need.any():
            self.open.setdefault(claim, []).append(Left(low[need], high[need], index))

    def needs(self, claims):
        """True where something that one of the claims needs is open."""
        return any(claim in self.open for claim in claims)

    def add(self, other):
        """Takes over what a search inside has found."""
        for claim, lefts in other.open.items():
            self.open.setdefault(claim, []).extend(lefts)
        self.active += other.active
        self.least += other.least
        self.rises |= other.rises

    def keep(self, judged, done, low, high, index):
        """Notes the boxes that are done with and may hold a zero."""
        active = judged.active & ~judged.outside & done
        if active.any():
            self.rises |= set(judged.rise[active & (judged.rise != 0)].tolist())
            self.active.append((index, low[active], high[active], judged.rise[active]))
            self.least.append(judged.least[active])


class Limit:
    """How much work may be done: a number of boxes, and a time that is looked at between waves only.

    Where there is a time, waves are kept short enough to be done with soon after it is over. What is found does not depend on their length.
    """

    def __init__(self, boxes, seconds=None, progress=None):
        self.boxes, self.progress = boxes, progress
        self.waves = 0
        self.until = None if seconds is None else time.monotonic() + seconds
        self.spent = 0
        self._pace, self._since = _FIRST, time.monotonic()

    def wave(self, ceiling):
        """Boxes that the next wave may hold; 0 where a limit is reached."""
        self._since = time.monotonic()
        if self.reached(ceiling):
            return 0
        length = WAVE if self.until is None else self._pace
        return math.ceil(min(length, ceiling - self.spent))

    def take(self, count, stage, waiting, settled):
        """A wave is done; `settled` is a function that tells the share of the work that is."""
        self.spent += count
        self.waves += 1
        if self.until is not None:
            used = max(time.monotonic() - self._since, 1e-6)
            self._pace = int(min(max(count * _SHORT / used, _FEWEST), 2 * self._pace, WAVE))
        if self.progress:
            self.progress(stage, self.spent, waiting, settled())

    def reached(self, ceiling):
        return self.spent >= ceiling or self.late()

    def late(self):
        """True where the time is over."""
        return self.until is not None and time.monotonic() > self.until


class Domain:
    """Charts of one model, plain or relative to the pivots of a scaling, with their ranges.

    `edges` and `grouped`: as of `Chart`; `charts` is empty where there is no group whose value is known to exist all over the range.
    """

    def __init__(self, model, scaling=None, edges=False, grouped=False):
        self.model, self.scaling, self.grouped = model, scaling, grouped
        fixed = scaling.pivots if scaling else ()
        self.lower = Chart(model, fixed, edges=edges, grouped=grouped)
        self.ranges = self._ranges()
        self.charts = [self.lower] if self.ranges else []
        if self.charts and model.unknown.open_upper:
            self.charts.append(Chart(model, fixed, from_upper=True, edges=edges, grouped=grouped))
        self.upper = (self.charts or [self.lower])[-1]
        self.opened = [model.unknown.open_lower, True]
        self.bounds = [(ends(as_ball(low))[0], ends(as_ball(high))[1]) for low, high in exact_ends(model).values()]

    def _ranges(self):
        if not self.grouped:
            return ranges(self.model, self.lower.variables, self.scaling)
        chart = self.lower
        if not chart.groups:
            return None
        names = [p.name for p in self.model.parameters if not self.scaling or p.name not in self.scaling.pivots]
        plain = ranges(self.model, [*names, None], self.scaling)

        def outside(low, high):
            return _failing(self._values(chart, chart.every_requirement, names, low, high), chart.every_requirement, len(low))

        low, high = shaved(outside, plain.low, plain.high)
        at = {name: (low[k], high[k], plain.logs[k]) for k, name in enumerate(names)} | {chart.variables[-1]: (0.0, 1.0, False)}
        nodes = [group.node for group in chart.groups]
        for group, node in zip(chart.groups, nodes):
            pieces = _pieces(low[:-1], high[:-1], [k for k, name in enumerate(names) if name in chart._inputs([node])])
            inside = ~outside(*pieces)
            value = self._values(chart, [node], names, *pieces)[node]
            bottom, top = (np.broadcast_to(end, len(inside))[inside] for end in (value.low, value.high))
            undefined = np.any(np.broadcast_to(value.undefined, len(inside))[inside])
            bottom, top = float(bottom.min(initial=np.inf)), float(top.max(initial=-np.inf))
            if undefined or not (math.isfinite(bottom) and math.isfinite(top)):
                return None
            at[group.name] = bottom, top, bottom > 0 and top / bottom > WIDE
        low, high, logs = (np.array(column) for column in zip(*(at[name] for name in chart.variables)))
        low, high = shaved(lambda low, high: judge_outside(chart, low, high), low, high)
        return Ranges(tuple(chart.variables), low, high, np.array([bool(log or a > 0 and b / a > WIDE) for log, a, b in zip(logs, low, high)]))

    @staticmethod
    def _values(chart, nodes, names, low, high):
        inputs = {name: Interval(low[:, k], high[:, k]) for k, name in enumerate(names)}
        with np.errstate(all="ignore"):
            return evaluate(chart.graph.instructions, nodes, chart.arithmetic, inputs)

    def whole(self):
        """The box of everything that each chart has to look after."""
        high = self.ranges.high.copy()
        high[-1] = 1.0 if len(self.charts) == 1 else 0.5
        return self.ranges.low[None, :].copy(), high[None, :]

    def judges(self, limit=None):
        """{name: function of arrays (low, high)} for a Crew, made ready unless its time is over."""
        for chart in self.charts:
            chart.prepare(limit)
        inside = {f"{name} {index}": partial(judge_inside, chart, opened=opened, steep=name == "slope")
                  for index, (chart, opened) in enumerate(zip(self.charts, self.opened)) for name in ("inside", "slope")}
        return {"ends": partial(judge_ends, self.lower, self.upper, self.model)} | inside


def _failing(values, conditions, size):
    """True where some condition fails all over a box."""
    result = np.zeros(size, bool)
    for node in conditions:
        result |= ~np.broadcast_to(values[node].yes, size)
    return result


def _pieces(low, high, places):
    """A box cut evenly in some of its variables: (low, high), one row a piece, at most `_PIECES` of them."""
    a, b = low[None].copy(), high[None].copy()
    count = int(_PIECES ** (1.0 / max(len(places), 1)))
    for k in places:
        cuts = np.linspace(low[k], high[k], count + 1)
        cuts[0], cuts[-1] = low[k], high[k]
        rows = len(a)
        a, b = np.repeat(a, count, 0), np.repeat(b, count, 0)
        a[:, k], b[:, k] = np.tile(cuts[:-1], rows), np.tile(cuts[1:], rows)
    return a, b


def search_ends(domain, crew, limit, ceiling, outcome):
    """Cuts boxes of parameters until the bracket is in order and the signs differ at its ends; fills the outcome."""
    low, high = domain.ranges.low[None, :].copy(), domain.ranges.high[None, :].copy()
    low[:, -1] = high[:, -1] = 0.0
    beyond = 0.0

    def note(judged, _, low, high):
        nonlocal beyond
        beyond += domain.ranges.volume(low, high)[judged.outside].sum()

    left = _search(domain, crew, limit, ceiling, "ends", lambda judged: ~judged.outside & ~(judged.ordered & judged.change), note, low, high)
    outcome.inside_range = max(1.0 - beyond, 0.0)
    for claim in ("ordered", "change"):
        outcome.leave(claim, ~left.judged.outside & ~getattr(left.judged, claim), left.low, left.high, 0)


def search_inside(domain, index, crew, limit, ceiling, outcome, wanted, low=None, high=None, name="inside"):
    """Cuts boxes of parameters and share until nothing that the claims in `wanted` need is open; fills the outcome.

    `name` is that of the judge: `slope` cuts what moves the slope alone.
    """
    if low is None:
        low, high = domain.whole()

    def open_of(judged):
        needs = needs_of(judged)
        return np.logical_or.reduce([needs[claim] for claim in wanted])

    def note(judged, done, low, high):
        outcome.keep(judged, done, low, high, index)

    left = _search(domain, crew, limit, ceiling, f"{name} {index}", open_of, note, low, high, 2.0 ** -160)
    for claim, need in needs_of(left.judged).items():
        outcome.leave(claim, need, left.low, left.high, index)
    outcome.keep(left.judged, np.ones(len(left.low), bool), left.low, left.high, index)


def needs_of(judged):
    """Claim -> where it is not settled."""
    here = ~judged.outside
    active = here & judged.active
    return {"defined": here & judged.undefined,
            "continuous": here & judged.undefined | active & judged.jump,
            "unique": here & judged.undefined | active & (judged.jump | (judged.rise == 0)),
            "kink": active & judged.switch}


@dataclass
class _Boxes:
    """Boxes, and what was found of them: of what they were cut from, where they have not been looked at, which holds of its parts as well."""
    low: np.ndarray
    high: np.ndarray
    judged: object

    def rows(self, at):
        return _Boxes(self.low[at], self.high[at], _judged(self.judged, lambda part: part[at]))

    def with_(self, other):
        both = {field.name: np.concatenate([getattr(self.judged, field.name), getattr(other.judged, field.name)])
                for field in fields(self.judged)}
        return _Boxes(np.concatenate([self.low, other.low]), np.concatenate([self.high, other.high]), type(self.judged)(**both))


def _judged(judged, change):
    return type(judged)(**{field.name: change(getattr(judged, field.name)) for field in fields(judged)})


def _search(domain, crew, limit, ceiling, name, open_of, note, low, high, finest=0.0):
    """Looks at boxes, first come first served, and cuts those where `open_of(judged)` holds; returns what is left when a limit is reached.

    `note(judged, done, low, high)` is told of every wave. Parts of a box wait in its place, so the order does not depend on waves.
    """
    waiting = _Boxes(low, high, unjudged(name, low))
    left = waiting.rows(slice(0, 0))
    while len(waiting.low):
        count = limit.wave(ceiling)
        if not count:
            break
        now, waiting = waiting.rows(slice(0, count)), waiting.rows(slice(count, None))
        now.judged = crew.judge(name, now.low, now.high)
        open_ = open_of(now.judged)
        note(now.judged, ~open_, now.low, now.high)
        parts, stuck = _cut(domain, now.rows(open_), finest)
        waiting, left = waiting.with_(parts), left.with_(stuck)
        limit.take(len(now.low), name.split()[0], len(waiting.low), lambda: domain.ranges.settled(waiting.low, waiting.high))
    return left.with_(waiting)


def _cut(domain, boxes, finest):
    """(halves of boxes, boxes too thin to cut)."""
    widths = domain.ranges.widths(boxes.low, boxes.high)
    low, high, stuck = split(boxes.low, boxes.high, boxes.judged.smear, widths, domain.ranges.logs, finest)
    fresh = np.nonzero(~stuck)[0]
    halves = np.stack([fresh, fresh + len(stuck)], axis=1).ravel()
    return _Boxes(low[halves], high[halves], boxes.rows(np.repeat(fresh, 2)).judged), boxes.rows(stuck)


def share(domain, lefts, inside_range):
    """Share of the operating range that boxes left open hold, in the coordinates of the spreads; the unknown is left out."""
    if not lefts:
        return 0.0
    low, high = (np.concatenate([getattr(left, end)[:, :-1] for left in lefts]) for end in ("low", "high"))
    boxes = np.unique(np.concatenate([low, high], axis=1), axis=0)
    half, pad = low.shape[1], np.zeros((len(boxes), 1))
    volume = domain.ranges.volume(np.concatenate([boxes[:, :half], pad], 1), np.concatenate([boxes[:, half:], pad], 1))
    return float(min(1.0, volume.sum() / max(inside_range, 1e-300)))
