"""Boxes that may hold a zero as far as their enclosure tells, and hold none: cut until it shows, where that decides whether there is one zero."""

import numpy as np

from rootwright.proof.crew import WAVE
from rootwright.proof.search import split

_BOXES = 6000


def drop_phantoms(domain, crew, limit, outcome):
    """Where zeros seem to have slopes of both signs, looks closer at the rarer sign; takes it out of the outcome where no box of it is left."""
    if len(outcome.rises) < 2 or any(need != "kink" for need in outcome.open):
        return
    counts = {sign: sum(int((rise == sign).sum()) for *_, rise in outcome.active) for sign in (1, -1)}
    rarer = min((1, -1), key=lambda sign: counts[sign])
    for index, low, high, rise in outcome.active:
        if not _vanish(domain, crew, limit, index, low[rise == rarer], high[rise == rarer]):
            return
    outcome.rises.discard(rarer)
    outcome.least = [least[rise != rarer] for least, (*_, rise) in zip(outcome.least, outcome.active)]
    outcome.active = [(index, low[rise != rarer], high[rise != rarer], rise[rise != rarer]) for index, low, high, rise in outcome.active]


def _vanish(domain, crew, limit, index, low, high):
    spent = 0
    while len(low):
        if spent >= _BOXES or limit.reached(np.inf):
            return False
        now, low, high = (low[:WAVE], high[:WAVE]), low[WAVE:], high[WAVE:]
        judged = crew.judge(f"inside {index}", *now)
        spent += len(now[0])
        limit.spent += len(now[0])
        left = judged.active & ~judged.outside
        a, b = now[0][left], now[1][left]
        first, last, stuck = split(a, b, judged.smear[left], domain.ranges.widths(a, b), domain.ranges.logs)
        if stuck.any():
            return False
        low, high = np.concatenate([low, first]), np.concatenate([high, last])
    return True
