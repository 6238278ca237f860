"""A spec as a page of a handbook: what it says, closed-form derivatives, a few solved points, the published values."""

import math
import random
import textwrap

from rootwright.calculus.doubles import Doubles
from rootwright.calculus.program import interpret
from rootwright.calculus.sampling import between
from rootwright.evidence.evaluate import word
from rootwright.evidence.formula import derivative_lines
from rootwright.spec.diagnostics import harmless
from rootwright.spec.names import clipped

WIDTH = 100
POINTS = 5

_STAY = "\0"                     # a space at which no line ends
_NAME = 24                       # longest name beside the solved points
_CELL = 44                       # widest cell of a table but for the last column
_TRIES = 500                     # points looked at for some that meet every requirement
_DIMENSIONS = {"checked": "checked: the equation and all definitions agree in dimension",
               "label": "labels only: the formula is empirical, its dimensions are not checked",
               "none": "not checked: not everything in use carries a unit"}


def describe(closure, module):
    """What the page says, as data for JSON. module: the closure's emitted module, which solves the sample of points."""
    model = closure.model
    formulas = derivative_lines(model)
    unknown = model.unknown
    return {
        "name": model.name, "title": model.title, "source": model.source, "caution": model.caution,
        "equation": model.equation,
        "definitions": [{"name": item.name, "expression": item.expression.text} for item in model.definitions],
        "constants": [_item(item, value=item.expression.text) for item in model.constants],
        "parameters": [_item(item, range=[item.low.text, item.high.text], spread=item.spread,
                             differentiate=item.differentiate) for item in model.parameters],
        "unknown": _item(unknown, bracket=[unknown.lower.text, unknown.upper.text], ends=_ends(unknown),
                         root=unknown.root, start=None if unknown.start is None else unknown.start.text),
        "domain": [condition.text for condition in model.require],
        "outputs": [_item(item, expression=item.expression.text) for item in model.outputs],
        "dimensions": model.dimensions,
        "derivatives": {result: dict(lines) for result, lines in formulas.items()},
        "points": [_solved(model, module, point) for point in sample_points(closure)],
        "published": [{"given": _texts(item.given), "expect": _texts(item.expect),
                       "tolerance": _texts(item.tolerance), "source": item.source} for item in model.published],
        "digest": model.digest,
    }


def _item(item, **more):
    return {"name": item.name, "unit": item.unit, "about": item.about} | more


def _texts(pairs):
    return {name: expression.text for name, expression in pairs}


def _ends(unknown):
    return {(False, False): "closed", (True, True): "open", (True, False): "open-lower",
            (False, True): "open-upper"}[unknown.open_lower, unknown.open_upper]


def sample_points(closure):
    """Up to POINTS points {parameter: double} of the operating range, rounded to a few digits so that they read well:
    the lower ends, the middle, the upper ends, then points at random (fixed seed)."""
    parameters = closure.model.parameters
    generator = random.Random(1)
    points = []
    for k in range(_TRIES):
        shares = [k/2]*len(parameters) if k < 3 else [generator.random() for _ in parameters]
        point = {parameter.name: _rounded(low, high, between(low, high, share, parameter.spread))
                 for parameter, share, (low, high) in zip(parameters, shares, closure.ranges)}
        if point not in points and not interpret(closure.program, Doubles(), point, ["outside"])["outside"]:
            points.append(point)
        if len(points) == POINTS:
            break
    return points


def _rounded(low, high, value):
    """The value to three digits, or as many as tell the ends of the range apart; not outside the range."""
    spread = abs(high/2 - low/2)/max(abs(low), abs(high), 5e-324)
    digits = 3 if not spread > 0.0 else min(17, max(3, 3 - math.floor(math.log10(spread))))
    return min(max(float(f"{value:.{digits}g}"), low), high)


def _solved(model, module, point):
    solved = module.solve(list(point.values()))
    return {"given": point, "results": dict(zip(model.results, solved.y)) if solved.status >= 0 else None,
            "error_bound": solved.error_bound if solved.status >= 0 else None, "status": word(solved.status)}


# -- the page


