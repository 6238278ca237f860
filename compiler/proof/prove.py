"""Closure to Certificate: which claims hold for every point of the operating range.

Over the real numbers, with the decimals that the author wrote:

- the bracket is in order, and the residual's signs at its ends differ, over every box of parameters (`judge_ends`);
- over every box of parameters and of the share of the bracket, the residual is defined, and either has one sign or is continuous with
  a derivative of one sign (`judge_inside`). Between two zeros of a continuous function whose slope has one sign wherever it
  may be 0 there is no other, and a jump from one sign to the other cannot hide in a box whose enclosure leaves out 0.

What is not proved is looked at point by point for a refutation. What is neither is open, with its share of the range.
"""

import json
from dataclasses import replace
from functools import cached_property

import numpy as np

from rootwright.calculus.lower import Lowering
from rootwright.calculus.program import Graph, needed
from rootwright.calculus.switches import switches
from rootwright.proof.advice import proposals, relative_name, with_requirement
from rootwright.proof.certificate import Certificate, Claim
from rootwright.proof.crew import Crew
from rootwright.proof.numbers import doubles_are_finite, slope_bound, slope_is_bounded
from rootwright.proof.ranges import as_ball, exact_ends
from rootwright.proof.refute import Examiner
from rootwright.proof.scaling import symmetries
from rootwright.proof.sensitivities import sensitivity_bounds
from rootwright.proof.settle import Domain, Limit, Outcome, search_ends, search_inside, share
from rootwright.proof.switches import refute_kink

BOXES = 120_000
_ENDS, _INSIDE = 0.4, 0.9           # of the boxes that may be spent, by the end of each search
_GROUPED = 0.25                     # of all boxes, for the trial with groups of parameters
_STEEP = 0.25                       # of the boxes of a search inside, for the trial that cuts only what moves the slope
_KINKS = 0.05                       # of all boxes, for the switches at a zero
_TRIAL = 20_000                     # boxes for trying a proposal
_NEEDS = {                          # what is asked of the boxes for each claim
    "defined": ("ordered", "defined"),
    "exists": ("ordered", "change", "continuous"),
    "unique": ("ordered", "change", "unique"),
    "slope": ("ordered", "change", "unique"),
    "kink": ("kink",),
    "iterations": ("ordered", "change", "continuous"),
}


def prove(closure, boxes=BOXES, seconds=None, workers=1, progress=None, seen=None):
    """Certificate of a Closure.

    `boxes` limits the boxes looked at, the same way on every machine and for every number of `workers` (processes); `seconds` stops
    after the wave at hand. `progress(stage, boxes, waiting, settled)` is called after every wave, `settled` the share of the stage that is. `seen` is the most iterations of a solve
    that the caller has seen.
    """
    return _Proof(closure, Limit(boxes, seconds, progress), workers).certificate(seen)


