"""What the module is to reach, and whether the interval of a ratio clears it."""

import math

from rootwright.evidence.bench.rows import BRENT_PYTHON, SOLVE, TAPE

JACOBIAN = 1.15                  # at most: solve with jacobian, of the solve
TAPES = 20.0                     # at least: the tape through the module's loop, of the module
BRENT = 100.0                    # at least: Brent's method called from Python, of the module
MEDIAN, WORST = 3, 24            # evaluations a solve, from cold


def goals(facts):
    """List of {goal, at_most, at_least (one is None), value, low, high, verdict}: "met" where the whole interval clears
    the goal, "missed" where none of it does, "open" between."""
    rows = {row["key"]: row for row in facts["rows"]}
    found = []
    solve = rows[SOLVE].get("to_module")
    if solve:
        inverse = {"value": 1.0/solve["value"], "low": 1.0/solve["high"],
                   "high": 1.0/solve["low"] if solve["low"] else math.inf}
        found.append(_judge("solve with jacobian, of the solve", inverse, at_most=JACOBIAN))
    for key, least, text in ((TAPE, TAPES, "tape, reverse, of the module"),
                             (BRENT_PYTHON, BRENT, "SciPy brentq from Python, of the module")):
        if rows[key].get("to_module"):
            found.append(_judge(text, rows[key]["to_module"], at_least=least))
    for key, most in (("median", MEDIAN), ("worst", WORST)):
        value = facts["evaluations"][key]
        exact = {"value": value, "low": value, "high": value}
        found.append(_judge(f"evaluations a solve from cold, {key}", exact, at_most=most))
    return found


def _judge(goal, ratio, at_most=None, at_least=None):
    if at_most is not None:
        met, missed = ratio["high"] <= at_most, ratio["low"] > at_most
    else:
        met, missed = ratio["low"] >= at_least, ratio["high"] < at_least
    verdict = "met" if met else "missed" if missed else "open"
    return {"goal": goal, "at_most": at_most, "at_least": at_least} | ratio | {"verdict": verdict}
