"""Typed access to the tables of a spec: what is missing, unknown or of the wrong type becomes a diagnostic."""

import math
import re
from datetime import date, datetime, time

from rootwright.spec.diagnostics import ERROR, WARNING
from rootwright.spec.expression import Apply, Expression, ExpressionError, Number, parse, postorder
from rootwright.spec.names import clipped, nearest, quoted
from rootwright.spec.source import DecimalText, Path, Source

MAX_FINDINGS = 100               # more errors than anyone mends in one go
MAX_OPERATIONS_OF_FILE = 50_000
MAX_DIGITS = 1_000               # characters of a number
MAX_EXPONENT = 9_999             # of ten; far outside the doubles, near enough for exact arithmetic

REQUIRED = object()              # marks a key without a default

_NUMBER_PARTS = re.compile(r"([0-9]*\.?[0-9]*)(?:[eE]([+-]?[0-9]+))?")


class TooMany(Exception):
    """So many errors were found that looking for more helps nobody."""


class Findings:
    """Collects what is wrong with one source, by path in the spec."""

    def __init__(self, source: Source):
        self.source = source
        self.diagnostics = []
        self.operations = 0

    @property
    def failed(self) -> bool:
        return any(diagnostic.severity == ERROR for diagnostic in self.diagnostics)

    def error(self, path: Path, message: str, help: str, part=None) -> None:
        """An error in the value at `path`, or in the characters [start, end) = `part` of that string."""
        self.error_in(self.source.value_span(path, part), message, help)

    def error_at_key(self, path: Path, message: str, help: str) -> None:
        self.error_in(self.source.key_span(path), message, help)

    def error_in(self, span: tuple[int, int], message: str, help: str) -> None:
        self._add(span, message, help, ERROR)

    def warning(self, path: Path, message: str, help: str, part=None) -> None:
        self._add(self.source.value_span(path, part), message, help, WARNING)

    def warning_at_key(self, path: Path, message: str, help: str) -> None:
        self._add(self.source.key_span(path), message, help, WARNING)

    def _add(self, span, message, help, severity):
        found = self.source.diagnostic(span, message, help, severity)
        if found in self.diagnostics:        # one tolerance serves several results
            return
        self.diagnostics.append(found)
        if len(self.diagnostics) >= MAX_FINDINGS:
            raise TooMany

    def in_order(self):
        """Everything found, by place."""
        return tuple(sorted(self.diagnostics, key=lambda found: (found.line, found.column)))

    def expression(self, path: Path, value, form: str = "number") -> Expression | None:
        """The number or the string at `path` as an expression, its literals finite as doubles."""
        if isinstance(value, DecimalText) or isinstance(value, int) and not isinstance(value, bool):
            if form == "number":
                return self._number(path, value)
        elif isinstance(value, str):
            return self._parsed(path, value, form)
        wanted = 'a number, or an expression in quotes as in "2*pi"' if form == "number" else "an expression in quotes"
        self.error(path, f"{kind_of(value)} stands where {wanted} is needed", f"write {wanted}")
        return None

    def _parsed(self, path, value, form):
        if self.operations > MAX_OPERATIONS_OF_FILE:
            self.error(path, f"the expressions of the file have more than {MAX_OPERATIONS_OF_FILE:,} operations",
                       "a spec describes one equation: shorten it")
            raise TooMany
        try:
            expression = parse(value, form)
        except ExpressionError as error:
            self.operations += len(value) // 4
            for problem in error.problems:
                self.error(path, problem.message, problem.help, (problem.start, problem.end))
            return None
        numbers = []
        for node in postorder(expression.tree):
            self.operations += 1
            if isinstance(node, Number):
                numbers.append(node)
        sound = [self._check_number(path, node) for node in numbers]
        return expression if all(sound) else None

    def _number(self, path, value):
        """A TOML number as an expression: the digits written, and a minus sign as an operation."""
        if isinstance(value, int) and abs(value) >= 1 << 1024:
            self.error(path, "the number is larger than any double", "doubles reach up to 1.8e308")
            return None
        text = str(value).lstrip("+")
        digits = text.lstrip("-")
        if digits in ("inf", "nan"):
            self.error(path, f"{digits} is not a finite number", "write a finite number")
            return None
        node = Number(digits, len(text) - len(digits), len(text))
        if not self._check_number(path, node, whole=True):
            return None
        return Expression(text, Apply("neg", (node,), 0, len(text)) if text.startswith("-") else node)

    def _check_number(self, path, node, whole=False):
        part = None if whole else (node.start, node.end)
        shown = quoted(node.text)
        mantissa, exponent = _NUMBER_PARTS.fullmatch(node.text).groups()
        if len(node.text) > MAX_DIGITS or exponent and (len(exponent) > 9 or abs(int(exponent)) > MAX_EXPONENT):
            self.error(path, f"the number {shown} is out of reach",
                       f"numbers have up to {MAX_DIGITS:,} characters and powers of ten up to {MAX_EXPONENT:,}", part)
            return False
        value = float(node.text)
        if not math.isfinite(value):
            self.error(path, f"the number {shown} is larger than any double", "doubles reach up to 1.8e308", part)
            return False
        if value == 0.0 and mantissa.strip("0."):
            self.warning(path, f"the number {shown} is zero as a double",
                         "the smallest double above zero is 4.9e-324", part)
        return True

    def wrong_type(self, path: Path, value, wanted: str, example: str) -> None:
        self.error(path, f"{_key_name(path)} is {kind_of(value)}, not {wanted}", f"write it like {example}")


