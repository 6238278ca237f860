"""Spec text to checked Model. Every mistake of a file is reported in one run."""

import hashlib
from dataclasses import replace

from rootwright.spec import units
from rootwright.spec.diagnostics import Diagnostic
from rootwright.spec.model import Constant, Definition, Model, Output, Parameter, Unknown
from rootwright.spec.names import clipped, quoted, refusal
from rootwright.spec.published import is_written_below, published_expressions, read_published
from rootwright.spec.scope import CONSTANT, DEFINITION, OUTPUT, PARAMETER, UNKNOWN, Scope
from rootwright.spec.source import load
from rootwright.spec.tables import REQUIRED, Findings, Table, TooMany

FORMAT = 1

_KEYS = ("format", "name", "title", "source", "caution", "dimensions", "constants", "parameters", "definitions",
         "unknown", "domain", "residual", "outputs", "published")
_ABOUT = 'about = "what it is"'
_UNIT = 'unit = "m/s"'


def read(data: bytes, filename: str) -> tuple[Model | None, tuple[Diagnostic, ...]]:
    """The model that the bytes of a spec file describe, and what was found on the way, in order of place.

    The model is None when any diagnostic is an error. Nothing is raised for what the bytes hold.
    """
    source, tables, diagnostics = load(data, filename)
    if tables is None:
        return None, diagnostics
    findings = Findings(source)
    try:
        draft = _Reader(findings, tables).model(hashlib.sha256(data).hexdigest())
    except TooMany:
        draft = None
    return (None if findings.failed else draft), findings.in_order()


