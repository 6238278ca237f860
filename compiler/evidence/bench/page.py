"""The benchmark as a page: ratios first, then accuracy, latency, what goes wrong, and what each row is."""

import math
import textwrap

from rootwright.emit.text import folded
from rootwright.evidence.bench.rows import BASE

WIDTH = 100
_NAME = 35                       # widest title of a row
_GROUPS = {"limit": "the limit", "module": "the module", "through": "derivatives through the iterations",
           "differences": "finite differences", "hand": "a solver by hand and the implicit rule"}


def render(facts):
    """Text of the page, lines of at most WIDTH columns."""
    title = f"{facts['name']}: what a root and its derivatives cost"
    head = [title, *_wrapped(folded(facts["title"] or ""), "")]
    lines = [*head, "="*max(map(len, head)), ""]
    lines += [f"Wrong: {line}" for line in facts["wrong"]] + [""]*bool(facts["wrong"])
    for section in (_cost, _accuracy, _latency, _pitfalls, _goals, _method, _settings):
        lines += section(facts)
    return "\n".join(line.rstrip() for line in lines) + "\n"


def _wrapped(text, indent, hang=None):
    return textwrap.wrap(text, WIDTH, initial_indent=indent, subsequent_indent=indent if hang is None else hang,
                         break_on_hyphens=False) if text else []


def figure(value):
    """A number to three digits or so, as it reads best."""
    if value is None or not math.isfinite(value):
        return "-"
    if value >= 99.95:
        return f"{value:,.0f}"
    return f"{value:.1f}" if value >= 9.995 else f"{value:.2f}"


def _interval(ratio):
    return f"{figure(ratio['low'])} to {figure(ratio['high'])}"


def _error(value):
    return "-" if value is None or not math.isfinite(value) else "0" if value == 0.0 else f"{value:.1e}"


def _grouped(facts, line):
    """line(row) of every row that ran, under the names of their groups."""
    lines, last = [], None
    for row in facts["rows"]:
        text = None if row["absent"] else line(row)
        if text is not None:
            if row["group"] != last:
                lines.append(f"  {_GROUPS[row['group']]}")
                last = row["group"]
            lines.append(f"    {row['title']:{_NAME}} {text}")
    return lines


def _times(facts, timed):
    """Table of times; timed(row) is the data of a row, None where it has none."""
    blank = f"    {'':{_NAME}}"
    lines = ["", f"{blank} {'times the':>10}  {'95 % interval':>17}  {'times the':>9}  {'ns a':>10}  {'+-':>5}",
             f"{blank} {'module':>10}  {'':>17}  {'limit':>9}  {'root':>10}"]

    def line(row):
        found = timed(row)
        if found is None:
            return None
        module, limit = found["to_module"], found["to_limit"]
        return (f"{figure(module['value']):>10}  {_interval(module):>17}  {figure(limit['value']):>9}  "
                f"{figure(found['ns']):>10}  {found['spread']:>5.0%}")
    return lines + _grouped(facts, line) + [""]


def _cost(facts):
    n = facts["environment"]["points"]
    lines = [f"Cost of a root with all its derivatives; the module's is 1 (throughput, {n:,} points in cache)"]
    lines += _times(facts, lambda row: row)
    lines += _wrapped(f"The module's solve with jacobian, of the limit: {_of_limit(facts)}.", "    ") + [""]
    missing = [f"{row['title']}: {row['absent']}" for row in facts["rows"] if row["absent"]]
    return lines + [line for text in missing for line in _wrapped(text, "    ", " "*8)] + [""]*bool(missing)


def _of_limit(facts):
    base = next(row for row in facts["rows"] if row["key"] == BASE)
    limits = [(timed["to_limit"], how) for timed, how in ((base, "throughput"), (base["latency"], "latency"))]
    return ", ".join(f"{figure(ratio['value'])} ({_interval(ratio)}) in {how}" for ratio, how in limits)


def _accuracy(facts):
    checked, blank = facts["environment"]["checked"], f"    {'':{_NAME}}"
    lines = [f"Accuracy against certified values at {checked} points; failures; what a tape holds", "",
             f"{blank} {'derivative error':>18}  {'root error':>10}  {'failed':>11}  {'tape':>6}  {'bytes':>7}",
             f"{blank} {'median':>8}  {'worst':>8}  {'worst':>10}  {'':>11}  {'ops':>6}"]

    def line(row):
        error = row["derivative_error"] or {"median": None, "worst": None}
        failed = f"{row['failures']:,}/{row['failures_of']:,}"
        operations = "" if row["operations"] is None else f"{row['operations']:,.0f}"
        size = "" if row["bytes"] is None else f"{row['bytes']:,}"
        return (f"{_error(error['median']):>8}  {_error(error['worst']):>8}  {_error(row['root_error']):>10}  "
                f"{failed:>11}  {operations:>6}  {size:>7}")

    evaluations = facts["evaluations"]
    return lines + _grouped(facts, line) + [""] + _wrapped(
        "Derivative errors are relative, against at least 1e-6 of |result/parameter|; failed points (no root, or a "
        "derivative that is not a number) are left out of them. The module evaluates its residual "
        f"{evaluations['median']:g} times a solve in the median, {evaluations['worst']} at most, whatever it does at the "
        "ends of the bracket included. Tape sizes are medians of one root, bytes with those of the sweep." + _tape(facts["tape"]), "    ") + [""]


