"""Closure to Certificate: which claims hold for every point of the operating range.

Over the real numbers, with the decimals that the author wrote:

- the bracket is in order, and the residual's signs at its ends differ, over every box of parameters (`judge_ends`);
- over every box of parameters and of the share of the bracket, the residual is defined, and either has one sign or is continuous with
  a derivative of one sign (`judge_inside`). Between two zeros of a continuous function whose slope has one sign wherever it
  may be 0 there is no other, and a jump from one sign to the other cannot hide in a box whose enclosure leaves out 0.

What is not proved is looked at point by point for a refutation. What is neither is open, with its share of the range.
"""

from dataclasses import replace
from fractions import Fraction
from functools import cached_property
from itertools import islice, zip_longest

import numpy as np

from rootwright.calculus.constants import NotReal
from rootwright.calculus.lower import Lowering
from rootwright.calculus.program import Graph, needed
from rootwright.calculus.switches import switches
from rootwright.proof.advice import brackets, cuts, relative_name
from rootwright.proof.certificate import Certificate, Claim
from rootwright.proof.chart import SHARE, Form
from rootwright.proof.crew import Crew
from rootwright.proof.crossings import refute_divisors, refute_parameter_switch
from rootwright.proof.dive import wrong_sign
from rootwright.proof.flat import refute_slope
from rootwright.proof.numbers import doubles_are_finite, slope_bound, slope_is_bounded, slope_is_sure
from rootwright.proof.phantoms import drop_phantoms
from rootwright.proof.ranges import as_ball, exact_ends
from rootwright.proof.refute import Examiner
from rootwright.proof.scaling import symmetries
from rootwright.proof.sensitivities import sensitivity_bounds
from rootwright.proof.settle import Domain, Limit, Outcome, search_ends, search_inside, share
from rootwright.proof.switches import refute_kink
from rootwright.proof.witness import middle

