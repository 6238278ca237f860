"""The benchmark as a page: ratios first, then accuracy, latency, what goes wrong, and what each row is."""

import math
import textwrap

from rootwright.emit.text import folded

WIDTH = 100
_NAME = 35                       # widest title of a row
_GROUPS = {"limit": "the limit", "module": "the module", "through": "derivatives through the iterations",
           "differences": "finite differences", "hand": "a solver by hand and the implicit rule"}


def render(facts):
    """Text of the page, lines of at most WIDTH columns."""
    title = f"{facts['name']}: what a root and its derivatives cost"
    head = [title, *_wrapped(folded(facts["title"] or ""), "")]
    lines = [*head, "="*max(map(len, head)), ""]
    lines += _cost(facts) + _accuracy(facts) + _latency(facts) + _pitfalls(facts) + _goals(facts) + _method(facts) + _settings(facts)
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


def _cost(facts):
    n = facts["environment"]["points"]
    lines = [f"Cost of a root with all its derivatives; the module's is 1 (throughput, {n:,} points in cache)"]
    lines += ["", f"    {'':{_NAME}} {'times the':>10}  {'95 % interval':>17}  {'times the':>9}  {'ns a':>10}  {'+-':>5}",
              f"    {'':{_NAME}} {'module':>10}  {'':>17}  {'limit':>9}  {'root':>10}"]
    lines += _grouped(facts, lambda row: f"{figure(row['to_module']['value']):>10}  {_interval(row['to_module']):>17}  "
                                         f"{figure(row['to_limit']['value']):>9}  {figure(row['ns']):>10}  {row['spread']:>5.0%}")
    missing = [f"    {row['title']}: {row['absent']}" for row in facts["rows"] if row["absent"]]
    return lines + ([""] + [line for text in missing for line in _wrapped(text, "", " "*8)] if missing else []) + [""]


def _accuracy(facts):
    checked = facts["environment"]["checked"]
    lines = [f"Accuracy against certified values at {checked} points; failures; what a tape holds"]
    lines += ["", f"    {'':{_NAME}} {'derivative error':>18}  {'root error':>10}  {'failed':>11}  {'tape':>6}  {'bytes':>7}",
              f"    {'':{_NAME}} {'median':>8}  {'worst':>8}  {'worst':>10}  {'':>11}  {'ops':>6}"]

    def line(row):
        error = row["derivative_error"] or {"median": None, "worst": None}
        failed = f"{row['failures']:,}/{row['failures_of']:,}"
        operations = "" if row["operations"] is None else f"{row['operations']:,.0f}"
        size = "" if row["bytes"] is None else f"{row['bytes']:,}"
        return f"{_error(error['median']):>8}  {_error(error['worst']):>8}  {_error(row['root_error']):>10}  {failed:>11}  " \
               f"{operations:>6}  {size:>7}"

    evaluations = facts["evaluations"]
    return lines + _grouped(facts, line) + [""] + _wrapped(
        "Derivative errors are relative, against at least 1e-6 of |result/parameter|; failed points are left out of them. "
        f"The module evaluates its residual {evaluations['median']:g} times a solve in the median, {evaluations['worst']} at "
        "most, ends of the bracket included. Tape sizes are medians of one root, bytes with the sweep's.", "    ") + [""]


def _latency(facts):
    lines = ["Latency: every solve waits for the root of the one before", "",
             f"    {'':{_NAME}} {'times the':>10}  {'95 % interval':>17}  {'times the':>9}  {'ns a':>10}  {'+-':>5}",
             f"    {'':{_NAME}} {'module':>10}  {'':>17}  {'limit':>9}  {'root':>10}"]

    def line(row):
        found = row["latency"]
        return None if found is None else f"{figure(found['to_module']['value']):>10}  {_interval(found['to_module']):>17}  " \
            f"{figure(found['to_limit']['value']):>9}  {figure(found['ns']):>10}  {found['spread']:>5.0%}"
    return lines + _grouped(facts, line) + [""]