def _tape(found):
    text = ""
    if found["ns_an_operation"] is not None:
        text += f" Our tape takes {figure(found['ns_an_operation'])} ns an operation, solver and sweep included"
        if found["to_library"]:
            text += f"; ADOL-C takes {figure(1.0/found['to_library']['value'])} times that for the same loop"
        text += "."
    return text


def _latency(facts):
    return ["Latency: every solve waits for the root of the one before"] + _times(facts, lambda row: row["latency"])


def _pitfalls(facts):
    found = facts["pitfalls"]
    lines = ["Where the iterate-through approach goes wrong", ""]
    if found is None:
        return lines + ["    not measured: it needs a C++ compiler", ""]
    return lines + _bisection(found["bisection"], found["points"]) + _stopped(found["stopped"]) + _where(found["where"])


def _bisection(found, points):
    return _wrapped(
        "A bisection that converges before any Newton step. Every iterate is a middle of the bracket, and knows of the "
        f"parameters what the bracket's ends know. The root is right to {_error(found['root_worst'])}; of its "
        f"{found['derivatives']} derivatives at {points} points the tape says that {found['zero']} are exactly zero; "
        f"median error {_error(found['through_median'])}. The implicit rule at the same roots: median error "
        f"{_error(found['implicit_median'])}, worst {_error(found['implicit_worst'])}.", "  ", "    ") + [""]


def _stopped(found):
    lines = _wrapped(
        "An iteration stopped early. Newton's method in its bracket, from cold, stopped after so many steps; medians. "
        "The derivative through the iterations lags behind the root: where the root is good enough to stop at, its "
        "derivative need not be.", "  ", "    ")
    heads = ("error of the root", "derivative, taped", "worst", "implicit rule there")
    lines += ["", f"    {'steps':>5}  {heads[0]:>18}  {heads[1]:>18}  {heads[2]:>8}  {heads[3]:>20}"]
    return lines + [
        f"    {row['steps']:>5}  {_error(row['root_median']):>18}  {_error(row['through_median']):>18}  "
        f"{_error(row['through_worst']):>8}  {_error(row['implicit_median']):>20}" for row in found] + [""]


def _where(found):
    back, on = found["back"], found["on"]
    return _wrapped(
        f"A `where` in the loop. {found['steps']} secants for every point, as array libraries iterate; a converged "
        "point is held still by `where`, while the secant that it does not take is 0/0. The values are right: the "
        f"root's median error is {_error(on['root_median'])}. Of its {on['derivatives']} derivatives swept forward, "
        f"{on['not_a_number']} are not a number, because 0 times NaN is NaN; swept back on our tape, which passes over "
        f"what nothing depends on, {back['not_a_number']}, with median error {_error(back['through_median'])}, worst "
        f"{_error(back['through_worst'])}.", "  ", "    ") + [""]


def _goals(facts):
    lines = ["Goals (met where the whole interval clears it)", ""]
    for goal in facts["goals"]:
        most = goal["at_most"] is not None
        wanted = f"at most {goal['at_most']:g}" if most else f"at least {goal['at_least']:g}"
        exact = goal["low"] == goal["high"]
        measured = f"{goal['value']:g}" if exact else f"{figure(goal['value'])} ({_interval(goal)})"
        by = f", factor {figure(goal['by'])}" if goal["verdict"] == "missed" else ""
        lines.append(f"    {goal['goal']:39} {wanted:>12}:  {measured:19} {goal['verdict']}{by}")
    return lines + [""]


def _method(facts):
    about = facts["environment"]
    libraries = ", ".join(f"{name} {version}" for name, version in about["libraries"].items() if version)
    load = f"load {', '.join(f'{value:g}' for value in about['load'])}" if about["load"] else "load not known"
    return ["How it was measured", ""] + _wrapped(
        f"{about['processor']}, {about['cores']} cores, {load}. {about['compiler']}, {about['flags']} (C++ rows: the "
        f"same optimisation). Python {about['python']}, {libraries}. All rows in one interleaved run, in an order that "
        f"changes from round to round, at least {about['rounds']} rounds in each of {about['processes']} "
        "processes. CPU time, on one core. A time is the median over rounds, then over processes; +- is half the range "
        "of the processes. A ratio is the geometric mean of the processes' own ratios, with the 95 % interval of "
        "Student's t over them. Rows slower than 20 ms a round take the first 4 to 1,024 of the points, but for those "
        "over whole arrays.", "    ") + [""]


def _settings(facts):
    lines = ["What each row is", ""]
    lines += _wrapped(f"the module: as `compile` makes it. {'. '.join(facts['plan']['why'])}", "    ", " "*8)
    for term, meaning in facts["terms"].items():
        lines += _wrapped(f"{term}: {meaning}", "    ", " "*8)
    lines.append("")
    for row in facts["rows"]:
        lines += _wrapped(f"{row['title']}: {row['setting']}", "    ", " "*8)
    return lines