class _Proof:
    def __init__(self, closure, limit, workers):
        self.closure, self.model, self.limit, self.workers = closure, closure.model, limit, workers
        self.scaling = relative(self.model)
        self.outcome = Outcome()

    @cached_property
    def plain(self):
        return Domain(self.model)

    def search(self):
        """Both searches, as far as the limit goes: with parameters that matter only together as one, and if that does not settle all, apart."""
        boxes = self.limit.boxes
        self.domain = Domain(self.model, self.scaling, grouped=True)
        if self.domain.charts:
            self._search(_GROUPED * boxes)
            if not self.outcome.open and len(self.outcome.rises) <= 1:
                return
        if not self.domain.charts or not self.limit.reached(boxes):
            self.outcome = Outcome()
            self.domain = Domain(self.model, self.scaling) if self.scaling else self.plain
            self._search(boxes)

    def _search(self, boxes):
        before = self.limit.spent
        boxes -= before
        with Crew(self.domain.judges(self.limit), self.workers) as crew:
            search_ends(self.domain, crew, self.limit, before + _ENDS * boxes, self.outcome)
            for index in range(len(self.domain.charts)):
                last = index == len(self.domain.charts) - 1
                self._inside(crew, index, before + (_INSIDE if last else 0.5 * (_ENDS + _INSIDE)) * boxes)

    def _inside(self, crew, index, ceiling):
        """First as if the slope had one sign all over the bracket, with a part of the boxes; what it leaves open is looked at afresh. Then the
        switches, where a zero may be."""
        wanted = ("defined", "continuous", "unique")
        spent = self.limit.spent
        trial = Outcome()
        search_inside(self.domain, index, crew, self.limit, spent + _STEEP * (ceiling - spent), trial, wanted, name="slope")
        if trial.needs(wanted):
            trial = Outcome()
            search_inside(self.domain, index, crew, self.limit, ceiling, trial, wanted)
        zeros = [(low, high) for _, low, high, _ in trial.active]
        trial.open.pop("kink", None)
        if zeros and self.domain.lower.switches:
            kinks, more = Outcome(), self.limit.spent + _KINKS * self.limit.boxes
            search_inside(self.domain, index, crew, self.limit, more, kinks, ("kink",), *(np.concatenate(ends_) for ends_ in zip(*zeros)))
            if "kink" in kinks.open:
                trial.open["kink"] = kinks.open["kink"]
        self.outcome.add(trial)

    def certificate(self, seen):
        self.search()
        proved = {claim for claim, needs in _NEEDS.items() if not any(need in self.outcome.open for need in needs)}
        if len(self.outcome.rises) > 1:
            if self.model.unknown.root == "only":
                proved -= {"unique"}
        slope = slope_bound(self.domain, self.outcome, self.limit) if "slope" in proved else 0.0
        if not slope > 0.0 and not ("slope" in proved and slope_is_bounded(self.domain, self.outcome)):
            proved -= {"slope"}
        witnesses = self._refutations(set(_NEEDS) - proved)
        sensitivities = sensitivity_bounds(self.plain, self.closure, self.limit) if "slope" in proved else {}
        finite = not self.limit.reached(np.inf) and doubles_are_finite(self.plain, self.closure, self.limit)
        claims = tuple(self._claim(name, proved, witnesses, slope, sensitivities, finite, seen) for name in _NEEDS)
        return Certificate(self.model.name, self.model.digest,
                           tuple((p.name, p.low.text, p.high.text) for p in self.model.parameters),
                           tuple(condition.text for condition in self.model.require), self._relative(),
                           self.limit.spent, claims, self._advice())

    def _refutations(self, open_claims):
        if not open_claims or self.limit.reached(np.inf) or self.domain.grouped:
            return {}
        examiner = Examiner(self.plain, self.limit)
        for values in examiner.corners():
            examiner.examine(values, open_claims)
        if "unique" in open_claims:
            for values in examiner.from_turns(self.domain, self.outcome):
                examiner.examine(values, open_claims)
        lefts = [left for need, boxes in self.outcome.open.items() if need != "kink" for left in boxes]
        for left in lefts[:12]:
            shares = _shares(self.domain, left)
            for values in examiner.from_boxes(self.domain, left.low, left.high):
                examiner.examine(values, open_claims, shares)
        if "kink" in open_claims and self.plain.lower.switches:
            witness = refute_kink(examiner)
            if witness:
                examiner.found["kink"] = witness
        return {claim: witness for claim, witness in examiner.found.items() if claim in open_claims}

    def _claim(self, name, proved, witnesses, slope, sensitivities, finite, seen):
        verdict = "refuted" if name in witnesses else "proved" if name in proved else "open"
        lefts = [left for need in _NEEDS[name] for left in self.outcome.open.get(need, [])]
        reason, numbers, doubles, left_open = "", [], "", 0.0
        failed = next((other for other in ("defined", "exists") if other in witnesses and other != name), None)
        if verdict == "open":
            left_open = share(self.domain, lefts, self.outcome.inside_range)
            if failed and name != "kink":
                reason, left_open = f"without meaning where `{failed}` fails", 1.0
            elif name == "unique" and len(self.outcome.rises) > 1 and not lefts:
                reason, left_open = "the slope has different signs in different parts of the range", 1.0
            elif name == "slope" and not lefts:
                reason, left_open = "no positive bound was found", 1.0
        if name == "slope" and verdict == "proved":
            numbers += [*([("least_slope", slope)] if slope > 0.0 else []), *sensitivities.items()]
            reason = "" if slope > 0.0 else "no bound in numbers was found; there is one, since the slope is continuous and nowhere 0"
        if name == "iterations":
            numbers.append(("limit", float(self.closure.limit)))
            if seen is not None:
                numbers.append(("seen", float(seen)))
        if verdict == "proved" and name in ("defined", "exists", "iterations"):
            doubles = "proved" if finite else "open"
        return Claim(name, verdict, doubles, left_open, reason, witnesses.get(name),
                     self._worst(lefts) if verdict == "open" and not failed else (), tuple(numbers))

    def _worst(self, lefts):
        """The largest box that is left, in the variables of the proof."""
        if not lefts or self.domain.grouped:
            return ()
        low, high = (np.concatenate([getattr(left, end) for left in lefts]) for end in ("low", "high"))
        row = int(np.argmax(self.domain.ranges.volume(low, high)))
        names = dict(self._relative())
        return tuple((names.get(name, name), float(low[row, k]), float(high[row, k]))
                     for k, name in enumerate(self.domain.ranges.names[:-1]))

    def _relative(self):
        """((parameter, what stands for it), ...): `sag/L` for `sag`, one value for all parameters of a group."""
        if self.domain.grouped:
            return tuple((name, "one value of " + ", ".join(group.absorbed)) for group in self.domain.lower.groups for name in group.absorbed)
        names = ((name, relative_name(self.domain, name)) for name in self.domain.ranges.names[:-1])
        return tuple((name, text) for name, text in names if name != text)

    def _advice(self):
        """The first proposal with which nothing is left open."""
        for condition in () if self.domain.grouped else proposals(self.domain, self.outcome)[:2]:
            if self.limit.reached(np.inf):
                break
            model = with_requirement(self.model, condition)
            limit = Limit(min(self.limit.boxes, _TRIAL))
            limit.until = self.limit.until
            trial = _Proof(replace(self.closure, model=model), limit, self.workers)
            trial.search()
            if not any(need != "kink" for need in trial.outcome.open) and len(trial.outcome.rises) == 1:
                require = ", ".join(json.dumps(text) for text in (*(condition.text for condition in self.model.require), condition))
                return (f"with this under [domain] the proof goes through: require = [{require}]",)
        return ()


