"""A Closure to its Plan: whether the module tries a short way to the root before the safeguarded solver, and from where.

The plan rests on three things: whether the signs at the ends of the bracket are proved to differ over the whole
operating range, so that the ends need no evaluation; the convergence measured from every candidate start over sampled
points of it; and counts of operations.
"""

import math
from dataclasses import dataclass, replace
from fractions import Fraction

import numpy as np

from rootwright.calculus.precision import SINGLE
from rootwright.calculus.program import Graph, Program, needed
from rootwright.plan.facts import computed_finite, domain, ends_differ, least_rise
from rootwright.plan.fit import MOST_TERMS, columns, coordinates, exponents, fit, horner, polynomial
from rootwright.plan.forms import constants_of, quick, still
from rootwright.plan.measure import Range, depend_on, effort, mean
from rootwright.plan.plan import TRIALS, Plan

_TRIAL = ("g", "slope", "rounding", "slope_rounding", "curvature")
_CURVE = ("g", "slope", "curvature")
LARGEST = 1200              # instructions of a certificate beyond which the module keeps to one solver
_PLAIN = 6.0                # evaluations, in trials, that the plain solver is taken to need
_MARGIN = 0.9               # a dearer guess must save this much


@dataclass(frozen=True)
class _Candidate:
    name: str
    x: np.ndarray                   # starts at the measured points
    node: int


def choose(closure):
    """The Plan of a Closure: the same one on every machine."""
    with np.errstate(all="ignore"):
        return _choose(closure)


def _choose(closure):
    unknown = closure.model.unknown
    if closure.precision is SINGLE:
        return _plain("in single precision the safeguarded solver is all there is")
    if unknown.root != "only":
        return _plain(f"the {unknown.root} of several roots is wanted, and a short way could meet another one")
    program = closure.program
    if len(needed(program.instructions, [program.results[name] for name in _TRIAL])) > LARGEST:
        return _plain("the residual is so large that a short way would double the size of the module")
    measured = Range(closure)
    if measured.size < 8:
        return _plain("too few sampled points of the operating range have a root")
    graph = _reopened(closure)
    trial = effort(closure.program.instructions, [closure.program.results[name] for name in _TRIAL])
    best, figures = None, None
    for candidate in _candidates(measured, graph):
        spent = measured.trials(candidate.x)
        missed = float(np.mean(np.isinf(spent)))
        trials = mean(np.where(np.isinf(spent), TRIALS + _PLAIN, spent).tolist())
        cost = trial * trials + effort(graph.instructions, [candidate.node], _known(closure))
        if best is None or cost < _MARGIN * figures[0]:
            best, figures = candidate, (cost, trials, missed)
    cost, trials, missed = figures
    if cost > _PLAIN * trial or missed > 0.25:
        return _plain(f"no start came close enough: the best, {best.name}, took {trials:.2g} evaluations and missed "
                      f"{100.0 * missed:.3g} % of {measured.size} sampled points")
    known, least = _ends(closure)
    if known == "evaluated":
        if unknown.open_lower or unknown.open_upper:
            return _plain("the signs beside an open end are not proved to differ")
        cost += 2.0 * effort(closure.program.instructions, [closure.program.results["g"]])
        if cost > _PLAIN * trial:
            return _plain("the residual at both ends and a short way would take more than the safeguarded solver")
    why = (f"start: {best.name}; Halley's steps, {trials:.3g} evaluations in the mean of {measured.size} sampled points"
           + (f", {100.0 * missed:.2g} % left to the plain solver" if missed else ""),
           _ENDS[known].format(least=least))
    return Plan(_with_kernels(closure, graph, best.node), known, best.name, why, least)


def _plain(reason):
    return Plan(None, "evaluated", "", (f"plain: {reason}",))


def _known(closure):
    """What the module works out anyhow before it starts."""
    program = closure.program
    return set(needed(program.instructions, [program.results["lower"], program.results["upper"]]))


def _ends(closure):
    """(what is known of the signs at the ends, bound of the rise)."""
    charts = domain(closure)
    if charts is None or not computed_finite(charts, closure):
        return "evaluated", 0.0
    if closure.promise is not None and "exists" in closure.promise.proved:
        return "proved", 0.0
    least = least_rise(charts)
    if ends_differ(charts):
        return "proved", least
    return ("steep", least) if least > 0.0 else ("evaluated", 0.0)


