"""The benchmark of a closure: build, check, time, compare. Returns plain data, for `page.py`, `plot.py` and JSON."""

import os
import platform
import statistics
import tempfile
from importlib import metadata

from rootwright.binding.build import FLAGS, compiler_version, find_compiler
from rootwright.evidence.bench.build import build
from rootwright.evidence.bench.goals import goals, wrong
from rootwright.evidence.bench.judge import KEPT, judge
from rootwright.evidence.bench.measure import processes
from rootwright.evidence.bench.pitfalls import pitfalls
from rootwright.evidence.bench.problem import CHECKED, POINTS, pose
from rootwright.evidence.bench.rows import ADOLC, BASE, LIMIT, PLAIN, ROWS, SOLVE, TAPE, TERMS, solver
from rootwright.evidence.bench.statistics import ratio, spread

PROCESSES = 5                    # in which a run measures
SECONDS = (0.5, 3.0)             # of timing in each process: at least, where there are many specs, and at most
TOGETHER = 6.0                   # ... and so many for all specs, between these
LIBRARIES = ("numpy", "scipy", "autograd", "jax")


def share(specs):
    """Seconds of timing in each process for one of so many specs."""
    least, most = SECONDS
    return max(least, min(most, TOGETHER/specs))


class NotMeasured(Exception):
    """There is nothing to measure; the message says why."""


def benchmark(closure, plan, crew, seconds=SECONDS[1], points=POINTS, checked=CHECKED, progress=None):
    """Facts about a Closure of order 1 or more and the Plan of its module, timed by a crew of processes: every row's time,
    ratios, errors; see `page.render`.

    progress is called with a line of text now and then. Raises NoCompiler, BuildFailed, NotMeasured.
    """
    def say(text):
        if progress is not None:
            progress(f"{closure.model.name}: {text}")

    with tempfile.TemporaryDirectory(prefix="rootwright-bench-") as folder:
        say("building the rows in C and C++")
        built = build(closure, plan, folder)
        say("certified roots and derivatives")
        problem = pose(closure, solver(built, closure), points, checked)
        if not len(problem.roots):
            raise NotMeasured("no point of the operating range was found at which the reference settles a root")
        judged = judge(problem, built, progress)
        times = processes(problem, built, crew, seconds, progress)
        say("where the iterate-through approach goes wrong")
        lost = pitfalls(problem, built)
    evaluations = judged[SOLVE].counts
    facts = {
        "name": closure.model.name, "title": closure.model.title, "digest": closure.model.digest,
        "plan": {"planned": plan.closure is not None, "why": list(plan.why)},
        "terms": TERMS, "environment": _environment(times, problem),
        "rows": [_row(row, judged[row.key], times) for row in ROWS],
        "evaluations": {"median": statistics.median(evaluations), "worst": max(evaluations)},
        "tape": _tape(judged, times),
        "pitfalls": lost,
    }
    return facts | {"goals": goals(facts), "wrong": wrong(facts)}


def _tape(judged, times):
    """Sizes of the tape through the plain loop, point by point, beside that loop's evaluations; its time for one operation
    in ns; and its ratio to the library's tape of the same loop."""
    found = {"evaluations": list(judged[PLAIN].counts[:KEPT]), "operations": list(judged[TAPE].counts[:KEPT]),
             "ns_an_operation": None, "to_library": None}
    own, library = ([process.throughput.get(key) for process in times] for key in (TAPE, ADOLC))
    if judged[TAPE].counts and all(own):
        found["ns_an_operation"] = statistics.median(own)/statistics.median(judged[TAPE].counts)
    if all(own) and all(library):
        found["to_library"] = _ratio(own, library)
    return found


def _row(row, judged, times):
    facts = {"key": row.key, "group": row.group, "title": row.title, "setting": row.setting,
             "absent": judged.absent or None}
    if not judged.absent and all(row.key in process.throughput for process in times):
        facts |= _timed(row.key, times)
    elif not judged.absent:
        facts["absent"] = "not timed: a process could not run it"
    return facts | {
        "derivative_error": {"median": judged.median, "worst": judged.worst} if row.jacobian else None,
        "root_error": judged.root, "failures": judged.failures, "failures_of": judged.points,
        "operations": statistics.median(judged.counts) if row.taped and judged.counts else None, "bytes": judged.bytes}


def _timed(key, times):
    own = [process.throughput[key] for process in times]
    facts = {"ns": statistics.median(own), "spread": spread(own),
             "points": min(process.points[key] for process in times)}
    facts |= {"to_module": _ratio(own, [process.throughput[BASE] for process in times]),
              "to_limit": _ratio(own, [process.throughput[LIMIT] for process in times]), "latency": None}
    if key in times[0].latency:
        chained = [process.latency[key] for process in times]
        facts["latency"] = {"ns": statistics.median(chained), "spread": spread(chained),
                            "to_module": _ratio(chained, [process.latency[BASE] for process in times]),
                            "to_limit": _ratio(chained, [process.latency[LIMIT] for process in times])}
    return facts


def _ratio(above, below):
    value, low, high = ratio(above, below)
    return {"value": value, "low": low, "high": high}


def _environment(times, problem):
    load = getattr(os, "getloadavg", tuple)()            # not on every system
    return {"processor": _processor(), "cores": os.cpu_count(), "load": [round(value, 2) for value in load],
            "compiler": compiler_version(find_compiler()).splitlines()[0], "flags": " ".join(FLAGS),
            "python": platform.python_version(), "libraries": {name: _version(name) for name in LIBRARIES},
            "processes": len(times), "rounds": min(process.rounds for process in times), "points": len(problem.points),
            "checked": len(problem.roots)}


def _processor():
    try:
        with open("/proc/cpuinfo", encoding="utf-8", errors="replace") as lines:
            return next(line.partition(":")[2].strip() for line in lines if line.startswith("model name"))
    except (OSError, StopIteration):
        return platform.processor() or platform.machine()


def _version(name):
    try:
        return metadata.version(name)
    except metadata.PackageNotFoundError:
        return None