BOXES = 120_000
_ENDS, _INSIDE = 0.4, 0.9           # of the boxes that may be spent, by the end of each search
_GROUPED = 0.25                     # of all boxes, for the trial with groups of parameters
_STEEP = 0.25                       # of the boxes of a search inside, for the trial that cuts only what moves the slope
_KINKS = 0.05                       # of all boxes, for the switches at a zero
_SMALL = 0.2                        # of the boxes: a search that leaves as many may be made twice
_TRIAL = 5_000                     # boxes for trying a proposal
_CUTS, _BRACKETS = 2, 2             # proposals that are tried
_TURNS = 48                         # points beside zeros of two slopes that are looked at
_POINTS = 24                        # points whose zeros are looked for where only slope or kink is open
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
        self.exact = False          # the proof needs the ends of ranges that no double is

    @cached_property
    def plain(self):
        return Domain(self.model)

    def search(self):
        """Both searches, as far as the limit goes: with parameters that matter only together as one, and if that does not settle all, apart;
        once more with the exact ends of the ranges where that may be what is missing."""
        boxes = self.limit.boxes
        self.domain = Domain(self.model, self.scaling, grouped=True)
        if self.domain.charts:
            self._search(_GROUPED * boxes)
            if not self.outcome.open and len(self.outcome.rises) <= 1 or self.limit.reached(boxes):
                return
        self.outcome = Outcome()
        self.domain = Domain(self.model, self.scaling) if self.scaling else self.plain
        self._search(boxes)
        if {"ordered", "change"} & self.outcome.open.keys() and self.limit.spent < _SMALL * boxes and not _are_doubles(self.model):
            before = self.domain, self.outcome
            self.domain, self.outcome = Domain(self.model, edges=True), Outcome()
            self._search(boxes)
            self.exact = not {"ordered", "change"} & self.outcome.open.keys()
            if not self.exact:
                self.domain, self.outcome = before

    def _search(self, boxes):
        before = self.limit.spent
        boxes -= before
        with Crew(self.domain.judges(self.limit), self.workers) as crew:
            search_ends(self.domain, crew, self.limit, before + _ENDS * boxes, self.outcome)
            for index in range(len(self.domain.charts)):
                last = index == len(self.domain.charts) - 1
                self._inside(crew, index, before + (_INSIDE if last else 0.5 * (_ENDS + _INSIDE)) * boxes)
            if not self.domain.grouped:
                drop_phantoms(self.domain, crew, self.limit, self.outcome)

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
        # A point of the range would have a zero, and that zero would lie in a box that may hold one.
        self.nowhere = "exists" in proved and not any(len(low) for _, low, _, _ in self.outcome.active)
        if self.nowhere:
            proved = set()
        slope = slope_bound(self.domain, self.outcome, self.limit) if "slope" in proved else 0.0
        if not slope > 0.0 and not ("slope" in proved and slope_is_bounded(self.domain, self.outcome)):
            proved -= {"slope"}
        witnesses = {} if self.nowhere else self._refutations(set(_NEEDS) - proved)
        sensitivities = sensitivity_bounds(self.plain, self.closure, self.limit) if "slope" in proved else {}
        finite = not self.exact and not self.limit.reached(np.inf) and doubles_are_finite(self.plain, self.closure, self.limit)
        computed = {"defined", "exists", "iterations"} if finite else set()
        if finite and "slope" in proved and slope_is_sure(self.plain, self.closure, self.limit):
            computed.add("slope")
        claims = tuple(self._claim(name, proved, witnesses, slope, sensitivities, computed, seen) for name in _NEEDS)
        return Certificate(self.model.name, self.model.digest,
                           tuple((p.name, p.low.text, p.high.text) for p in self.model.parameters),
                           tuple(condition.text for condition in self.model.require), self._relative(),
                           self.limit.spent, claims, self._advice(witnesses))

    def _refutations(self, open_claims):
        if not open_claims or self.limit.reached(np.inf) or self.domain.grouped:
            return {}
        examiner = Examiner(self.plain, self.limit)
        points = examiner.points
        corners, places = list(points.corners()), list(self._places(points, open_claims))
        for values, shares in (*((values, ()) for values in corners), *places):
            examiner.examine(values, open_claims, shares)
        for values in points.edges([*corners, *(values for values, _ in places)], examiner.in_range) if self.model.require else ():
            examiner.examine(values, open_claims)
        for count, values in enumerate((*(values for values, _ in places), *corners)):
            if count < _POINTS or open_claims - examiner.found.keys() - {"slope", "kink"}:
                examiner.search(values, open_claims)
        self._refute_between(examiner, places, open_claims)
        return {claim: witness for claim, witness in examiner.found.items() if claim in open_claims}

    def _refute_between(self, examiner, places, open_claims):
        """Refutations at points that no decimal names, or that lie in a sliver."""
        found = examiner.found
        self._dive(examiner, open_claims)
        if "defined" in open_claims - found.keys() and not self.limit.late():
            witness = refute_divisors(examiner)
            if witness:
                found["defined"] = witness
        if "slope" in open_claims - found.keys() and not {"defined", "exists"} & found.keys() and not self.limit.late():
            witness, beside = refute_slope(examiner, [(values, shares[len(shares) // 2]) for values, shares in places if shares])
            if witness:
                found["slope"] = witness
            examiner.waves = 0
            for values in beside if "unique" in open_claims - found.keys() else ():
                examiner.examine(values, open_claims)
                examiner.search(values, open_claims)
        if "kink" in open_claims - found.keys() and self.plain.lower.switches and not self.limit.late():
            witness = refute_kink(examiner) or (None if "exists" in open_claims else refute_parameter_switch(examiner))
            if witness:
                found["kink"] = witness

    def _dive(self, examiner, open_claims):
        """Points in slivers of the range: of the wrong sign at an end of the bracket, or out of the domain of the residual."""
        chart, unknown, left_open = self.domain.lower, self.model.unknown, self.outcome.open
        searches = [("ordered", [(chart.width, 1)], False)]
        right = None if unknown.open_lower or unknown.open_upper else examiner.usual_signs()
        if right:
            searches.append(("change", list(zip((chart.at_lower, chart.at_upper), right)), False))
        domains = [(Form((node,), ()), 1) for kind, node in chart.residual.domain or () if kind in ("positive", "not negative")]
        if domains and not (unknown.open_lower or unknown.open_upper):
            searches.append(("defined", domains, True))
        for need, targets, inside in searches:
            for left in left_open.get(need, ()):
                if self.limit.late():
                    return
                values = wrong_sign(self.domain, left.low, left.high, targets, inside) if left.chart == 0 else None
                if values:
                    share = Fraction(values.pop(SHARE))
                    examiner.examine(examiner.points.absolute(self.domain, values), open_claims, (share,))

    def _places(self, points, open_claims):
        """(point, shares of the bracket) that the searches point to: from zeros of two slopes and from what is left, in turn."""
        turns = islice(points.from_turns(self.domain, self.outcome), _TURNS) if "unique" in open_claims else ()
        for pair in zip_longest(((values, ()) for values in turns), self._left_open(points)):
            yield from (place for place in pair if place)

    def _left_open(self, points):
        lefts = [left for need, boxes in self.outcome.open.items() if need != "kink" for left in boxes]
        for left in lefts[:12]:
            shares = _shares(self.domain, left)
            for values in points.from_boxes(self.domain, left.low, left.high):
                yield values, shares

    def _claim(self, name, proved, witnesses, slope, sensitivities, computed, seen):
        verdict = "refuted" if name in witnesses else "proved" if name in proved else "open"
        lefts = [left for need in _NEEDS[name] for left in self.outcome.open.get(need, [])]
        reason, numbers, doubles, left_open = "", [], "", 0.0
        failed = next((other for other in ("defined", "exists") if other in witnesses and other != name), None)
        if verdict == "open":
            left_open = share(self.domain, lefts, self.outcome.inside_range)
            if self.nowhere:
                reason, left_open = "no point of the ranges meets the requirements", 1.0
            elif failed and name != "kink":
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
        if verdict == "proved" and name in ("defined", "exists", "slope", "iterations"):
            doubles = "proved" if name in computed else "open"
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

    def _advice(self, witnesses):
        """The lines of the first proposals with which nothing is left open; of a bracket, with which there is a root."""
        if self.domain.grouped:
            return ()
        if {"exists", "defined"} & witnesses.keys() and {"ordered", "change"} & self.outcome.open.keys():
            wanted = ("ordered", "defined", "change", "continuous")
            points = [{name: Fraction(middle(text)) for name, text in witness.point} for witness in witnesses.values()]
            lines = self._first((proposal for proposal in brackets(self.model) if _reaches(proposal.model, points)), wanted, _BRACKETS)
            if lines:
                return lines
        if self.outcome.open:
            wanted = tuple(self.outcome.open.keys() | {"ordered", "defined", "change", "continuous", "unique"})
            return self._first(cuts(self.model, self.domain, self.outcome), wanted, _CUTS)
        return ()

    def _first(self, proposals, wanted, most):
        """Lines of the first proposal whose proof leaves nothing open that is wanted."""
        for proposal in islice(proposals, most):
            if self.limit.reached(np.inf):
                break
            limit = Limit(min(self.limit.boxes, _TRIAL))
            limit.until = self.limit.until
            trial = _Proof(replace(self.closure, model=proposal.model), limit, self.workers)
            trial.search()
            if not any(need in trial.outcome.open for need in wanted) and ("unique" not in wanted or len(trial.outcome.rises) == 1):
                return proposal.lines
        return ()


def _reaches(model, points):
    """True where at all these points the residual of a model has different signs at the ends of its bracket, or is 0 at one."""
    try:
        examiner = Examiner(Domain(model), Limit(0))
    except NotReal:
        return False
    return all(examiner.changes_sign(point) for point in map(examiner.points.exact, points) if point)


def _are_doubles(model):
    """True where every end of every range is a double."""
    return all(isinstance(end, Fraction) and Fraction(float(end)) == end for pair in exact_ends(model).values() for end in pair)


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
    if left.chart:
        return ()
    places = np.unique(np.concatenate([left.low[:6, -1], left.high[:6, -1], 0.5 * (left.low[:6, -1] + left.high[:6, -1])]))
    return tuple(Fraction(float(place)) for place in places)