class _Reader:
    """Reads one file. Parts that fail are None in the draft of the model, which is then not given out."""

    def __init__(self, findings, tables):
        self.findings = findings
        self.scope = Scope(findings)
        self.top = Table(findings, (), tables, _KEYS)
        self.expressions = []        # (expression, place, path): their names are checked when all are declared

    def model(self, digest):
        top = self.top
        self._check_format()
        draft = Model(
            name=self._module_name(),
            title=top.text("title", 'title = "what the equation is for"'),
            source=top.text("source", 'source = "author, title, year"'),
            caution=top.text("caution", 'caution = "where the equation does not hold"'),
            dimensions=top.choice("dimensions", ("checked", "label")),
            constants=tuple(self._constant(name, value) for name, value in self._entries("constants")),
            parameters=tuple(self._parameter(name, value) for name, value in self._entries("parameters")),
            definitions=tuple(self._definition(name, value) for name, value in self._entries("definitions")),
            unknown=self._unknown(),
            require=self._require(),
            equation="",
            residual=self._residual(),
            outputs=tuple(self._output(name, value) for name, value in self._entries("outputs")),
            published=(),
            digest=digest,
        )
        if draft.residual:
            draft = replace(draft, equation=draft.residual.text)
        draft = replace(draft, published=self._published(draft))
        self.scope.has_gaps = not draft.parameters or draft.unknown is None or draft.unknown.name is None
        for expression, place, path in self.expressions:
            self.scope.check(expression, place, path)
        self.scope.check_order()
        draft = units.check(draft, self.scope, self.findings)
        if not self.findings.failed:
            self._check_use(draft)
        return draft

    def _check_format(self):
        value = self.top.values.get("format")
        if value is None:
            self.top.missing("format", f"format = {FORMAT}")
        elif isinstance(value, bool) or not isinstance(value, int):
            self.findings.wrong_type(("format",), value, "a whole number", f"format = {FORMAT}")
        elif value != FORMAT:
            self.findings.error(("format",), "the format is not known", f"this compiler reads format = {FORMAT}")

    def _module_name(self):
        name = self.top.text("name", 'name = "pipe_friction"', REQUIRED)
        refused = name is not None and refusal(name, is_module=True)
        if refused:
            self.findings.error(("name",), f"the name {quoted(name)} {refused[0]}", refused[1])
        return name

    def _constant(self, name, value):
        path = ("constants", name)
        self.scope.declare(name, CONSTANT, path)
        if not isinstance(value, dict):
            expression = self._defined(name, self.findings.expression(path, value), "constant", path)
            return Constant(name, expression, None, "")
        table = Table(self.findings, path, value, ("value", "unit", "about"))
        expression = self._defined(name, table.expression("value", "value = 1.0"), "constant", table.at("value"))
        return Constant(name, expression, self._unit(table), table.text("about", _ABOUT))

    def _parameter(self, name, value):
        path = ("parameters", name)
        self.scope.declare(name, PARAMETER, path)
        if not isinstance(value, dict):
            self.findings.wrong_type(path, value, "a table", f"{name} = {{ range = [0.0, 1.0] }}")
            return Parameter(name, None, None, None, "linear", True, "")
        table = Table(self.findings, path, value, ("range", "unit", "spread", "about", "differentiate"))
        low, high = self._pair(table, "range", "range = [0.0, 1.0]", "range")
        spread = table.choice("spread", ("linear", "log"))
        if spread == "log" and low and is_written_below(low, or_zero=True):
            self.findings.error((*table.at("range"), 0), f"a log spread cannot start at {clipped(low.text)}",
                                'give a lower end above zero, or spread = "linear"')
        return Parameter(name, low, high, self._unit(table), spread, table.flag("differentiate", True),
                         table.text("about", _ABOUT))

    def _definition(self, name, value):
        path = ("definitions", name)
        self.scope.declare(name, DEFINITION, path)
        return Definition(name, self._defined(name, self.findings.expression(path, value), "definition", path))

    def _unknown(self):
        table = self._section("unknown", ("name", "bracket", "unit", "about", "root", "ends", "start"),
                              '[unknown] with name = "x" and bracket = ["0", "1"]')
        if table is None:
            return None
        name = table.text("name", 'name = "x"', REQUIRED)
        if name is not None:
            self.scope.declare(name, UNKNOWN, table.at("name"), at_value=True)
        lower, upper = self._pair(table, "bracket", 'bracket = ["0", "1"]', "bracket")
        root = table.choice("root", ("only", "lowest", "highest"))
        if root in ("lowest", "highest"):
            self.findings.error(table.at("root"), f'root = "{root}" is not supported yet',
                                'narrow the bracket so that it holds one root, and leave root = "only"')
        ends = table.choice("ends", ("closed", "open", "open-lower", "open-upper"))
        start = None
        if table.has("start"):
            start = self._taken(table.expression("start", 'start = "1"'), "start", table.at("start"))
        return Unknown(name, lower, upper, self._unit(table), table.text("about", _ABOUT), root,
                       ends in ("open", "open-lower"), ends in ("open", "open-upper"), start)

    def _require(self):
        table = self._section("domain", ("require",))
        conditions = table.values.get("require", []) if table else []
        path = ("domain", "require")
        if not isinstance(conditions, list):
            self.findings.wrong_type(path, conditions, "an array", 'require = ["a < b"]')
            return ()
        return tuple(self._taken(self.findings.expression((*path, index), condition, "condition"), "condition",
                                 (*path, index)) for index, condition in enumerate(conditions))

    def _residual(self):
        table = self._section("residual", ("equation",), '[residual] with equation = "left = right"')
        if table is None:
            return None
        expression = table.expression("equation", 'equation = "left = right"', "equation")
        return self._taken(expression, "residual", table.at("equation"))

    def _output(self, name, value):
        path = ("outputs", name)
        self.scope.declare(name, OUTPUT, path)
        if not isinstance(value, dict):
            self.findings.wrong_type(path, value, "a table", f'{name} = {{ expression = "..." }}')
            return Output(name, None, None, "")
        table = Table(self.findings, path, value, ("expression", "unit", "about"))
        expression = table.expression("expression", 'expression = "1/y^2"')
        expression = self._defined(name, expression, "output", table.at("expression"))
        return Output(name, expression, self._unit(table), table.text("about", _ABOUT))

    def _published(self, draft):
        parameters = [parameter.name for parameter in draft.parameters]
        results = [output.name for output in draft.outputs]
        if draft.unknown and draft.unknown.name:
            results.insert(0, draft.unknown.name)
        entries = read_published(self.findings, self.top, parameters, results)
        for _, _, expression, path in published_expressions(entries, self.findings.source):
            self._taken(expression, "published value", path)
        return entries

    def _check_use(self, draft):
        """Who depends on what, once everything reads: the residual on the unknown, something on each parameter."""
        mentioned = [self.scope.mentioned(expression) for expression in (
            draft.residual, draft.unknown.lower, draft.unknown.upper, draft.unknown.start, *draft.require)]
        path = ("residual", "equation")
        if draft.unknown.name not in self.scope.reach(mentioned[0]):
            self.findings.error(path, f"the residual does not use the unknown {quoted(draft.unknown.name)}",
                                f"the equation has to hold for one value of {draft.unknown.name}")
        used = self.scope.reach([*(name for names in mentioned for name in names), *(o.name for o in draft.outputs)])
        for parameter in draft.parameters:
            if parameter.name not in used:
                self.findings.warning_at_key(("parameters", parameter.name),
                                             f"nothing uses the parameter {quoted(parameter.name)}",
                                             "use it, or take it away")

    # Small steps of the above.
    def _section(self, key, keys, needed=None):
        """The table of that name; None where it is no table, or missing though needed (with an example)."""
        if needed and not self.top.has(key):
            self.top.missing(f"[{key}]", needed)
            return None
        values = self.top.table(key, f"[{key}]")
        return None if values is None else Table(self.findings, (key,), values, keys)

    def _entries(self, key):
        """Names and values of a table whose keys the author chooses."""
        values = self.top.table(key, f"[{key}]")
        if key == "parameters" and values == {}:
            self.top.missing("[parameters]", "[parameters] with at least one, such as a = { range = [0.0, 1.0] }")
        return (values or {}).items()

    def _unit(self, table):
        """The unit's text; a blank one counts as none."""
        unit = table.text("unit", _UNIT, None)
        return unit if unit and unit.strip() else None

    def _pair(self, table, key, example, place):
        pair = table.pair(key, example)
        for index, expression in enumerate(pair):
            self._taken(expression, place, (*table.at(key), index))
        return pair

    def _taken(self, expression, place, path):
        self.expressions.append((expression, place, path))
        return expression

    def _defined(self, name, expression, place, path):
        self.scope.define(name, expression, path)
        return self._taken(expression, place, path)
