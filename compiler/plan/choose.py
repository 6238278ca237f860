"""A Closure to its Plan: whether the module tries a short way to the root before the safeguarded solver, and which one.

The plan rests on three things: what is proved of the operating range (the signs at the ends of the bracket, the size of the
slope), so that no solve has to look at it; the convergence of every candidate, a start with a number of steps of some
method, measured over sampled points; and counts of operations.
"""

from dataclasses import dataclass, replace

import numpy as np

from rootwright.calculus.closure import running
from rootwright.calculus.differentiate import partials
from rootwright.calculus.magnitude import Magnitudes
from rootwright.calculus.precision import SINGLE
from rootwright.calculus.program import Graph, Program, needed
from rootwright.plan import facts
from rootwright.plan.forms import Quick, constants_of, worth_keeping
from rootwright.plan.measure import Range, depend_on, effort
from rootwright.plan.plan import METHODS, Plan
from rootwright.plan.starts import starts

_TRIAL = ("g", "slope", "rounding", "slope_rounding", "curvature")
LARGEST = 1200              # instructions of a certificate beyond which the module keeps to one solver
_PLAIN = 6.0                # evaluations, in certificates, that the plain solver is taken to need
_STEP = 12.0                # effort of a step besides its evaluation
_AGAIN = 1.5                # certificates that one more counts for: the processor did not expect it
_MARGIN = 0.98              # a dearer way must save this much


@dataclass(frozen=True)
class _Way:
    """One candidate, with what it costs in the mean and how often it comes to nothing."""
    start: object
    method: str
    steps: int
    cost: float
    spent: float
    missed: float


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
    forms = _Forms(closure)
    measured = Range(closure, forms.graph)
    if measured.size < 8:
        return _plain("too few sampled points of the operating range have a root")
    way = _best(measured, forms)
    worth = _PLAIN * forms.trial_effort
    if way.cost > worth or way.missed > 0.25:
        return _plain(f"no start came close enough: the best, {way.start.name}, took {way.spent:.2g} evaluations and missed "
                      f"{100.0 * way.missed:.3g} % of {measured.size} sampled points")
    known = facts.find(closure)
    if known.ends == "evaluated":
        if unknown.open_lower or unknown.open_upper:
            return _plain("the signs beside an open end are not proved to differ")
        if way.cost + 2.0 * effort(program.instructions, [program.results["g"]]) > worth:
            return _plain("the residual at both ends and a short way would take more than the safeguarded solver")
    missed = f", {100.0 * way.missed:.2g} % left to the plain solver" if way.missed else ""
    plan = Plan(forms.planned(way, known.sure), (), known.ends, way.method, way.steps, known.least_rise, known.sure)
    return replace(plan, why=(
        f"start: {way.start.name}; {plan.pace}; {way.spent:.3g} evaluations in the mean of {measured.size} sampled points{missed}",
        *known.why))


def _plain(reason):
    return Plan(None, (f"plain: {reason}",))


def _best(measured, forms):
    """The way with the least effort in the mean."""
    best = None
    for start in starts(measured, forms.graph):
        first = effort(forms.graph.instructions, [start.node], forms.ends)
        if best is not None and first + forms.trial_effort > best.cost:
            continue
        for method in METHODS:
            for steps, x in enumerate(measured.walk(start.x, method, forms.curve(method))):
                way = first + steps * forms.step_effort[method]
                if best is not None and way + _STEP + forms.trial_effort > best.cost:
                    break
                if steps == 0 and method != "newton":
                    continue
                certificates = measured.certificates(x, forms.author)
                missed = np.isinf(certificates)
                certificates = float(np.mean(np.where(missed, _PLAIN + 3.0, 1.0 + _AGAIN * (certificates - 1.0))))
                cost = way + certificates * (_STEP + forms.trial_effort)
                if best is None or cost < _MARGIN * best.cost:
                    best = _Way(start, method, steps, cost, steps + certificates, float(np.mean(missed)))
    return best


