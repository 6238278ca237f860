"""The formulas of a Closure as plain Python, the way a user of a numeric library writes them by hand.

Unlike an emitted module this text guards against nothing: it is for rivals, who are not to pay for our care. It holds
names of our own and numbers only.
"""

import math
from collections import Counter

from rootwright.calculus.program import needed
from rootwright.operations import OPERATIONS

_INFIX = {"add": "({0} + {1})", "sub": "({0} - {1})", "mul": "({0}*{1})", "div": "({0}/{1})", "neg": "(-{0})",
          "pow": "({0}**{1})", "lt": "({0} < {1})", "le": "({0} <= {1})", "gt": "({0} > {1})", "ge": "({0} >= {1})"}
_SCALAR = {"where": "({1} if {0} else {2})", "and": "({0} and {1})", "or": "({0} or {1})", "not": "(not {0})",
           "abs": "abs({0})", "min": "min({0}, {1})", "max": "max({0}, {1})",
           "sign": "(({0} > 0.0) - ({0} < 0.0))",
           "ordered": "({0} == {0} and {1} == {1})"}
_ARRAY = {"where": "m.where({0}, {1}, {2})", "and": "({0} & {1})", "or": "({0} | {1})", "not": "(~{0})",
          "abs": "m.abs({0})", "min": "m.minimum({0}, {1})", "max": "m.maximum({0}, {1})",
          "ordered": "(({0} == {0}) & ({1} == {1}))",
          "asin": "m.arcsin({0})", "acos": "m.arccos({0})", "atan": "m.arctan({0})", "atan2": "m.arctan2({0}, {1})",
          "asinh": "m.arcsinh({0})", "acosh": "m.arccosh({0})", "atanh": "m.arctanh({0})",
          "erf": "special.erf({0})", "erfc": "special.erfc({0})"}
_SPELLINGS = {"math": _SCALAR, "numpy": _ARRAY, "jax": _ARRAY, "autograd": _ARRAY | {"where": _SCALAR["where"],
              "and": _SCALAR["and"], "or": _SCALAR["or"], "not": _SCALAR["not"]}}
_FUNCTIONS = {                   # function: the kernel whose results it returns; all but bracket and start take x
    "bracket": "bracket", "start": "start", "g": "residual", "slope": "residual", "residual": "residual",
    "outputs": "outputs", "jacobian": "jacobian"}


def spell(closure, library):
    """Source of functions: bracket(*p), start(*p), g(x, *p), slope(x, *p), residual(x, *p), outputs(x, *p),
    jacobian(x, *p).

    start gives None where the spec has none; residual gives g and the slope; outputs may be an empty tuple; the jacobian
    comes flat, row-major.
    """
    spelling = _SPELLINGS[library]
    return "\n\n".join(_function(closure, name, kernel, spelling) for name, kernel in _FUNCTIONS.items()) + "\n"


def _function(closure, name, kernel, spelling):
    results = closure.kernels.get(kernel, ())
    if kernel == "bracket":
        results = results[:2]
    if name in ("g", "slope"):
        results = results[:1] if name == "g" else results[1:]
    instructions, constants = closure.program.instructions, closure.constants
    places = {parameter.name: f"p{k}" for k, parameter in enumerate(closure.model.parameters)}
    arguments = ", ".join([*(["x"] if kernel not in ("bracket", "start") else []), *places.values()])
    places[closure.model.unknown.name] = "x"
    roots = [closure.program.results[result] for result in results]
    uses = Counter(arg for node in needed(instructions, roots) for arg in instructions[node].args)
    uses.update(roots)
    texts, lines = {}, [f"def {name}({arguments}):"]
    for node in needed(instructions, roots):
        instruction = instructions[node]
        if node in constants:
            texts[node] = _number(constants[node][0])
        elif instruction.op == "input":
            texts[node] = places[instruction.value]
        elif instruction.op == "nan":
            texts[node] = "m.nan"
        elif instruction.op == "named":
            texts[node] = texts[instruction.args[0]]
        else:
            text = _pattern(instruction.op, spelling).format(*(texts[arg] for arg in instruction.args))
            texts[node] = text
            if uses[node] > 1 or len(text) > 200:
                texts[node] = f"t{node}"
                lines.append(f"    t{node} = {text}")
    values = [texts[root] for root in roots]
    if name in ("g", "slope", "start"):
        lines.append(f"    return {values[0] if values else None}")
    else:
        lines.append(f"    return ({', '.join(values)}{',' if values else ''})")
    return "\n".join(lines)


def _pattern(op, spelling):
    if op in _INFIX:
        return _INFIX[op]
    return spelling.get(op) or f"m.{op}({', '.join('{%d}' % k for k in range(OPERATIONS[op].arity[0]))})"


def _number(value):
    if math.isfinite(value):
        return repr(value) if value >= 0.0 else f"({value!r})"
    return "m.inf" if value > 0.0 else "(-m.inf)"
