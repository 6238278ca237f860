"""Kernels of a Closure as pure Python, with the arithmetic of IEEE 754 where Python would raise instead."""

import math

from rootwright.emit.layout import ATOM, PRODUCT, given, known, lay_out, shared
from rootwright.emit.names import Names, taken_in_python
from rootwright.emit.text import statement
from rootwright.operations import OPERATIONS


class PythonSpelling:
    """How numbers, names and operations are written in Python."""

    nan = "math.nan"

    def __init__(self, model):
        self.names = Names(model, taken_in_python)

    def number(self, value):
        return repr(value) if math.isfinite(value) else "math.inf" if value > 0.0 else "-math.inf"

    def name(self, name):
        return self.names.of(name)

    def operation(self, op, strength, constants):
        if op == "div":
            return ("{0}/{1}", PRODUCT) if constants[1] else (OPERATIONS["div"].python, ATOM)
        return OPERATIONS[op].python, strength


_ARGUMENTS = {"residual": ("x",), "curve": ("known", "x"), "trial": ("known", "x"), "rounding": ("x",),
              "kink": ("x", "error_bound"), "outputs": ("known", "x"), "jacobian": ("known", "x"), "hessian": ("known", "x")}
_FUNCTIONS = {"jacobian": "_partials", "hessian": "_second_partials"}
_FORMALS = ("p", "known", "error_bound")


def kernel(closure, name, comment):
    """Text of one kernel as a Python function whose docstring is the given lines; results come as a tuple, or alone."""
    model = closure.model
    spelling = PythonSpelling(model)
    formals = {formal: spelling.names.ours(formal) for formal in _FORMALS} | {"x": spelling.name(model.unknown.name)}
    wanted = [formal for formal in ("p", *_ARGUMENTS.get(name, ())) if formal != "known" or known(closure, name) or name == "trial" and shared(closure)]
    arguments = ", ".join(formals[formal] for formal in wanted)
    laid = lay_out(closure, name, spelling, {*spelling.names.used, *formals.values()}, given(closure, name, formals["known"]))
    lines = [f"def {_FUNCTIONS.get(name, '_' + name)}({arguments}):"]
    lines += [f"    # {line}" for line in comment]
    lines += _unpack(model, laid, formals, spelling)
    for step in laid.statements:
        lines += _statement(f"{step.name} = ", step.text)
    values = [text for result, text in laid.results.items() if name != "trial" or result not in shared(closure)]
    if name == "trial":
        for result in shared(closure):
            lines += _statement(f"{formals['known']}[{result.removeprefix('known_')}] = ", laid.results[result])
    if name in ("outside", "kink", "start", "guess"):
        lines += _statement("return ", values[0])
    elif name == "jacobian":
        lines += _rows("return ", values, len(model.parameters), "    ")
    elif name == "hessian":
        size = len(model.parameters)**2
        lines += ["    return ["]
        for k in range(0, len(values), size):
            lines += _rows("", values[k:k + size], len(model.parameters), " " * 8)
            lines[-1] += ","
        lines += ["    ]"]
    else:
        lines += _statement("return ", ", ".join(values) + ("," if len(values) == 1 else ""))
    return "\n".join(lines)


def _rows(head, values, columns, indent):
    """A list of lists, one row a line."""
    rows = [", ".join(values[k:k + columns]) for k in range(0, len(values), columns)]
    inner = [line for row in rows for line in statement(f"[{row}],", indent + "    ")]
    return [f"{indent}{head}[", *inner, f"{indent}]"]


def _statement(head, text):
    """One statement; a long one goes into parentheses, so that it may continue on further lines."""
    if len(head) + len(text) + 4 <= 110:
        return [f"    {head}{text}"]
    return statement(f"{head}({text})", "    ")


def _unpack(model, laid, formals, spelling):
    read = [(k, parameter.name) for k, parameter in enumerate(model.parameters) if parameter.name in laid.inputs]
    if not read:
        return []
    if len(read) == len(model.parameters):
        names = ", ".join(spelling.name(name) for _, name in read) + ("," if len(read) == 1 else "")
        return statement(f"{names} = {formals['p']}", "    ") if len(names) < 90 else \
            statement(f"({names}) = {formals['p']}", "    ")
    return [f"    {spelling.name(name)} = {formals['p']}[{k}]" for k, name in read]
