"""A Closure to the files of a module: kernels printed, the runtime's source copied in, the manual on top."""

import re
from fractions import Fraction
from importlib import resources

import jinja2

from rootwright.calculus.constants import nearest
from rootwright.calculus.lower import Lowering
from rootwright.calculus.precision import DOUBLE, SINGLE
from rootwright.calculus.program import Graph
from rootwright.calculus.sampling import between
from rootwright.emit import c, python
from rootwright.emit.describe import comments
from rootwright.emit.layout import known, shared
from rootwright.emit.manual import STATUS, manual
from rootwright.emit.provenance import provenance, seal
from rootwright.emit.text import paragraph
from rootwright.plan.plan import METHODS, PLAIN, TRIALS

_KERNELS = ("bracket", "residual", "rounding", "outside", "kink", "start", "guess", "still", "curve", "trial", "outputs", "jacobian", "hessian")

_LICENCE = "SPDX-License-Identifier: 0BSD (no conditions; no warranty)"


_LONGEST_IN_FORTRAN = 63 - len("_tangent_adjoint")


class Unsuitable(ValueError):
    """An option that this module cannot have; the message is one line that says why."""


def assemble(closure, target="c", plan=PLAIN, **options):
    """Files of the module, {file name: text}: header and source for "c", one file for "python". `plan` says how the module comes to the root.

    Options of "c": single_header, one header that holds the source, too; fortran, the interface as a Fortran module besides. Raises Unsuitable.
    """
    files = {"c": _assemble_c, "python": _assemble_python}[target](plan.closure or closure, plan, **options)
    return {name: seal(text) for name, text in files.items()}


def _assemble_c(closure, plan, single_header=False, fortran=False):
    model, sizes = closure.model, _sizes(closure)
    upper, real = model.name.upper(), c.CSpelling(model, closure.precision).real

    def runtime(name):
        text = resolve(_source(name), _features(closure, plan))
        words = {"RW_M*RW_N*RW_N": sizes["MNN"], "RW_M*RW_N": sizes["MN"], "RW_N": sizes["N"], "RW_M": sizes["M"],
                 "RW_LIMIT": closure.limit, **{f"RW_{word}": value for word, value in _plan_words(closure, plan).items()}}
        for word, value in words.items():
            text = re.sub(rf"\b{re.escape(word)}\b", str(value), text)
        if closure.precision is SINGLE:
            text = c.in_single(text)
        return text.replace("rw_", f"{model.name}_").replace("RW_", f"{upper}_")

    kernels = "\n\n".join(c.kernel(closure, name, comments(closure)[name]) for name in _KERNELS if name in closure.kernels)
    solver, interface = runtime("solver.c"), runtime("interface.c")
    if plan.closure:
        solver += "\n\n" + _with_known(closure, runtime("approach.c"))
    interface = _with_known(closure, interface)
    helpers = _used(runtime("arithmetic.c"), kernels + solver + interface, r"^static \w+ (\w+)\(")
    origin = _origin(closure, plan, "c", {"single-header": ""} if single_header else {})
    page = manual(closure, plan, _example_c(closure), _interface_c(closure, single_header), origin)
    parts = {"name": model.name, "real": real, "helpers": "".join(f"{text}\n\n" for text in helpers), "kernels": kernels,
             "solver": solver, "interface": interface}
    source = _render("implementation.c.j2", parts)
    context = sizes | {"name": model.name, "upper": upper, "real": real, "status": [(code, word) for code, word, _ in STATUS],
                       "results": ", ".join(model.results), "manual": page, "implementation": source if single_header else ""}
    files = {f"{model.name}.h": _render("module.h.j2", context)}
    if not single_header:
        files[f"{model.name}.c"] = _render("module.c.j2", {"name": model.name, "provenance": origin, "implementation": source})
    if fortran:
        files[f"{model.name}_module.f90"] = _assemble_fortran(closure, plan)
    return files


def _assemble_fortran(closure, plan):
    model = closure.model
    if len(model.name) > _LONGEST_IN_FORTRAN:
        raise Unsuitable(f"names in Fortran have at most 63 characters, which leaves {_LONGEST_IN_FORTRAN} for the module's own; "
                         f"{model.name} has {len(model.name)}")
    lines = [*paragraph(f"{model.name}_module: interface to the C module {model.name}, whose manual is in {model.name}.h"), "",
             *paragraph(f"Parameters p({len(model.parameters)}): {', '.join(p.name for p in model.parameters)}", hang="    "),
             *paragraph(f"Results y({len(model.results)}): {', '.join(model.results)}", hang="    "), ""]
    if model.caution:
        lines += [*paragraph(f"Caution: {model.caution}", hang="    "), ""]
    lines += ["Example:", "", *(f"    {line}" for line in _example_fortran(closure)), ""]
    origin = _origin(closure, plan, "c", {"fortran": ""})
    return _render("module.f90.j2", _sizes(closure) | {
        "name": model.name, "status": [(code, word) for code, word, _ in STATUS], "manual": lines + origin, "kind": _kind(closure)})


