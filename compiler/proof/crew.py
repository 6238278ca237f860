"""Chunks of boxes judged by one or several processes. What is judged together does not depend on how many there are."""

import multiprocessing
from dataclasses import fields

import numpy as np

CHUNK = 512             # boxes judged at once
WAVE = 4 * CHUNK        # boxes of a wave

_judges = {}            # name -> function of arrays (low, high), in this process and in those forked from it


class Crew:
    """Worker processes, forked after `judges` ({name: function(low, high) -> dataclass of arrays}) are known."""

    def __init__(self, judges, workers=1):
        _judges.clear()
        _judges.update(judges)
        self.pool = multiprocessing.get_context("fork").Pool(workers) if workers > 1 else None

    def __enter__(self):
        return self

    def __exit__(self, *error):
        if self.pool:
            self.pool.terminate()
            self.pool.join()

    def judge(self, name, low, high):
        """The outcome of all boxes, chunk after chunk."""
        tasks = [(name, low[start:start + CHUNK], high[start:start + CHUNK]) for start in range(0, len(low), CHUNK)]
        outcomes = self.pool.map(_judge, tasks, chunksize=1) if self.pool else list(map(_judge, tasks))
        kind = type(outcomes[0])
        return kind(*(np.concatenate([getattr(outcome, field.name) for outcome in outcomes]) for field in fields(kind)))


def _judge(task):
    name, low, high = task
    return _judges[name](low, high)