def _rounding(graph, closure):
    ranges = dict(zip((parameter.name for parameter in closure.model.parameters), closure.ranges))
    magnitudes = Magnitudes(graph, ranges)
    places = [magnitudes.of(closure.program.results[end]) for end in ("lower", "upper")]
    return running(graph, ranges, closure.model.unknown.name, places)


class _Forms:
    """The closure's program, reopened, with the forms that the short way computes."""

    def __init__(self, closure):
        self.closure, program = closure, closure.program
        self.graph = graph = Graph(labels=dict(program.labels), constants=dict(closure.constants))
        for instruction in program.instructions:
            graph.enter(instruction.op, instruction.args, instruction.value)
        self.results = program.results
        self.unknown = graph.input(closure.model.unknown.name)
        self.author = [self.results[name] for name in _TRIAL]
        self.ends = set(needed(graph.instructions, [self.results["lower"], self.results["upper"]]))
        self.rounding = _rounding(graph, closure)
        self.steps = Quick(graph, self._moving(), self.rounding.magnitudes, rough=True)
        third, = partials(graph, self.results["curvature"], [self.unknown])
        self.near = self.steps([self.results["g"], self.results["slope"], self.results["curvature"], third])
        self.trial_effort = effort(graph.instructions, self.author)
        self.step_effort = {method: self._step_effort(method) for method in METHODS}

    def _moving(self):
        return depend_on(self.graph.instructions, {self.unknown})

    def curve(self, method):
        """Nodes of what a step takes."""
        return self.near[:2 + list(METHODS).index(method)]

    def _step_effort(self, method):
        """Effort of a step's evaluation, without what is worked out once."""
        nodes = self.curve(method)
        still = set(needed(self.graph.instructions, nodes)) - self._moving()
        return _STEP + effort(self.graph.instructions, nodes, still)

    def planned(self, way, sure):
        """The Closure with the kernels of the short way; sure: the certificate needs no look at the slope's error and change."""
        graph, closure, results = self.graph, self.closure, dict(self.results)
        after = [name for kernel in ("outputs", "jacobian", "hessian") for name in closure.kernels.get(kernel, ())]
        forms = Quick(graph, self._moving(), self.rounding.magnitudes,
                      [results["g"], *(results[name] for name in closure.kernels.get("outputs", ()))])
        slope, curvature = forms([results["slope"], results["curvature"]])
        bounds = forms([self.rounding.bound(results["g"]), self.rounding.bound(slope)])
        tried = {"g": results["g"], "tried_slope": slope, "tried_rounding": bounds[0]}
        if not sure:
            tried |= {"tried_slope_rounding": bounds[1], "tried_curvature": curvature}
        near = dict(zip(("near_g", "near_slope", "near_curvature", "near_third"), self.curve(way.method) if way.steps else ()))
        results |= tried | near | {"guess": way.start.node} | dict(zip(after, forms([results[name] for name in after])))

        moving, used = self._moving(), [*tried.values(), *near.values()]
        later = needed(graph.instructions, [results[name] for name in after])
        still = worth_keeping(graph, [*needed(graph.instructions, used), *later],
                              {node for node in range(len(graph.instructions)) if node not in moving})
        worked = set(needed(graph.instructions, tried.values(), still)) & moving
        shared = worth_keeping(graph, needed(graph.instructions, [results[name] for name in after], still), worked)
        names = [f"known_{k}" for k in range(len(still) + len(shared))]
        results |= dict(zip(names, [*still, *shared]))
        kernels = closure.kernels | {"guess": ("guess",), "trial": (*tried, *names[len(still):])}
        if near:
            kernels["curve"] = tuple(near)
        if still:
            kernels["still"] = tuple(names[:len(still)])
        program = Program(tuple(graph.instructions), dict(graph.labels), results)
        return replace(closure, program=program, kernels=kernels,
                       constants=constants_of(graph, len(closure.program.instructions), closure.constants))
