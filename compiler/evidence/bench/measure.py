"""Times of all rows in one process: rounds in which every row runs once, in an order that changes.

Run in several processes (`processes`): what differs between them (where memory lies, who else works on the
machine) is part of the interval that a ratio comes with. Each process keeps to one core, and its CPU time is counted: a
row does not pay for others who work on the machine, nor gain by a second core.
"""

import contextlib
import os
import random
import statistics
import time
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass
from multiprocessing import get_context

from rootwright.evidence.bench.rows import ROWS, Compiled, make

ROUNDS = (3, 25)
LONGEST = 0.02                   # seconds of one row in one round; slower rows take fewer points


@dataclass(frozen=True)
class Times:
    """One process: medians over its rounds, ns a root, and how many points a row was timed over."""
    throughput: dict[str, float]
    latency: dict[str, float]
    points: dict[str, int]
    rounds: int


@contextlib.contextmanager
def crew(count):
    """That many processes of their own, each started when it is first asked and kept for all specs of a run."""
    with contextlib.ExitStack() as stack:
        yield [stack.enter_context(ProcessPoolExecutor(1, mp_context=get_context("spawn"))) for _ in range(count)]


def processes(problem, built, crew, seconds, progress=None):
    """Times of the processes of a crew, one after another, each measuring for about `seconds`."""
    found = []
    for k, process in enumerate(crew):
        if progress is not None:
            progress(f"{problem.name}: timing, process {k + 1} of {len(crew)}")
        found.append(process.submit(measure, problem, built, seconds, k).result())
    return found


def measure(problem, built, seconds, seed):
    """Times of one process."""
    with contextlib.suppress(AttributeError, OSError):       # not on every system
        os.sched_setaffinity(0, {max(os.sched_getaffinity(0))})
    runs, points = {}, {}
    for row in ROWS:
        try:
            runner = make(row, problem, built)
            size = _size(runner, len(problem.points))
        except Exception:                # absent, or a library that refuses: `judge` says which
            continue
        runs[row.key, False], points[row.key] = (runner.run, (size,)), size
        if isinstance(runner, Compiled):
            runs[row.key, True] = runner.run, (size, True)
    generator, order = random.Random(seed), list(runs)
    samples = {key: [] for key in order}
    began = time.perf_counter()
    while len(samples[order[0]]) < ROUNDS[1]:
        generator.shuffle(order)
        for key in order:
            run, arguments = runs[key]
            start = time.process_time_ns()
            run(*arguments)
            samples[key].append((time.process_time_ns() - start)/arguments[0])
        if time.perf_counter() - began > seconds and len(samples[order[0]]) >= ROUNDS[0]:
            break
    medians = {key: statistics.median(values) for key, values in samples.items()}
    return Times({key: value for (key, chained), value in medians.items() if not chained},
                 {key: value for (key, chained), value in medians.items() if chained}, points, len(samples[order[0]]))


def _size(runner, most):
    """How many points a row runs over within LONGEST, a power of 4 up to all; the row is warm afterwards. Rows over
    whole arrays take all points."""
    size = most if runner.whole else 4
    while True:
        runner.run(min(size, most))
        start = time.process_time()
        runner.run(min(size, most))
        if size >= most or 4.0*(time.process_time() - start) > LONGEST:
            return min(size, most)
        size *= 4
