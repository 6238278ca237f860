"""Kernels of a Closure as C99, in double or in single precision; and the runtime's source in single precision."""

import math
import re

from rootwright.calculus.precision import SINGLE
from rootwright.emit import parts
from rootwright.emit.layout import given, known, lay_out, shared
from rootwright.emit.names import Names, taken_in_c
from rootwright.emit.text import statement
from rootwright.operations import OPERATIONS


class CSpelling:
    """How numbers, names and operations are written in C."""

    def __init__(self, model, precision):
        self.prefix = model.name + "_"
        self.precision = precision
        self.is_single = precision is SINGLE
        self.real = "float" if self.is_single else "double"
        self.nan = f"({self.real})NAN"          # NAN is a float: without the cast it would be promoted
        self.names = Names(model, lambda name: taken_in_c(name) or name.startswith(self.prefix))     # functions and types of the module

    def number(self, value):
        suffix, smallest = ("f", "FLT_MIN") if self.is_single else ("", "DBL_MIN")
        multiple = value / self.precision.smallest
        if 1.0 <= multiple < 64.0 and multiple == int(multiple):
            return smallest if multiple == 1.0 else f"({multiple}{suffix}*{smallest})"
        if not math.isfinite(value):
            return f"({self.real})INFINITY" if value > 0.0 else f"-({self.real})INFINITY"
        return self.precision.decimal(value) + suffix

    def name(self, name):
        return self.names.of(name)

    def operation(self, op, strength, constants):
        pattern = in_single(OPERATIONS[op].c) if self.is_single else OPERATIONS[op].c
        return pattern.replace("rw_", self.prefix), strength


_MATHS = "|".join(sorted({row.c.split("(")[0] for row in OPERATIONS.values() if re.match(r"[a-z]\w*\(", row.c)
                          and not row.c.startswith("rw_")} | {"copysign", "fmax", "fmin", "frexp", "ldexp", "nextafter"}))
_SINGLE = (
    (rf"\b({_MATHS})\(", r"\1f("),
    (r"(?<![\w.])(\d+\.\d*(?:e[-+]?\d+)?|\d+e[-+]?\d+|0x\w+p[-+]?\d+)", r"\1f"),
    (r"\bHUGE_VAL\b", "HUGE_VALF"), (r"\bDBL_", "FLT_"), (r"\b(u?int|INT)64_", r"\g<1>32_"),
)


def in_single(text):
    """C source in double precision as the same source in single precision: types, functions, numbers and limits."""
    parts = re.split(r"(/\*.*?\*/)", text, flags=re.S)
    for k in range(0, len(parts), 2):                       # comments keep their numbers
        for pattern, replacement in _SINGLE:
            parts[k] = re.sub(pattern, replacement, parts[k])
    return re.sub(r"\bdouble(s?)\b", r"float\1", re.sub(r"\bDouble(s?)\b", r"Float\1", "".join(parts)))


_SIGNATURES = {
    "bracket": ("void", "double {end}[2], double {rounding}[2]"),
    "residual": ("double", "double {x}, double *{slope}"),
    "rounding": ("double", "double {x}, double *{slope_rounding}, double *{curvature}"),
    "outside": ("int", ""),
    "kink": ("int", "double {x}, double {error_bound}"),
    "start": ("double", ""),
    "guess": ("double", ""),
    "still": ("void", "double {known}[]"),
    "curve": ("double", "const double {known}[], double {x}, {pointers}"),
    "trial": ("double", "double {known}[], double {x}, {pointers}"),
    "outputs": ("void", "const double {known}[], double {x}, double {y}[]"),
    "jacobian": ("void", "const double {known}[], double {x}, double {jac}[]"),
    "hessian": ("void", "const double {known}[], double {x}, double {hess}[]"),
}
_TARGETS = {
    "lower": "{end}[0]", "upper": "{end}[1]", "lower_rounding": "{rounding}[0]", "upper_rounding": "{rounding}[1]",
    "slope": "*{slope}", "rounding": "*{rounding}", "slope_rounding": "*{slope_rounding}", "curvature": "*{curvature}",
    "near_slope": "*{slope}", "near_curvature": "*{curvature}", "near_third": "*{third}",
    "tried_slope": "*{slope}", "tried_rounding": "*{rounding}", "tried_slope_rounding": "*{slope_rounding}",
    "tried_curvature": "*{curvature}",
}
_RETURNED = {"residual": "g", "rounding": "rounding", "outside": "outside", "kink": "kink", "start": "start", "guess": "guess",
             "curve": "near_g", "trial": "g"}
_FORMALS = ("p", "end", "rounding", "slope", "slope_rounding", "curvature", "third", "error_bound", "y", "jac", "hess", "known", "work", "parts", "part")
_FUNCTIONS = {"jacobian": "partials", "hessian": "second_partials"}      # where the kernel's name is the interface's
_FLAT = {"jacobian": "jac", "hessian": "hess", "still": "known"}                          # kernels whose results are one array


