"""Soak run: many points over the shipped specs, with ball arithmetic as judge.

    python tests/soak.py [points] [spec...]

100,000 points over all shipped specs by default, of the C module where there is a compiler. Roots within their limit
and covered by error_bound at every point, derivatives within theirs, everything inside the operating range solved: all
that `verify` holds a module to. Exits 1 where anything fails. `test_verify.py` samples the same.
"""

import statistics
import sys
import time

from rootwright import pipeline
from rootwright.evidence.limits import OVERESTIMATE
from rootwright.evidence.verify import hold, modules, render

POINTS = 100_000
SEED = 20


def soak(spec, points, progress=None):
    """Report on one spec: the C module, or the Python one without a compiler."""
    closure = pipeline.promising(spec)
    built, notes = modules(closure)
    target = next(iter(built))
    return hold(closure, {target: built[target]}, points, SEED, progress, notes)


def line(report):
    """What a report says in one line."""
    worst = {measure.key: measure for measure in report.measures}
    parts = [f"{report.corners + report.random:6} points"]
    for key in ("root", "bound", "output", "derivative"):
        if key in worst:
            parts.append(f"{key} {worst[key].worst:8.2g}")
    if "derivative" in worst:
        parts.append(f"{100*worst['derivative'].within:6.2f} % within 1e-12")
    parts.append(f"bound over error {report.overestimate:5.3g}")
    status = ", ".join(f"{count} {word}" for words in report.statuses.values() for word, count in words.items())
    return f"{report.name:22}" + "  ".join([*parts, status])


def main(arguments):
    points = int(arguments.pop(0)) if arguments and arguments[0].isdecimal() else POINTS
    specs = arguments or pipeline.shipped()
    started, overestimates, failures = time.monotonic(), [], 0
    for spec in specs:
        report = soak(spec, -(-points//len(specs)))
        print(line(report), flush=True)
        for reason, count in report.skipped.items():
            print(f"{'':24}{count} {reason}", flush=True)
        if report.failed:
            print(render(report), flush=True)
        failures += report.failures
        overestimates.append(report.overestimate)
    low, middle, high = min(overestimates), statistics.median(overestimates), max(overestimates)
    print(f"{failures} failures in {time.monotonic() - started:.0f} s; error_bound over true error plus half an ulp: "
          f"medians {low:.3g} to {high:.3g}, in the middle {middle:.3g} (goal: {OVERESTIMATE:g})")
    return 1 if failures else 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
