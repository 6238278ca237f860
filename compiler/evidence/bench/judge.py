"""What every row computes, held against the certified truth."""

import warnings
from dataclasses import dataclass

import numpy as np

from rootwright.evidence.bench.rivals import Absent
from rootwright.evidence.bench.rows import ROWS, Compiled, make

SAME = 1e-6                      # a root further than this from the module's, relatively, is another root or none
SMALL = 1e-9                     # ... where a root counts as at least this share of the median one
KEPT = 512                       # points whose tape sizes are kept for the plot


@dataclass(frozen=True)
class Judged:
    """A row's errors: derivatives against their scale, roots relatively; NaN where there is nothing to measure."""
    absent: str = ""                     # why the row did not run
    median: float = float("nan")
    worst: float = float("nan")
    root: float = float("nan")
    failures: int = 0                    # points without the root, or without a derivative that is a number
    points: int = 0                      # of so many
    counts: tuple[int, ...] = ()         # evaluations, or operations on the tape, point by point
    bytes: int | None = None             # of the median tape


def judge(problem, built, progress=None):
    """{key of a row: Judged}."""
    found = {}
    for row in ROWS:
        if progress is not None:
            progress(f"{problem.name}: checking {row.title}")
        try:
            with warnings.catch_warnings():
                warnings.simplefilter("ignore")
                found[row.key] = _judged(row, problem, make(row, problem, built))
        except Absent as reason:
            found[row.key] = Judged(str(reason))
        except Exception as error:       # a library that lacks an operation, say
            found[row.key] = Judged(f"not able to: {type(error).__name__}: {' '.join(str(error).split())[:60]}")
    return found


def _judged(row, problem, runner):
    compiled, checked = isinstance(runner, Compiled), len(problem.roots)
    n = len(problem.points) if compiled else checked
    outcome = runner.outcome(n)
    size = np.maximum(np.abs(problem.solved[:n]), SMALL*np.nanmedian(np.abs(problem.solved)))
    failed = outcome.failed | ~(np.abs(outcome.y[:, 0] - problem.solved[:n]) <= SAME*size)
    roots = np.abs(outcome.y[:checked, 0] - problem.roots)/size[:checked]
    median = worst = np.nan
    if row.jacobian:
        wanted = np.array(problem.wanted)
        known = np.isfinite(problem.derivatives)
        errors = np.abs(outcome.jac[:checked] - problem.derivatives)/problem.scales
        number = np.isfinite(outcome.jac[:, :, wanted]).all(axis=(1, 2))
        number[:checked] |= ~known[:, :, wanted].any(axis=(1, 2))
        failed = failed | ~number
        errors = errors[known & ~failed[:checked, None, None]]
        if errors.size:
            median, worst = float(np.median(errors)), float(np.max(errors))
    good = roots[~failed[:checked]]
    counts = () if outcome.count is None else tuple(int(count) for count in outcome.count)
    held = runner.bytes(int(np.median(outcome.count))) if row.taped else None
    return Judged("", median, worst, float(good.max()) if good.size else np.nan, int(failed.sum()), n, counts, held)