_ENDS = {
    "proved": "ends: signs proved to differ over the operating range; not evaluated",
    "steep": "ends: not evaluated; the residual is proved monotone over the operating range, and rises by {least:.3g} at least "
             "from end to end",
    "evaluated": "ends: evaluated first, since no short proof shows that their signs differ",
}


def _candidates(measured, graph):
    """Starts, cheap ones first: the author's, shares of the bracket, fits."""
    program = measured.program
    lower, upper = program.results["lower"], program.results["upper"]
    width = measured.upper - measured.lower
    if "start" in measured.closure.kernels:
        yield _Candidate("the author's", measured._column("start"), program.results["start"])
    for eighths in (4, 2, 6, 1, 7):
        node = graph.add(lower, graph.mul(graph.number(Fraction(eighths, 8)), graph.sub(upper, lower)))
        name = "the middle of the bracket" if eighths == 4 else f"{eighths}/8 of the bracket from its lower end"
        yield _Candidate(name, measured.lower + eighths / 8.0 * width, node)
    variables = coordinates(measured)
    values = columns(measured, variables)
    nodes = [_variable(graph, *variable) for variable in variables]
    for degree in (1, 2, 3, 4):
        powers = exponents(len(variables), degree)
        if len(powers) > MOST_TERMS or 2 * len(powers) > measured.size or not variables:
            return
        for name, target, back, finish in _targets(measured, graph, lower, upper):
            coefficients = fit(values, powers, target)
            if coefficients is None:
                continue
            guess = back(polynomial(values, powers, coefficients))
            terms = {power: c for power, c in zip(powers, coefficients) if c}
            yield _Candidate(f"a polynomial of degree {degree} fitted to {name}", guess,
                             finish(horner(graph, nodes, terms)))


def _targets(measured, graph, lower, upper):
    """(what is fitted, its values, the way back to the root in arrays, and in the graph)."""
    low, width, root = measured.lower, measured.upper - measured.lower, measured.root
    yield "the root", root, lambda v: v, lambda node: node
    if not (np.ptp(low) == 0.0 and np.ptp(width) == 0.0):
        yield ("the root's share of the bracket", (root - low) / width, lambda v: low + v * width,
               lambda node: graph.add(lower, graph.mul(node, graph.sub(upper, lower))))
    if root.min() > 0.0 and root.max() > 4.0 * root.min():
        yield ("the logarithm of the root", np.array([math.log(v) for v in root.tolist()]),
               lambda v: np.array([math.exp(min(u, 700.0)) for u in v.tolist()]), graph.exp)


def _variable(graph, name, logarithmic, scale, shift):
    node = graph.input(name)
    scaled = graph.mul(graph.number(Fraction(repr(scale))), graph.log(node) if logarithmic else node)
    return graph.add(scaled, graph.number(Fraction(repr(shift))))


def _reopened(closure):
    """A Graph that holds the closure's program, to enter more."""
    graph = Graph(labels=dict(closure.program.labels), constants=dict(closure.constants))
    for instruction in closure.program.instructions:
        graph.enter(instruction.op, instruction.args, instruction.value)
    return graph


def _with_kernels(closure, graph, guess):
    """The Closure with the kernels of the short way."""
    first, results = len(closure.program.instructions), closure.program.results
    moving = depend_on(graph.instructions, {graph.input(closure.model.unknown.name)})
    near = quick(graph, [results[name] for name in _CURVE], moving)
    moving = depend_on(graph.instructions, {graph.input(closure.model.unknown.name)})
    kept = still(graph, [*near, *(results[name] for name in _TRIAL)], moving)
    named = {"guess": guess} | {f"near_{name}": node for name, node in zip(_CURVE, near)} \
        | {f"still_{k}": node for k, node in enumerate(kept)}
    program = Program(tuple(graph.instructions), dict(graph.labels), results | named)
    kernels = closure.kernels | {"guess": ("guess",), "curve": tuple(f"near_{name}" for name in _CURVE), "trial": _TRIAL}
    if kept:
        kernels["still"] = tuple(f"still_{k}" for k in range(len(kept)))
    return replace(closure, program=program, kernels=kernels, constants=constants_of(graph, first, closure.constants))
