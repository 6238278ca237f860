"""Kernels of a Closure as C99."""

import math

from rootwright.emit.layout import lay_out
from rootwright.emit.names import Names, taken_in_c
from rootwright.emit.text import statement
from rootwright.operations import OPERATIONS


class CSpelling:
    """How numbers, names and operations are written in C."""

    nan = "(double)NAN"      # NAN is a float: without the cast it would be promoted

    def __init__(self, model):
        self.prefix = model.name + "_"
        self.names = Names(model, lambda name: taken_in_c(name) or name.startswith(self.prefix))     # functions and types of the module

    def number(self, value):
        multiple = value / 2.0 ** -1022
        if 1.0 <= multiple < 64.0 and multiple == int(multiple):
            return "DBL_MIN" if multiple == 1.0 else f"({multiple}*DBL_MIN)"
        return repr(value) if math.isfinite(value) else "(double)INFINITY" if value > 0.0 else "-(double)INFINITY"

    def name(self, name):
        return self.names.of(name)

    def operation(self, op, strength, constants):
        return OPERATIONS[op].c.replace("rw_", self.prefix), strength


_SIGNATURES = {
    "bracket": ("void", "double {end}[2], double {rounding}[2]"),
    "residual": ("double", "double {x}, double *{slope}"),
    "rounding": ("double", "double {x}, double *{slope_rounding}, double *{curvature}"),
    "outside": ("int", ""),
    "kink": ("int", "double {x}, double {error_bound}"),
    "start": ("double", ""),
    "outputs": ("void", "double {x}, double {y}[]"),
    "jacobian": ("void", "double {x}, double {jac}[]"),
    "hessian": ("void", "double {x}, double {hess}[]"),
}
_TARGETS = {
    "lower": "{end}[0]", "upper": "{end}[1]", "lower_rounding": "{rounding}[0]", "upper_rounding": "{rounding}[1]",
    "slope": "*{slope}", "slope_rounding": "*{slope_rounding}", "curvature": "*{curvature}",
}
_RETURNED = ("g", "rounding", "outside", "kink", "start")
_FORMALS = ("p", "end", "rounding", "slope", "slope_rounding", "curvature", "error_bound", "y", "jac", "hess")
_FUNCTIONS = {"jacobian": "partials", "hessian": "second_partials"}      # where the kernel's name is the interface's
_FLAT = {"jacobian": "jac", "hessian": "hess"}                          # kernels whose results are one array


def kernel(closure, name, comment):
    """Text of one kernel as a static C function, with the given comment lines above it."""
    model = closure.model
    spelling = CSpelling(model)
    formals = {formal: spelling.names.ours(formal) for formal in _FORMALS} | {"x": spelling.name(model.unknown.name)}
    kind, arguments = _SIGNATURES[name]
    first = f"static {kind} {model.name}_{_FUNCTIONS.get(name, name)}(const double {formals['p']}[]"
    signature = first + (", " + arguments.format(**formals) if arguments else "") + ")"
    taken = {*spelling.names.used, *formals.values()}
    laid = lay_out(closure, name, spelling, taken)
    lines = [f"/* {line}" if k == 0 else f"   {line}" for k, line in enumerate(comment)]
    lines[-1] += " */"
    lines += [signature, "{"]
    lines += _unpack(model, laid, formals, spelling)
    for step in laid.statements:
        lines += statement(f"const {'int' if step.condition else 'double'} {step.name} = {step.text};", "    ")
    lines += _results(name, model, laid, formals)
    lines.append("}")
    return "\n".join(lines)


def _unpack(model, laid, formals, spelling):
    """The parameters read, by name; what is not used is said to be unused."""
    read = [(k, parameter.name) for k, parameter in enumerate(model.parameters) if parameter.name in laid.inputs]
    lines = []
    for k, parameter in read:
        lines.append(f"    const double {spelling.name(parameter)} = {formals['p']}[{k}];")
    if not read:
        lines.append(f"    (void){formals['p']};")
    return lines


def _results(name, model, laid, formals):
    lines, returned = [], None
    for k, (result, text) in enumerate(laid.results.items()):
        if result in _RETURNED:
            returned = text
        elif name == "outputs":
            lines += statement(f"{formals['y']}[{k + 1}] = {text};", "    ")
        elif name in _FLAT:
            lines += statement(f"{formals[_FLAT[name]]}[{k}] = {text};", "    ")
        else:
            lines += statement(f"{_TARGETS[result].format(**formals)} = {text};", "    ")
    for formal, read in (("error_bound", "error_bound"), ("x", model.unknown.name)):
        if f"{{{formal}}}" in _SIGNATURES[name][1] and read not in laid.inputs:
            lines.insert(0, f"    (void){formals[formal]};")
    if returned is not None:
        lines += statement(f"return {returned};", "    ")
    return lines