def _kind(closure):
    return "c_float" if closure.precision is SINGLE else "c_double"


def _interface_c(closure, single_header):
    model = closure.model
    lines = paragraph(f"Interface: p[{len(model.parameters)}] holds the parameters, y[{len(model.results)}] the results, each in "
                      "the order above. No heap, no globals, re-entrant.")
    if single_header:
        lines += paragraph(f"One source file of a program, in C or in C++, defines {model.name.upper()}_IMPLEMENTATION before it "
                           "includes this header; the others include it alone.")
    return lines + paragraph("Compile without contraction (-ffp-contract=off) where results are to agree to the last bit across "
                             "compilers.")


def _assemble_python(closure, plan):
    model, sizes = closure.model, _sizes(closure)

    def runtime(name):
        text = resolve(_source(name), _features(closure, plan))
        words = {"LIMIT": closure.limit, **_plan_words(closure, plan)}
        for word, value in words.items():
            text = re.sub(rf"\b{word}\b", str(value), text)
        return text

    kernels = "\n\n\n".join(python.kernel(closure, name, comments(closure)[name]) for name in _KERNELS if name in closure.kernels)
    solver, interface = runtime("solver.py"), runtime("interface.py")
    if plan.closure:
        solver += "\n\n\n" + _with_known(closure, runtime("approach.py"))
    interface = _with_known(closure, interface)
    helpers = _used(runtime("arithmetic.py"), kernels + solver + interface, r"^def (\w+)\(")
    page = manual(closure, plan, _example_python(closure), [
        f"Interface: p is a sequence of the {sizes['N']} parameters, y a list of the {sizes['M']} results, each in the "
        "order above."], _origin(closure, plan, "python", {}))
    context = sizes | {"status": [(code, word) for code, word, _ in STATUS], "parameters": ", ".join(p.name for p in model.parameters),
                       "results": ", ".join(model.results), "manual": page, "kernels": kernels, "solver": solver,
                       "interface": interface, "helpers": "".join(f"{text}\n\n\n" for text in helpers)}
    return {f"{model.name}.py": _render("module.py.j2", context)}


def _origin(closure, plan, target, flags):
    """The lines that say where a file comes from; flags: the options that shaped it besides."""
    flags = flags | {"plan": "plain"} if plan is PLAIN else flags
    certificate = closure.promise.digest if closure.promise else None
    precision = {} if closure.precision is DOUBLE else {"precision": closure.precision.name}
    options = {"target": target, "order": closure.order} | precision | flags
    return [*provenance(closure.model, options, certificate), _LICENCE]


def _sizes(closure):
    n, m = len(closure.model.parameters), len(closure.model.results)
    return {"N": n, "M": m, "MN": m * n, "MNN": m * n * n, "order": closure.order}


def _features(closure, plan):
    unknown = closure.model.unknown
    return {"OPEN_LOWER": unknown.open_lower, "OPEN_UPPER": unknown.open_upper, "SWITCHES": "kink" in closure.kernels,
            "START": "start" in closure.kernels, "OUTPUTS": "outputs" in closure.kernels,
            "STILL": "still" in closure.kernels, "KNOWN": _known(closure) > 0, "PLANNED": plan.closure is not None,
            "ENDS": plan.ends == "evaluated", "STEEP": plan.ends == "steep", "CAREFUL": not plan.sure,
            **{method.upper(): plan.method == method and plan.steps > 0 for method in METHODS},
            "JACOBIAN": "jacobian" in closure.kernels, "HESSIAN": "hessian" in closure.kernels}


def resolve(text, features):
    """The text with its optional blocks decided: `#if NAME` (or `#if RW_NAME`), `#else`, `#endif` on lines of their own."""
    kept, open_blocks = [], []
    for line in text.splitlines():
        words = line.split()
        if words[:1] == ["#if"]:
            open_blocks.append(_holds(" ".join(words[1:]), features))
        elif words[:1] == ["#else"]:
            open_blocks[-1] = not open_blocks[-1]
        elif words[:1] == ["#endif"]:
            open_blocks.pop()
        elif all(open_blocks):
            kept.append(line)
    return "\n".join(kept)


def _holds(test, features):
    """A feature, or features joined by ||."""
    return any(features[name.strip().removeprefix("RW_")] for name in test.split("||"))


def _below(value):
    """A positive number, cut to three digits below it."""
    return float(f"{0.99*value:.3g}")


def _known(closure):
    """How many values are known to the kernels besides their arguments."""
    return len(closure.kernels.get("still", ())) + len(shared(closure))