def kernel(closure, name, comment):
    """Text of one kernel as a static C function, with the given comment lines above it."""
    model = closure.model
    spelling = CSpelling(model, closure.precision)
    real = spelling.real
    formals = {formal: spelling.names.ours(formal) for formal in _FORMALS} | {"x": spelling.name(model.unknown.name)}
    kind, arguments = _SIGNATURES[name]
    arguments = arguments.replace("{pointers}", ", ".join(f"double {_TARGETS[result]}" for result in closure.kernels[name]
                                                          if result in _TARGETS))
    if not (known(closure, name) or name == "still" or name == "trial" and shared(closure)):
        arguments = arguments.replace("const double {known}[], ", "").replace("double {known}[], ", "")
    kind, arguments = (text.replace("double", real) for text in (kind, arguments))
    function = f"{model.name}_{_FUNCTIONS.get(name, name)}"
    first = f"const {real} {formals['p']}[]"
    signature = f"static {kind} {function}({first}, {arguments.format(**formals)})" if arguments else f"static {kind} {function}({first})"
    taken = {*spelling.names.used, *formals.values()}
    laid = lay_out(closure, name, spelling, taken, given(closure, name, formals["known"]))
    lines = [f"/* {line}" if k == 0 else f"   {line}" for k, line in enumerate(comment)]
    lines[-1] += " */"
    if len(laid.statements) > parts.WHOLE:
        read = [formal for formal in ("known", "x", "error_bound") if f"{{{formal}}}" in arguments]
        before, body = _in_parts(model, laid, formals, read, spelling, function)
    else:
        before, body = [], _unpack(model, laid.inputs, formals, spelling)
        if f"{real} {{known}}[]" in arguments and not laid.reads_given and name != "still" and not (name == "trial" and shared(closure)):
            body.append(f"    (void){formals['known']};")
        body += _statements(laid.statements, real)
    body += _results(name, model, laid, formals)
    return "\n".join([*before, *lines, signature, "{", *body, "}"])


def _statements(statements, real):
    return [line for step in statements
            for line in statement(f"const {'int' if step.condition else real} {step.name} = {step.text};", "    ")]


def _in_parts(model, laid, formals, read, spelling, function):
    """(lines of functions for the parts of a large kernel, lines that call them and fetch what the results need). read: the
    formal arguments that are read besides the parameters. The parts are called through a table, or a compiler would put
    them together again."""
    real, (array, table, index) = spelling.real, (formals[ours] for ours in ("work", "parts", "part"))
    names = [formals[formal] for formal in ("p", *read)]
    inputs = [f"const {real} {name}[]" if formal in ("p", "known") else f"{real} {name}" for formal, name in zip(("p", *read), names)]
    (*groups, last), size = parts.in_parts(laid.statements, tuple(laid.results.values()))
    before = [f"/* {function}, below, in parts: compilers are slow with long functions. */"]

    def body(part):
        lines = _unpack(model, [name for name in laid.inputs if spelling.name(name) in part.words], formals, spelling)
        lines += [f"    (void){name};" for name in names[1:] if name not in part.words and part is not last]
        for step, place in part.reads:
            kind, test = ("int", " > 0.0") if step.condition else (real, "")
            lines.append(f"    const {kind} {step.name} = {array}[{place}]{test};")
        return lines + _statements(part.statements, real) + [f"    {array}[{place}] = {step.name};" for step, place in part.keeps]

    for k, part in enumerate(groups, 1):
        before += [f"static void {function}_{k}({', '.join([*inputs, f'{real} {array}[]'])})", "{", *body(part), "}", ""]
    kinds = ", ".join([*(re.sub(r"\w+(\[\])?$", r"\1", given).strip() for given in inputs), f"{real} []"])
    listed = ", ".join(f"{function}_{k}" for k in range(1, len(groups) + 1))
    return before, [*statement(f"static void (*const {table}[])({kinds}) = {{ {listed} }};", "    "),
                    f"    {real} {array}[{max(1, size)}];", f"    int {index};",
                    f"    for ({index} = 0; {index} < {len(groups)}; {index}++) {{",
                    f"        {table}[{index}]({', '.join([*names, array])});", "    }",
                    *body(last)]


def _unpack(model, inputs, formals, spelling):
    """The parameters read, by name; what is not used is said to be unused."""
    read = [(k, parameter.name) for k, parameter in enumerate(model.parameters) if parameter.name in inputs]
    lines = []
    for k, parameter in read:
        lines.append(f"    const {spelling.real} {spelling.name(parameter)} = {formals['p']}[{k}];")
    if not read:
        lines.append(f"    (void){formals['p']};")
    return lines


def _results(name, model, laid, formals):
    lines, returned = [], None
    for k, (result, text) in enumerate(laid.results.items()):
        if result == _RETURNED.get(name):
            returned = text
        elif name == "outputs":
            lines += statement(f"{formals['y']}[{k + 1}] = {text};", "    ")
        elif name in _FLAT:
            lines += statement(f"{formals[_FLAT[name]]}[{k}] = {text};", "    ")
        elif result in _TARGETS:
            lines += statement(f"{_TARGETS[result].format(**formals)} = {text};", "    ")
        else:
            lines += statement(f"{formals['known']}[{result.removeprefix('known_')}] = {text};", "    ")
    for formal, read in (("error_bound", "error_bound"), ("x", model.unknown.name)):
        if f"{{{formal}}}" in _SIGNATURES[name][1] and read not in laid.inputs:
            lines.insert(0, f"    (void){formals[formal]};")
    if returned is not None:
        lines += statement(f"return {returned};", "    ")
    return lines
