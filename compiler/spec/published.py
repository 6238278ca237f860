"""The published values of a spec: parameters given, results expected, tolerances, source."""

from collections.abc import Iterator

from rootwright.spec.expression import Apply, Expression, Number
from rootwright.spec.model import Published
from rootwright.spec.names import clipped, nearest, quoted
from rootwright.spec.source import Path, Source
from rootwright.spec.tables import REQUIRED, Findings, Table

_EXAMPLES = {
    "given": "given = { Re = 1.0e5, rel = 1.0e-4 }",
    "expect": "expect = { f = 0.0185 }",
    "tolerance": "tolerance = 5.0e-5",
    "source": 'source = "author, title, year, table or example"',
}


def is_written_below(expression: Expression, or_zero: bool) -> bool:
    """Whether the expression is a plain number below zero, or (`or_zero`) at zero."""
    tree = expression.tree
    negative = isinstance(tree, Apply) and tree.op == "neg"
    number = tree.args[0] if negative else tree
    if not isinstance(number, Number):
        return False
    is_zero = not number.text.lower().partition("e")[0].strip("0.")
    return or_zero if is_zero else negative


def read_published(findings: Findings, top: Table, parameters: list[str], results: list[str]) -> tuple[Published, ...]:
    """Every [[published]] entry. Values that fail are None."""
    entries = top.values.get("published", [])
    if not isinstance(entries, list) or not all(isinstance(entry, dict) for entry in entries):
        findings.wrong_type(("published",), entries, "an array of tables", "[[published]]")
        return ()
    return tuple(_entry(Table(findings, ("published", index), entry, tuple(_EXAMPLES)), parameters, results)
                 for index, entry in enumerate(entries))


def published_expressions(entries: tuple[Published, ...],
                          source: Source) -> Iterator[tuple[str, str, Expression, Path]]:
    """Key, name, expression and path of each value; a single tolerance comes once for every result."""
    for index, entry in enumerate(entries):
        for key in ("given", "expect", "tolerance"):
            for name, expression in getattr(entry, key):
                path = "published", index, key, name
                yield key, name, expression, path if path in source.places else path[:-1]


def _entry(table, parameters, results):
    given = _values(table, "given", parameters, "parameter")
    missing = [name for name in parameters if given is not None and name not in given]
    if missing:
        table.findings.error(table.at("given"), "given leaves out " + clipped(", ".join(missing), 100),
                             "a published value gives every parameter")
    expect = _values(table, "expect", results, "result")
    if expect is not None and not table.values["expect"]:
        table.findings.error(table.at("expect"), "expect names no result",
                             "the results are " + clipped(", ".join(results), 100))
    expect = expect or {}
    tolerance = _tolerance(table, list(expect))
    source = table.text("source", _EXAMPLES["source"], REQUIRED)
    return Published(tuple((given or {}).items()), tuple(expect.items()), tuple((tolerance or {}).items()), source)


def _values(table, key, known, kind):
    """The expressions in the table at `key`, by name in the order of `known`; None where there is no such table."""
    if not table.has(key):
        table.missing(key, _EXAMPLES[key])
        return None
    values = table.table(key, _EXAMPLES[key])
    if values is None:
        return None
    found = {}
    for name, value in values.items():
        path = (*table.at(key), name)
        if name in known:
            found[name] = table.findings.expression(path, value)
        else:
            near = nearest(name, known)
            table.findings.error_at_key(path, f"{quoted(name)} is no {kind}", f"did you mean {near}?" if near
                                        else f"the {kind}s are " + clipped(", ".join(known), 100))
    return {name: found[name] for name in known if name in found}


def _tolerance(table, expected):
    """The tolerance of each expected result: one number for all of them, or a table."""
    path = table.at("tolerance")
    if isinstance(table.values.get("tolerance"), dict):
        tolerance = _values(table, "tolerance", expected, "expected result")
        missing = [name for name in expected if name not in tolerance]
        if missing:
            table.findings.error(path, "the tolerance leaves out " + clipped(", ".join(missing), 100),
                                 "a table of tolerances has one for each expected result")
    else:
        one = table.expression("tolerance", _EXAMPLES["tolerance"])
        tolerance = {name: one for name in expected}
    for name, value in tolerance.items():
        if value and is_written_below(value, or_zero=False):
            place = (*path, name) if isinstance(table.values["tolerance"], dict) else path
            table.findings.error(place, "a tolerance is negative", "give the absolute error that is allowed")
    return tolerance
