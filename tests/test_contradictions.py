"""Modules held against their certificates: an honest one, and ones that were made to lie."""

import csv
import io
from dataclasses import replace
from types import SimpleNamespace

import pytest

from problem_specs import spec
from rootwright import pipeline
from rootwright.binding.module import load as load_module
from rootwright.evidence.contradictions import contradictions
from rootwright.evidence.proving import told, write_replay
from rootwright.proof.prove import prove

TEXT = spec("square", "x + max(x, 0.25*x) = a", ("-1", "4"), {"a": (0.5, 2)})


@pytest.fixture(scope="module")
def proved():
    closed, _ = pipeline.closure(TEXT.encode(), "square.toml")
    certificate = prove(closed, boxes=4000)
    assert set(certificate.verdicts.values()) == {"proved"}
    return closed, load_module(closed, pipeline.emit(closed, "python"), "python"), certificate


class Lying:
    """A module whose answers are changed at every point above a = 1."""

    def __init__(self, module, **changes):
        self.module, self.changes = module, changes

    def solve(self, p):
        solved = self.module.solve(p)
        values = {name: getattr(solved, name) for name in ("y", "error_bound", "iterations", "status")}
        if p[0] > 1.0:
            values |= {name: change(values[name]) for name, change in self.changes.items()}
        return SimpleNamespace(**values)


def test_a_module_that_keeps_its_certificate_contradicts_nothing(proved):
    assert contradictions(*proved, count=60) == []


@pytest.mark.parametrize("claim, changes", [
    ("exists", {"status": lambda status: -2}),
    ("iterations", {"status": lambda status: -3}),
    ("exists", {"y": lambda y: [5.0, *y[1:]]}),
    ("exists", {"y": lambda y: [y[0] + 1e-9, *y[1:]]}),
    ("slope", {"status": lambda status: 2}),
    ("kink", {"status": lambda status: 4}),
])
def test_a_module_that_breaks_a_proved_claim_is_found_out(proved, claim, changes):
    closed, module, certificate = proved
    found = contradictions(closed, Lying(module, **changes), certificate, count=60)
    assert found and claim in {each.claim for each in found}
    assert all(dict(each.point)["a"] > 1.0 for each in found)
    assert "CONTRADICTED" in told(found)[0]


def test_what_is_not_proved_cannot_be_contradicted(proved):
    closed, module, certificate = proved
    unsure = replace(certificate, claims=tuple(replace(claim, verdict="open", doubles="") for claim in certificate.claims))
    assert contradictions(closed, Lying(module, status=lambda status: -2), unsure, count=60) == []


def test_contradictions_are_written_as_points_that_eval_takes(proved):
    closed, module, certificate = proved
    found = contradictions(closed, Lying(module, status=lambda status: -2), certificate, count=20)
    stream = io.StringIO()
    assert write_replay(stream, certificate, found) == len(found) > 0
    rows = list(csv.DictReader(io.StringIO(stream.getvalue())))
    assert all(float(row["a"]) > 1.0 and row["claim"] == "exists" for row in rows)


def test_a_witness_in_a_box_is_replayed_at_its_middle():
    # Two folds where cos(10*x) = -1/1.1: no decimal names them.
    closed, _ = pipeline.closure(spec("wave", "x + 0.11*sin(10*x) = a", ("-1", "2"), {"a": (0, 1)}).encode(), "wave.toml")
    certificate = prove(closed, boxes=4000)
    ((_, box),) = certificate.claim("slope").witness.point
    low, high = map(float, box.strip("[]").split(", "))
    stream = io.StringIO()
    write_replay(stream, certificate)
    (row,) = [row for row in csv.DictReader(io.StringIO(stream.getvalue())) if row["claim"] == "slope"]
    assert 0.0 < low <= float(row["a"]) <= high < 1.0