def relative(model):
    """The scaling that leaves the fewest variables, or None."""
    graph = Graph()
    lowering = Lowering(graph)
    for constant in model.constants:
        lowering.declare(constant.name, graph.named(constant.name, lowering.lower(constant.expression)))
    names = [parameter.name for parameter in model.parameters]
    for name in (*names, model.unknown.name):
        lowering.declare(name, graph.input(name))
    for definition in model.definitions:
        lowering.declare(definition.name, lowering.lower(definition.expression))
    residual, bracket = lowering.lower(model.residual), [lowering.lower(end) for end in (model.unknown.lower, model.unknown.upper)]
    conditions = [lowering.lower(condition) for condition in model.require]
    outputs = []
    for output in model.outputs:
        outputs.append(lowering.lower(output.expression))
        lowering.declare(output.name, outputs[-1])
    if switches(graph, [residual, *outputs]):
        return None
    used = {graph.instructions[node].value for node in needed(graph.instructions, [residual, *bracket, *conditions])
            if graph.instructions[node].op == "input"}
    exact = exact_ends(model)
    positive = [name for name in names if name in used and as_ball(exact[name][0]) > 0]
    positive.sort(key=lambda name: (float(as_ball(exact[name][1]) / as_ball(exact[name][0])), name))
    scaling = symmetries(graph.instructions, [residual, *conditions], bracket, model.unknown.name, positive)
    return scaling if scaling.pivots else None


def _shares(domain, left):
    """Places in the bracket that boxes left open point to."""
    from fractions import Fraction
    if left.chart:
        return ()
    places = np.unique(np.concatenate([left.low[:6, -1], left.high[:6, -1], 0.5 * (left.low[:6, -1] + left.high[:6, -1])]))
    return tuple(Fraction(float(place)) for place in places)
