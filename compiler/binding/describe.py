"""What an array closure says about itself, from its spec: signature, docstring, representation."""

import inspect

from rootwright.emit.manual import STATUS
from rootwright.emit.text import folded, paragraph

REQUIRED = inspect.Parameter.empty
OPTIONS = {                       # option: (default, meaning)
    "p_dot": (REQUIRED, "direction of the parameters: an array (..., N) or {parameter: number or array}, else zero"),
    "y_bar": (REQUIRED, "weights of the results: an array (..., M) or {result: number or array}, else zero"),
    "start": (None, "warm start: a number, an array or a solution; changes the cost and the last bits only"),
    "root": (None, "roots found before: an array or a solution; solved for where not given"),
    "out": (None, "where to write: {name of a result: array}, or an earlier solution"),
    "threads": (1, "threads that share a large batch; the bits do not depend on it"),
    "errors": ("nan", '"nan": a point without a root is NaN, its status says why; "raise": Unsolved is raised'),
}
METHODS = {                       # method: (options, shape of what it returns)
    "__call__": (("start", "out", "threads", "errors"), "B"),
    "jacobian": (("root", "out", "threads", "errors"), "B + (M, N)"),
    "tangent": (("p_dot", "root", "out", "threads", "errors"), "B + (M,)"),
    "adjoint": (("y_bar", "root", "out", "threads", "errors"), "B + (N,)"),
    "hessian": (("root", "out", "threads", "errors"), "B + (M, N, N)"),
    "tangent_adjoint": (("p_dot", "y_bar", "root", "out", "threads", "errors"), "B + (N,)"),
}
_CELL = 32                        # widest cell that the columns of the representation line up for
BY_ORDER = (("__call__",), ("__call__", "jacobian", "tangent", "adjoint"), tuple(METHODS))


def spelled(option, parameters):
    """Keyword of an option: its name, with two underscores added where a parameter has it (none ends in two)."""
    return option if option not in parameters else f"{option}__"


def signature(parameters, method):
    """inspect.Signature of a method: the spec's parameters, then the options by keyword."""
    kind = inspect.Parameter
    return inspect.Signature([
        *(kind(name, kind.POSITIONAL_OR_KEYWORD) for name in parameters),
        *(kind(spelled(option, parameters), kind.KEYWORD_ONLY, default=OPTIONS[option][0])
          for option in METHODS[method][0])])


def docstring(model, order):
    """The documentation of a closure, for help() and notebooks."""
    names = [parameter.name for parameter in model.parameters]
    lines = [folded(model.title or model.name), "", *_formula(model), ""]
    lines += ["Parameters", "----------"]
    for parameter in model.parameters:
        held = "" if parameter.differentiate else "; not differentiated"
        lines += _entry(f"{parameter.name} : number or array",
                        f"{_about(parameter)}range {parameter.low.text} to {parameter.high.text}{held}")
    for option in METHODS["__call__"][0]:
        lines += _entry(f"{spelled(option, names)} : by keyword", OPTIONS[option][1])
    lines += ["", "Returns", "-------"] + paragraph(
        "Solution with the attributes below: numbers where every parameter is a number, else arrays of the shape B to "
        "which the parameters (and start) broadcast.")
    lines += _entry(model.unknown.name, f"{_about(model.unknown)}root in {_bracket(model.unknown)}")
    for output in model.outputs:
        lines += _entry(output.name, f"{_about(output)}{output.expression.text}")
    lines += _entry("error_bound", f"absolute, on {model.unknown.name}")
    lines += _entry("status", "; ".join(f"{code} {word}" for code, word, _ in STATUS) + "; caveats (positive) add up")
    lines += _entry("iterations", "steps of the solver")
    lines += ["", "Methods", "-------"]
    lines += [f"{name}{signature(names, name)}: {METHODS[name][1]}" for name in BY_ORDER[order] if name != "__call__"]
    for label, text in (("Source", model.source), ("Caution", model.caution)):
        if text:
            lines += ["", *paragraph(f"{label}: {text}")]
    return "\n".join(lines) + "\n"


def representation(model, target):
    """A few lines that say what a closure computes: formula, units, ranges."""
    head = f"{model.name}({', '.join(parameter.name for parameter in model.parameters)}) -> {', '.join(model.results)}"
    lines = [head + ("" if target == "c" else "   [Python target]")]
    lines += paragraph(model.title, indent="  ") if model.title else []
    lines += _formula(model)
    rows = [(item.name, f"{item.low.text} to {item.high.text}", item) for item in model.parameters]
    rows += [(model.unknown.name, _bracket(model.unknown), model.unknown)]
    rows += [(item.name, f"= {item.expression.text}", item) for item in model.outputs]
    first = max(len(name) for name, _, _ in rows)
    second = max((len(folded(bounds)) for _, bounds, _ in rows if len(folded(bounds)) <= _CELL), default=0)
    for name, bounds, item in rows:
        unit = f"[{folded(item.unit)}]" if item.unit not in (None, "1") else ""
        about = " ".join(filter(None, (folded(item.about), unit)))
        lines.append(f"  {name:{first}}  {folded(bounds):{second}}  {about}".rstrip())
    return "\n".join(lines)


def _formula(model):
    zero = "" if "=" in model.equation else " = 0"
    lines = paragraph(f"{model.equation}{zero}", indent="    ", hang="        ")
    for item in (*model.definitions, *model.constants):
        lines += paragraph(f"{item.name} = {item.expression.text}", indent="      ", hang="        ")
    return lines


def _bracket(unknown):
    left, right = "(" if unknown.open_lower else "[", ")" if unknown.open_upper else "]"
    return f"{left}{unknown.lower.text}, {unknown.upper.text}{right}"


def _about(item):
    about = [item.about] if item.about else []
    unit = [f"in {item.unit}"] if item.unit not in (None, "1") else []
    return "".join(f"{part}, " for part in about + unit)


def _entry(head, text):
    return [head, *paragraph(text, indent="    ")]