def _pitfalls(facts):
    found = facts["pitfalls"]
    lines = ["Where the iterate-through approach goes wrong", ""]
    if found is None:
        return lines + ["    not measured: it needs a C++ compiler", ""]
    points, bisection, where = found["points"], found["bisection"], found["where"]
    lines += _wrapped(
        f"A bisection that converges before any Newton step. Every iterate is a middle of the bracket: the root is right to "
        f"{_error(bisection['root_worst'])}, and of its {bisection['derivatives']} derivatives at {points} points the tape says that "
        f"{bisection['zero']} are exactly zero; median error {_error(bisection['through_median'])}. The implicit rule at the same "
        f"roots: median {_error(bisection['implicit_median'])}, worst {_error(bisection['implicit_worst'])}.", "  ", "    ") + [""]
    lines += _wrapped("An iteration stopped early. Newton's method in its bracket, from cold, stopped after so many steps; medians. The "
                      "derivative through the iterations lags behind the root; a root good enough to stop at need not have one.",
                      "  ", "    ")
    lines += ["", f"    {'steps':>5}  {'error of the root':>18}  {'derivative, taped':>18}  {'worst':>8}  {'implicit rule there':>20}"]
    lines += [f"    {row['steps']:>5}  {_error(row['root_median']):>18}  {_error(row['through_median']):>18}  "
              f"{_error(row['through_worst']):>8}  {_error(row['implicit_median']):>20}" for row in found["stopped"]] + [""]
    back, on = where["back"], where["on"]
    return lines + _wrapped(
        f"A `where` in the loop. {where['steps']} secants for every point, as array libraries iterate; a converged point is held still by "
        "`where`, while the secant that it does not take is 0/0. The values are right: the root's median error is "
        f"{_error(on['root_median'])}. Of its {on['derivatives']} derivatives swept forward, {on['not_a_number']} are not a number "
        f"(0 times NaN is NaN); swept back on our tape, which passes over what nothing depends on, {back['not_a_number']}, with "
        f"median error {_error(back['through_median'])}, worst {_error(back['through_worst'])}.", "  ", "    ") + [""]


def _goals(facts):
    lines = ["Goals (met where the whole interval clears it)", ""]
    for goal in facts["goals"]:
        wanted = f"at most {goal['at_most']:g}" if goal["at_most"] is not None else f"at least {goal['at_least']:g}"
        measured = f"{figure(goal['value'])} ({_interval(goal)})" if goal["low"] != goal["high"] else f"{goal['value']:g}"
        lines.append(f"    {goal['goal']:46} {wanted:>13}:  {measured:22} {goal['verdict']}")
    return [*lines, ""]


def _method(facts):
    about = facts["environment"]
    libraries = ", ".join(f"{name} {version}" for name, version in about["libraries"].items() if version)
    load = f"load {', '.join(f'{value:g}' for value in about['load'])}" if about["load"] else "load not known"
    return ["How it was measured", ""] + _wrapped(
        f"{about['processor']}, {about['cores']} cores, {load}. {about['compiler']}, {about['flags']} (C++ rows: the same optimisation). "
        f"Python {about['python']}, {libraries}. All rows in one interleaved run, in an order that changes from round to round, "
        f"at least {about['rounds']} rounds in each of {about['processes']} fresh processes. A time is the median over rounds, "
        "then over processes; +- is half the range of the processes. A ratio is the geometric mean of the processes' own "
        "ratios, with the 95 % interval of Student's t over them. CPU time, on one core. Rows slower than 20 ms a round take "
        "the first 4 to 1,024 of the points, but for those over whole arrays.", "    ") + [""]


def _settings(facts):
    lines = ["What each row is", ""]
    for term, meaning in facts["terms"].items():
        lines += _wrapped(f"{term}: {meaning}", "    ", " "*8)
    lines.append("")
    for row in facts["rows"]:
        lines += _wrapped(f"{row['title']}: {row['setting']}", "    ", " "*8)
    return lines