def render(facts):
    """Text of the page for what `describe` found; lines of at most WIDTH columns."""
    lines = [facts["name"]]
    if facts["title"]:
        lines += _wrapped(facts["title"], "")
    lines += ["="*max(len(line) for line in lines), ""]
    for label, text in (("Source", facts["source"]), ("Caution", facts["caution"])):
        if text:
            lines += _labelled(label, text)
    lines += ["", *_equation(facts), *_quantities(facts), *_derivatives(facts), *_points(facts), *_published(facts)]
    lines += _labelled("Dimensions", _DIMENSIONS[facts["dimensions"]])
    return "\n".join(line.rstrip() for line in lines) + "\n"


def _plain(text):
    return _STAY.join(harmless(" ".join(part.split())) for part in text.split(_STAY))


def _wrapped(text, indent, hang=None):
    lines = textwrap.wrap(_plain(text), WIDTH, initial_indent=indent, break_on_hyphens=False,
                          subsequent_indent=indent if hang is None else hang)
    return [line.replace(_STAY, " ") for line in lines] or [indent]


def _labelled(label, text):
    return _wrapped(text, f"{label:11} ", " "*12)


def _formula(text):
    """A formula or equation, continued before an operator outside of parentheses where that is possible."""
    depth, pieces = 0, []
    for word in _plain(text).split(" "):
        pieces.append(word + (_STAY if depth + word.count("(") > word.count(")") or word in ("+", "-", "=") else " "))
        depth += word.count("(") - word.count(")")
    text = "".join(pieces).rstrip().replace(f" ={_STAY}", f"{_STAY}={_STAY}")
    if max(map(len, text.split(" "))) > WIDTH - 8:
        text = text.replace(_STAY, " ")
    return _wrapped(text, "    ", " "*8)


def _equation(facts):
    lines = ["Equation", ""] + _formula(facts["equation"] + ("" if "=" in facts["equation"] else " = 0"))
    if facts["definitions"]:
        lines += ["", "  with", ""]
        for item in facts["definitions"]:
            lines += _formula(f"{item['name']} = {item['expression']}")
    return lines + [""]


def _quantities(facts):
    unknown = facts["unknown"]
    left = "(" if unknown["ends"] in ("open", "open-lower") else "["
    right = ")" if unknown["ends"] in ("open", "open-upper") else "]"
    bracket = f"{left}{unknown['bracket'][0]}, {unknown['bracket'][1]}{right}"
    lines = _table(f"Unknown, declared to be the {unknown['root']} root in its bracket", ("name", "bracket", "unit", "about"),
                   [(unknown["name"], bracket, unknown["unit"], unknown["about"])])
    if unknown["start"]:
        lines[-1:] = _labelled("    start", unknown["start"]) + [""]
    rows = [(item["name"], f"{item['range'][0]} to {item['range'][1]}", item["unit"], item["spread"],
             item["about"] + ("" if item["differentiate"] else " (not differentiated)"))
            for item in facts["parameters"]]
    lines += _table("Parameters", ("name", "range", "unit", "spread", "about"), rows)
    if facts["domain"]:
        lines += ["Meant for", ""] + [line for text in facts["domain"] for line in _wrapped(text, "    ", " "*8)] + [""]
    lines += _table("Outputs", ("name", "formula", "unit", "about"),
                    [(item["name"], item["expression"], item["unit"], item["about"]) for item in facts["outputs"]])
    return lines + _table("Constants", ("name", "value", "unit", "about"),
                          [(item["name"], item["value"], item["unit"], item["about"]) for item in facts["constants"]])


def _table(title, head, rows):
    """A table without its empty columns, the last one wrapped; what follows a cell that is too wide goes to the
    next line. Nothing without rows."""
    if not rows:
        return []
    columns = [(name, [_plain(cell or "") for cell in column]) for name, column in zip(head, zip(*rows))]
    head, columns = zip(*[(name, column) for name, column in columns if any(column)])
    widths = [min(_CELL, max(map(len, (name, *column)))) for name, column in zip(head, columns)]
    widths[-1] = max(_CELL, WIDTH - 4 - sum(widths[:-1]) - 2*(len(widths) - 1))
    lines = [title, "", _row(head, widths)]
    for row in zip(*columns):
        start = 0
        for k, cell in enumerate(row):
            if k < len(row) - 1 and len(cell) > widths[k]:
                before = "".join(f"{text:{width}}  " for text, width in zip(row[start:k], widths[start:k]))
                lines += _wrapped(before.replace(" ", _STAY) + cell, " "*_place(start, widths), " "*8)
                start = k + 1
        first, *more = textwrap.wrap(row[-1], widths[-1]) or [""]
        if any((*row[start:-1], first)):
            lines.append(_row((*("",)*start, *row[start:-1], first), widths))
        lines += [" "*_place(len(row) - 1, widths) + text for text in more]
    return lines + [""]


