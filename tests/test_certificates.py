"""The shipped specs carry their certificates, and these are what the proof finds."""

from functools import cache

import pytest

from rootwright import pipeline
from rootwright.evidence.proving import certify
from rootwright.proof.certificate import dump, parse

SHIPPED = pipeline.shipped()
QUICK = 3_800               # boxes: certificates of so many are proved again here
KNOWN = {("platinum_thermometer", "kink")}      # the two laws of the thermometer meet at 0 degrees, inside its range


@cache
def shipped(name):
    return parse(pipeline.certificate(name))


@pytest.mark.parametrize("name", SHIPPED)
def test_a_shipped_spec_carries_a_certificate_of_its_own(name):
    closure, _ = pipeline.closure(*pipeline.find(name))
    promised, lacking = pipeline.promised(closure, name)
    assert lacking == "" and promised.promise.lines
    assert dump(shipped(name)) == pipeline.certificate(name)


def test_nothing_shipped_is_refuted_but_what_is_known_to_fail():
    refuted = {(name, claim) for name in SHIPPED for claim, verdict in shipped(name).verdicts.items() if verdict == "refuted"}
    assert refuted == KNOWN


def test_most_shipped_specs_are_settled():
    settled = [name for name in SHIPPED if "open" not in shipped(name).verdicts.values()]
    nearly = [name for name in SHIPPED if all(claim.verdict != "open" or claim.share <= 1e-3 for claim in shipped(name).claims)]
    assert len(settled) >= 0.6 * len(SHIPPED) and len(nearly) >= 0.9 * len(SHIPPED)


@pytest.mark.parametrize("name", [name for name in SHIPPED if pipeline.certificate(name) and shipped(name).boxes <= QUICK])
def test_a_certificate_is_what_the_proof_finds_and_what_the_module_keeps(name):
    certificate, contradictions = certify(pipeline.closure(*pipeline.find(name))[0])
    assert dump(certificate) == pipeline.certificate(name)
    assert contradictions == []
