"""The proof against specs with a fault planted in them: none is proved, none of the true ones refuted, and most are settled in no time."""

import re
from fractions import Fraction

import pytest
from planted_specs import UNSETTLED, cases
from proof_specs import CLAIMS

from rootwright import pipeline
from rootwright.proof.prove import prove

FEW = 2500
FAULTS = [case for case in cases() if False in case.truth.values()]
TRUE = [case for case in cases() if False not in case.truth.values()]


def certificate(case):
    closed, _ = pipeline.closure(case.text.encode(), "planted.toml")
    return closed.model, prove(closed, boxes=FEW)


def _check(case, found):
    for claim in CLAIMS:
        verdict = found.claim(claim).verdict
        assert not (case.truth[claim] is True and verdict == "refuted"), claim
        assert not (case.truth[claim] is False and verdict == "proved"), claim
    assert case.doubles is not False or found.claim("exists").doubles != "proved"


@pytest.mark.parametrize("case", FAULTS, ids=lambda case: case.id)
def test_a_planted_fault_is_refuted_at_a_point_of_the_range_and_never_proved(case):
    model, found = certificate(case)
    _check(case, found)
    refuted = [found.claim(claim) for claim in CLAIMS if case.truth[claim] is False and found.claim(claim).verdict == "refuted"]
    assert refuted or case.id in UNSETTLED
    for claim in refuted:
        assert claim.witness.reason
        for parameter in model.parameters:
            text = dict(claim.witness.point)[parameter.name]
            numbers = [Fraction(part) for part in re.findall(r"[-+./\deE]+", text)]
            assert _near(parameter.low.text, -1) <= min(numbers) and max(numbers) <= _near(parameter.high.text, 1)


@pytest.mark.parametrize("case", TRUE, ids=lambda case: case.id)
def test_what_barely_holds_is_proved_and_never_refuted(case):
    _, found = certificate(case)
    _check(case, found)
    assert set(found.verdicts.values()) == {"proved"} or case.id in UNSETTLED


def _near(text, outward):
    """An end of a range, or a number a little beyond an irrational one."""
    known = {"2*pi": Fraction("6.2831853071795865"), "sqrt(2)": Fraction("1.4142135623730951")}
    return known[text] + outward * Fraction(1, 10 ** 15) if text in known else Fraction(text)