def _place(k, widths):
    """Column of the page where column k of a table begins."""
    return 4 + sum(widths[:k]) + 2*k


def _row(cells, widths):
    return "    " + "  ".join(f"{cell:{width}}" for cell, width in zip(cells, widths))


def _derivatives(facts):
    x, parameters = facts["unknown"]["name"], [item["name"] for item in facts["parameters"] if item["differentiate"]]
    (g, of_residual), *of_outputs = facts["derivatives"].items()
    groups = ("parameters", "constants", "definitions", "outputs")
    names = {x, *(item["name"] for group in groups for item in facts[group])}
    theta = next(name for name in ("P", "theta", "parameter", "P__") if name not in names)
    meaning = "the equation's left side minus its right side" if "=" in facts["equation"] else \
        "the expression that is to be zero"
    lines = ["Derivatives", ""]
    if not parameters:
        return lines + ["    none: no parameter is differentiated", ""]
    lines += _wrapped(f"d{x}/d{theta} = -{g}_{theta}/{g}_{x} for every parameter {theta}, by the implicit function "
                      f"theorem; {g} is {meaning}; what is not listed is zero.", "  ")
    lines += [""] + [line for name, text in of_residual.items() for line in _formula(f"{name} = {text}")] + [""]
    for output, formulas in of_outputs:
        along = _along(formulas, output, x)
        direct = any(_along(formulas, output, name) for name in parameters)
        rule = " + ".join([f"{output}_{theta}"]*direct + [f"{along}*d{x}/d{theta}"]*bool(along)) or "0"
        lines += _wrapped(f"d{output}/d{theta} = {rule}", "  ") + [""]
        lines += [line for name, text in formulas.items() for line in _formula(f"{name} = {text}")] + [""]
    return lines


def _along(formulas, output, name):
    """Label of the derivative of an output along an input, None where it is zero."""
    return next((label for label in (f"{output}_{name}", f"{output}__{name}") if label in formulas), None)


def _points(facts):
    if not facts["points"]:
        return ["Solved points", "", "    none: no sampled point of the ranges meets every requirement", ""]
    results = [facts["unknown"]["name"], *(item["name"] for item in facts["outputs"])]
    points = facts["points"]
    rows = [[clipped(item["name"], _NAME), *(f"{point['given'][item['name']]:.6g}" for point in points)]
            for item in facts["parameters"]]
    rows.append(None)
    rows += [[clipped(name, _NAME), *(f"{point['results'][name]:.8g}" if point["results"] else "-" for point in points)]
             for name in results]
    rows.append(["status", *(point["status"] for point in points)])
    widths = [max(len(row[k]) for row in rows if row) for k in range(len(rows[0]))]
    while sum(widths) + 2*len(widths) + 2 > WIDTH:
        widths.pop()
    lines = ["Solved points of the operating range", ""]
    for row in rows:
        lines.append("" if row is None else "    " + "  ".join(
            f"{cell:<{width}}" if k == 0 else f"{cell:>{width}}" for k, (cell, width) in enumerate(zip(row, widths))))
    return lines + [""]


def _published(facts):
    if not facts["published"]:
        return []
    lines = ["Published values (as quoted; `rootwright verify` runs them)", ""]
    for item in facts["published"]:
        given = ", ".join(f"{name}{_STAY}={_STAY}{text}" for name, text in item["given"].items())
        expect = ", ".join(f"{name}{_STAY}={_STAY}{text}{_STAY}+-{_STAY}{item['tolerance'][name]}"
                           for name, text in item["expect"].items())
        lines += _wrapped(f"{given}:  {expect}", "    ", " "*8) + _wrapped(item["source"], " "*8)
    return lines + [""]
