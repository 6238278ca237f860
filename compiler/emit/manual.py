"""The manual of a module: the first comment of every emitted file, as plain lines of text."""

from rootwright.calculus.precision import DOUBLE
from rootwright.calculus.program import needed
from rootwright.emit.text import folded, harmless, paragraph
from rootwright.operations import OPERATIONS

STATUS = (
    (0, "solved", "the root, its outputs and derivatives hold"),
    (1, "outside_range", "caveat: a parameter is outside its range, or a requirement fails"),
    (2, "flat", "caveat: the slope vanishes to rounding; the derivatives are NaN"),
    (4, "kink", "caveat: the root lies on a switch between pieces; derivatives of the piece chosen"),
    (-1, "not_finite", "a parameter, a bracket end or the residual is NaN or infinite"),
    (-2, "no_sign_change", "the residual has one sign at both ends of the bracket"),
    (-3, "iteration_limit", "the limit on evaluations was reached"),
    (-4, "bad_bracket", "the lower end lies above the upper end"),
    (-5, "jump", "the sign changes across a step or a pole, where there is no root"),
)

_UNPROVED = ("Proved over the operating range: nothing yet. Every solve checks its own point and reports what it finds.",)


def manual(closure, plan, example, interface, origin):
    """Lines of the manual. `example` is a list of lines in the target language, `interface` names its conventions,
    `plan` says how the module comes to the root, `origin` where the file comes from."""
    model = closure.model
    lines = [*paragraph(f"{model.name}: {model.title}" if model.title else model.name), ""]
    lines += _equation(closure)
    lines += _quantities(closure)
    if model.source:
        lines += paragraph(f"Source: {model.source}", hang="    ") + [""]
    if model.caution:
        lines += paragraph(f"Caution: {model.caution}", hang="    ") + [""]
    lines += interface + [""]
    lines += _status() + _accuracy(closure, plan)
    if plan.why:
        lines += ["Plan:", "", *(line for reason in plan.why for line in paragraph(reason, indent="    ", hang="        ")), ""]
    lines += [*(closure.promise.lines if closure.promise else _UNPROVED), ""]
    lines += ["Example:", ""] + [f"    {line}" for line in example] + [""]
    return [harmless(line) for line in lines] + origin


def _equation(closure):
    model = closure.model
    lines = ["Solves, for one unknown,", ""]
    lines += paragraph(model.equation, indent="    ", hang="        ")
    if model.constants or model.definitions:
        lines += ["", "with", ""]
        for item in (*model.constants, *model.definitions):
            lines += paragraph(f"{item.name} = {item.expression.text}", indent="    ", hang="        ")
    return lines + [""]


def _quantities(closure):
    model, unknown = closure.model, closure.model.unknown
    rows = []
    for k, parameter in enumerate(model.parameters):
        held = "" if parameter.differentiate else "; not differentiated"
        rows.append((f"p[{k}]", parameter.name, f"[{parameter.low.text}, {parameter.high.text}]", parameter.unit, parameter.about + held))
    left, right = "(" if unknown.open_lower else "[", ")" if unknown.open_upper else "]"
    rows.append(("y[0]", unknown.name, f"{left}{unknown.lower.text}, {unknown.upper.text}{right}", unknown.unit, unknown.about))
    for k, output in enumerate(model.outputs):
        rows.append((f"y[{k + 1}]", output.name, f"= {output.expression.text}", output.unit, output.about))
    widths = [min(24, max(len(folded(row[column])) for row in rows)) for column in range(3)]
    lines = ["Parameters (with their ranges), unknown (with its bracket) and outputs:", ""]
    for place, name, bounds, unit, about in rows:
        head = f"{place:{widths[0]}}  {name:{widths[1]}}  {folded(bounds):{widths[2]}}"
        tail = ", ".join(part for part in (about, None if unit in (None, "1") else f"in {unit}") if part)
        lines += paragraph_keeping(f"    {head}  {folded(tail)}".rstrip())
    if model.require:
        lines += ["", "Meant for parameters with"]
        for condition in model.require:
            lines += paragraph(condition.text, indent="    ", hang="        ")
    return lines + [""]


def paragraph_keeping(line, width=104):
    """A table row; continued with a deep indent where it is too long."""
    if len(line) <= width:
        return [line]
    cut = line.rfind(" ", 40, width)
    if cut < 0:
        return [line]
    return [line[:cut].rstrip()] + paragraph(line[cut:], width - 4, indent=" " * 12)


def _status():
    lines = ["Status (the caveats 1, 2 and 4 add up; negative: no root, and every number is NaN):", ""]
    return lines + [f"    {code:2}  {word:16} {meaning}" for code, word, meaning in STATUS] + [""]


def _accuracy(closure, plan):
    program = closure.program
    used = {program.instructions[node].op for node in needed(program.instructions, program.results.values())
            if node not in closure.constants}
    precision = closure.precision
    table = sorted((precision.ulps(op), op) for op in used if op in OPERATIONS and precision.ulps(op) > 0.5)
    numbers = "doubles" if precision is DOUBLE else "floats"
    lines = [] if precision is DOUBLE else paragraph("Single precision: float throughout, no operation in double.")
    lines += paragraph(
        "Accuracy: the root is within 4 units in the last place plus 4 times its noise (what one rounding of every "
        "operation of the residual moves the root by). error_bound covers the distance to the exact root of the equation as "
        f"written, at the given {numbers}, for parameters inside their ranges and rounding to nearest"
        + (", with a maths library as accurate as: " + ", ".join(f"{op} {ulps:g} ulp" for ulps, op in table) if table else "") + ".")
    return lines + paragraph(f"At most {closure.limit + plan.extra} evaluations of the residual a solve.") + [""]
