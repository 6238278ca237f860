"""What the module is to reach, and whether the interval of a ratio clears it."""

import math

from rootwright.evidence.bench.rows import BASE, BRENT_PYTHON, PLAIN, SOLVE, TAPE, TAPE_LEAN

OFF = 1e-6                       # a derivative with a larger error is wrong: beside a flat root, 1e-8 may be its own rounding
LIMITS = {                       # at most, by name of the spec: solve with jacobian, of one evaluation
    "pipe_friction": 4.5, "kepler": 2.5, "solar_diode": 4.5, "redlich_kwong": 10.0, "peng_robinson_liquid": 10.0,
}
JACOBIAN = 1.15                  # at most: solve with jacobian, of the solve
TAPES = 20.0                     # at least: tapes through the iterations, of the module
BRENT = 100.0                    # at least: Brent's method called from Python, of the module
MEDIAN, WORST = 3, 24            # at most: evaluations a solve, from cold
LIBRARY = 2.0                    # at most: our tape, of a C++ library's that records the same loop


def goals(facts):
    """List of {goal, at_most, at_least (one is None), value, low, high, verdict, by}: "met" where the whole interval
    clears the goal, "missed" where none of it does, "open" between; by: what it is missed by, as a factor."""
    rows = {row["key"]: row for row in facts["rows"]}
    found = []

    def judge(goal, ratio, **bound):
        if ratio:
            found.append(_judge(goal, ratio, **bound))

    if facts["name"] in LIMITS:
        judge("solve with jacobian, of the limit", rows[BASE].get("to_limit"), at_most=LIMITS[facts["name"]])
    judge("solve with jacobian, of the solve", _inverse(rows[SOLVE].get("to_module")), at_most=JACOBIAN)
    for key, least, text in ((TAPE, TAPES, "tape, plain loop, of the module"),
                             (TAPE_LEAN, TAPES, "tape, textbook loop, of the module"),
                             (BRENT_PYTHON, BRENT, "SciPy brentq from Python, of the module")):
        judge(text, rows[key].get("to_module"), at_least=least)
    for key, most in (("median", MEDIAN), ("worst", WORST)):
        value = facts["evaluations"][key]
        judge(f"evaluations a solve from cold, {key}", {"value": value, "low": value, "high": value}, at_most=most)
    judge("our tape, of ADOL-C, the same loop", facts["tape"]["to_library"], at_most=LIBRARY)
    return found


def wrong(facts):
    """Lines that say what no benchmark may show of the module: a point without its root, a derivative that is off."""
    lines = []
    for row in facts["rows"]:
        if row["key"] not in (SOLVE, BASE, PLAIN):
            continue
        if row["failures"]:
            lines.append(f"{row['title']}: {row['failures']} of {row['failures_of']:,} points failed")
        error = row["derivative_error"]
        if error is not None and error["worst"] > OFF:
            lines.append(f"{row['title']}: a derivative is off by {error['worst']:.1e}; the limit is {OFF:g}")
    return lines


def _inverse(ratio):
    return ratio and {"value": 1.0/ratio["value"], "low": 1.0/ratio["high"],
                      "high": 1.0/ratio["low"] if ratio["low"] else math.inf}


def _judge(goal, ratio, at_most=None, at_least=None):
    if at_most is not None:
        met, missed, by = ratio["high"] <= at_most, ratio["low"] > at_most, ratio["value"]/at_most
    else:
        met, missed, by = ratio["low"] >= at_least, ratio["high"] < at_least, at_least/ratio["value"]
    verdict = "met" if met else "missed" if missed else "open"
    return {"goal": goal, "at_most": at_most, "at_least": at_least} | ratio | {"verdict": verdict,
                                                                               "by": None if met else by}