class Table:
    """One table of the spec. Every key taken from it counts as known; `close` reports the others."""

    def __init__(self, findings: Findings, path: Path, values: dict, keys: tuple[str, ...]):
        self.findings = findings
        self.path = path
        self.values = values
        for key in values:
            if key not in keys:
                near = nearest(key, [known for known in keys if known not in values])
                where = f" in {_table_name(path)}" if path else ""
                findings.error_at_key((*path, key), f"the key {quoted(key)} is not known{where}",
                                      f"did you mean {near}?" if near else "known here: " + ", ".join(keys))

    def has(self, key):
        return key in self.values

    def at(self, key):
        return (*self.path, key)

    def missing(self, key: str, example: str) -> None:
        self.findings.error_at_key(self.path, f"{_table_name(self.path) if self.path else 'the spec'} has no {key}",
                                   f"add {example}")

    def text(self, key, example, default=""):
        """The string at `key`; None where it is missing without a default, or no string."""
        if key not in self.values:
            if default is REQUIRED:
                self.missing(key, example)
                return None
            return default
        value = self.values[key]
        if not isinstance(value, str) or isinstance(value, DecimalText):
            self.findings.wrong_type(self.at(key), value, "text", example)
            return None
        return value

    def choice(self, key, choices):
        """One of the words `choices`; the first is the default."""
        value = self.text(key, f'{key} = "{choices[0]}"', choices[0])
        if value is None or value in choices:
            return value
        near = nearest(value, choices)
        self.findings.error(self.at(key), f"{key} is {quoted(value)}", f"did you mean {near}?" if near
                            else "it can be " + " or ".join(f'"{choice}"' for choice in choices))
        return None

    def flag(self, key, default):
        value = self.values.get(key, default)
        if not isinstance(value, bool):
            self.findings.wrong_type(self.at(key), value, "true or false", f"{key} = {str(not default).lower()}")
            return default
        return value

    def expression(self, key, example, form="number"):
        if key not in self.values:
            self.missing(key, example)
            return None
        return self.findings.expression(self.at(key), self.values[key], form)

    def pair(self, key, example):
        """The two expressions of an array at `key`, each None where it fails."""
        if key not in self.values:
            self.missing(key, example)
            return None, None
        value = self.values[key]
        if not isinstance(value, list) or len(value) != 2:
            self.findings.wrong_type(self.at(key), value, "an array of two", example)
            return None, None
        return tuple(self.findings.expression((*self.at(key), index), item) for index, item in enumerate(value))

    def table(self, key, example):
        """The table at `key`, empty where it is missing; None where something else stands there."""
        value = self.values.get(key, {})
        if not isinstance(value, dict):
            self.findings.wrong_type(self.at(key), value, "a table", example)
            return None
        return value


def kind_of(value) -> str:
    if isinstance(value, bool):
        return "true or false"
    if isinstance(value, (int, DecimalText)):
        return "a number"
    if isinstance(value, str):
        return "text"
    if isinstance(value, (date, datetime, time)):
        return "a date or time"
    return f"an array of {len(value)}" if isinstance(value, list) else "a table"


def _key_name(path):
    return clipped(".".join(str(part) for part in path if not isinstance(part, int)))


def _table_name(path):
    """[table], or [table.entry] however it is written in the file."""
    return f"[{_key_name(path)}]" if not isinstance(path[-1], int) else f"[[{_key_name(path)}]]"
