"""Where differentiation through the iterations goes wrong: the same residual, three loops, on the tape."""

import numpy as np

from rootwright.evidence.bench.build import open_rows

STEPS = range(9)                 # Newton's method stopped after so many steps
SECANTS = 60                     # steps of the loop with a fixed number of them


def pitfalls(problem, built):
    """Numbers for the page, over the checked points; None without the tape."""
    if "tape" not in built.paths or not len(problem.roots):
        return None
    loops = _Loops(problem, built)
    return {"points": len(problem.roots), "bisection": loops.measured(0, 0),
            "stopped": [{"steps": steps} | loops.measured(1, steps) for steps in STEPS],
            "where": {"back": loops.measured(2, SECANTS), "on": loops.measured(3, SECANTS), "steps": SECANTS}}


class _Loops:
    def __init__(self, problem, built):
        self.problem = problem
        self.ffi, self.library = open_rows(built.paths["tape"], "tape")

    def measured(self, what, steps):
        """Errors of one loop: medians over the points (and worst ones), of the root and of its derivatives."""
        problem, checked = self.problem, len(self.problem.roots)
        y = np.full((checked, len(problem.results)), np.nan)
        through, implicit = (np.full(problem.derivatives.shape, np.nan) for _ in range(2))
        points = np.ascontiguousarray(problem.points[:checked])
        pointers = [self.ffi.cast("double *", array.ctypes.data) for array in (points, y, through, implicit)]
        self.library.rw_pitfall(what, steps, checked, *pointers)
        with np.errstate(all="ignore"):
            roots = np.abs(y[:, 0] - problem.roots)/np.maximum(np.abs(problem.roots), 1e-300)
            by_loop, by_rule = (np.abs(jac - problem.derivatives)/problem.scales for jac in (through, implicit))
        known = np.isfinite(problem.derivatives[:, 0])
        of_root, of_rule = by_loop[:, 0][known], by_rule[:, 0][known]
        zero = through[:, 0][known & (problem.derivatives[:, 0] != 0.0)] == 0.0
        return {"root_median": _median(roots), "root_worst": _worst(roots),
                "through_median": _median(of_root), "through_worst": _worst(of_root),
                "implicit_median": _median(of_rule), "implicit_worst": _worst(of_rule),
                "derivatives": int(known.sum()), "zero": int(zero.sum()),
                "not_a_number": int((~np.isfinite(of_root)).sum())}


def _median(values):
    values = values[np.isfinite(values)]
    return float(np.median(values)) if values.size else float("nan")


def _worst(values):
    values = values[np.isfinite(values)]
    return float(np.max(values)) if values.size else float("nan")
