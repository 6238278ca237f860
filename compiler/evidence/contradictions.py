"""Where a built module contradicts its certificate, which must not happen: a fixed sample of the operating range, solved and held against the claims.

What is proved for the module's doubles is held against its status; what is proved for real numbers against interval arithmetic over what the module says
of the root, `error_bound` included. A caveat (`flat`, `kink`) within that bound contradicts nothing.
"""

from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from rootwright.calculus.sampling import sample
from rootwright.emit.manual import STATUS
from rootwright.proof.points import Points
from rootwright.proof.settle import Domain

SAMPLED = 400
_MARGIN = 1e-12             # of the bracket's width, for the rounding of a share of the bracket
_WORDS = {code: word for code, word, _ in STATUS}
_CODES = {word: code for code, word, _ in STATUS}


@dataclass(frozen=True)
class Contradiction:
    """A point {parameter: double} of the operating range at which the module does not keep what is proved."""
    point: tuple[tuple[str, float], ...]
    claim: str
    reason: str


def contradictions(closure, module, certificate, count=SAMPLED):
    """[Contradiction] of a loaded module, from `count` points."""
    proved = {claim.name: claim for claim in certificate.claims if claim.verdict == "proved"}
    if not proved:
        return []
    domain, points = Domain(closure.model), Points(closure.model)
    found, roots = [], []
    for point in sample(closure, count):
        if not points.holds({name: Fraction(value) for name, value in point.items()}):
            continue                    # the nearest double of a range's end may lie beyond it
        solved = module.solve(list(point.values()))
        if solved.status >= 0 and not solved.status & _CODES["outside_range"]:
            roots.append((point, solved))
        elif solved.status < 0:
            claim = _failed(solved, proved)
            if claim and _meets(domain, point):
                found.append(Contradiction(tuple(point.items()), claim, f"the module says {_WORDS[solved.status]}"))
    return found + _of_roots(domain, roots, proved)


def _failed(solved, proved):
    """The claim that a failure contradicts; None where it contradicts none."""
    claim = "iterations" if solved.status == _CODES["iteration_limit"] else "exists"
    return claim if claim in proved and proved[claim].doubles == "proved" else None


def _meets(domain, point):
    """True where the requirements certainly hold."""
    low = np.array([[*(point[name] for name in domain.lower.variables[:-1]), 0.0]])
    values = domain.lower.evaluate(domain.lower.requirements, low, low)
    return not any(np.any(values[node].no) for node in domain.lower.requirements)


def _of_roots(domain, roots, proved):
    if not roots:
        return []
    chart = domain.lower
    low = np.array([[*(point[name] for name in chart.variables[:-1]), 0.0] for point, _ in roots])
    high = low.copy()
    lower, upper = (chart.natural(form, low, high) for form in chart.bracket)
    x, reach = (np.array([value(solved) for _, solved in roots]) for value in (lambda r: r.y[0], lambda r: r.error_bound))
    with np.errstate(all="ignore"):
        outside = (x + reach < lower.low) | (x - reach > upper.high)
        width = upper.high - lower.low
        low[:, -1] = np.nan_to_num(np.clip((x - reach - lower.low) / width - _MARGIN, 0.0, 1.0), nan=0.0)
        high[:, -1] = np.nan_to_num(np.clip((x + reach - lower.low) / width + _MARGIN, 0.0, 1.0), nan=1.0)
    residual, slope = (chart.natural(form, low, high, domain.opened[0]) for form in (chart.residual, chart.slope))
    switched = np.zeros(len(roots), bool)
    for _, form in chart.switches:
        switched |= ~chart.natural(form, low, high, domain.opened[0]).definite()
    status = np.array([solved.status for _, solved in roots])
    tests = (("exists", outside, "the root lies outside the bracket"),
             ("exists", residual.definite(), "the residual is not 0 within the error bound of the root"),
             ("slope", (status & _CODES["flat"] > 0) & ((slope.low > 0) | (slope.high < 0)),
              "the module says flat, though the slope is not 0 within the error bound of the root"),
             ("kink", (status & _CODES["kink"] > 0) & ~switched,
              "the module says kink, though no switch lies within the error bound of the root"))
    return [Contradiction(tuple(roots[row][0].items()), claim, reason) for claim, where, reason in tests if claim in proved
            for row in np.nonzero(where)[0]]