def _with_known(closure, text):
    """Every kernel takes what is known, where anything is to it."""
    for kernel, function in (("curve", "curve"), ("trial", "trial"), ("outputs", "outputs"), ("jacobian", "partials"),
                             ("hessian", "second_partials")):
        if not (known(closure, kernel) or kernel == "trial" and shared(closure)):
            text = text.replace(f"_{function}(p, known, ", f"_{function}(p, ")
    return text if _known(closure) else re.sub(r"\w+ known\[\], ", "", text).replace("start, known", "start")


def _plan_words(closure, plan):
    """What the text of the short way says of a plan."""
    return {"TRIALS": TRIALS, "STEPS": plan.steps, "LEAST_RISE": _below(plan.least_rise), "PACE": plan.pace,
            "K": _known(closure), "STANDING": len(closure.kernels.get("still", ())),
            "HOW": {"proved": "proved for the whole operating range", "steep": "seen from the residual at the root",
                    "evaluated": "looked at first"}[plan.ends]}


def _source(name):
    """Text of a file of the runtime without its licence line, docstring and imports: only what is copied."""
    text = resources.files("rootwright.runtime").joinpath(name).read_text(encoding="utf-8")
    body = re.sub(r'\A(?:#[^\n]*\n|/\*[^\n]*SPDX[^\n]*\n)\n*("""(?:[^"]|"(?!""))*"""\n)?', "", text)
    return re.sub(r"^import \w+\n", "", body, flags=re.M).strip("\n")


def _used(text, referring, definition):
    """The functions of a runtime file that the module calls, directly or through one another, in file order."""
    functions = {}
    for chunk in re.split(r"\n\n+(?=\S)", text):
        found = re.search(definition, chunk, flags=re.M)
        if found:
            functions[found.group(1)] = chunk
    wanted = set()
    pending = [referring]
    while pending:
        words = set(re.findall(r"\w+", pending.pop()))
        for name in functions:
            if name in words and name not in wanted:
                wanted.add(name)
                pending.append(functions[name])
    return [chunk for name, chunk in functions.items() if name in wanted]


def _render(template, context):
    environment = jinja2.Environment(trim_blocks=True, lstrip_blocks=True, undefined=jinja2.StrictUndefined, keep_trailing_newline=True)
    return environment.from_string(resources.files("rootwright.runtime").joinpath(template).read_text(encoding="utf-8")).render(context)


def _example_point(closure):
    """A point inside the operating range to show: the first published one, else the middle of the ranges."""
    model = closure.model
    if not model.published:
        middles = [between(low, high, 0.5, parameter.spread) for parameter, (low, high) in zip(model.parameters, closure.ranges)]
        return [closure.precision.nearest(Fraction(value)) for value in middles]
    graph = Graph(precision=closure.precision)
    lowering = Lowering(graph)
    for constant in model.constants:
        lowering.declare(constant.name, lowering.lower(constant.expression))
    given = dict(model.published[0].given)
    return [nearest(graph, lowering.lower(given[parameter.name])) for parameter in model.parameters]


def _example_c(closure):
    model, spelling = closure.model, c.CSpelling(closure.model, closure.precision)
    real = spelling.real
    values = ", ".join(spelling.number(value) for value in _example_point(closure))
    root, first = model.unknown.name, model.parameters[0].name
    point = [f"const {real} p[{len(model.parameters)}] = {{ {values} }};", f"{model.name}_point r;"]
    if closure.order == 0:
        return [*point, f"if ({model.name}_solve(p, NAN, &r) >= 0) {{", f"    const {real} {root} = r.y[0];", "}"]
    return [*point,
            f"{real} jac[{len(model.results) * len(model.parameters)}];",
            f"if ({model.name}_solve_jacobian(p, NAN, &r, jac) >= 0) {{",
            f"    const {real} {root} = r.y[0], {root}_{first} = jac[0];",
            "}"]


def _example_fortran(closure):
    model = closure.model
    decimals, letter = map(closure.precision.decimal, _example_point(closure)), "e" if closure.precision is SINGLE else "d"
    point = [text.replace("e", letter) if "e" in text else f"{text}{letter}0" for text in decimals]
    return [f"real({_kind(closure)}) :: p({len(point)}) = [ {', '.join(point)} ]",
            f"type({model.name}_point) :: r",
            f"if ({model.name}_solve(p, ieee_value(1{letter}0, ieee_quiet_nan), r) >= 0) print *, r%y(1)"]


def _example_python(closure):
    model = closure.model
    values = ", ".join(repr(value) for value in _example_point(closure))
    root, first = model.unknown.name, model.parameters[0].name
    if closure.order == 0:
        return [f"import {model.name}", f"r = {model.name}.solve([{values}])", "if r.status >= 0:",
                f"    {root} = r.y[0]"]
    return [f"import {model.name}",
            f"r, jac = {model.name}.solve_jacobian([{values}])",
            "if r.status >= 0:",
            f"    {root}, {root}_{first} = r.y[0], jac[0][0]"]
