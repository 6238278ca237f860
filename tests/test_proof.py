"""The proof against mathematics that is known, and its arithmetic against balls of high precision."""

import json
import math
from fractions import Fraction

import flint
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from proof_specs import CLAIMS, cases
from strategies import expressions

from problem_specs import spec
from rootwright import pipeline
from rootwright.calculus.balls import Balls, ball, precision
from rootwright.calculus.program import evaluate
from rootwright.proof.certificate import dump, parse, render, to_json
from rootwright.proof.chart import Chart
from rootwright.proof.exact import UNDEFINED, value_at
from rootwright.proof.functions import FUNCTIONS, power
from rootwright.proof.prove import prove

FEW = 4000
BOXES = ((-10.0, 10.0), (0.0, 1.0), (0.5, 2.0), (-1.0, 1.0), (-1e-9, 1e-9), (1e3, 1e8), (0.0, 1e-290), (1.0, 1.0 + 1e-9),
         (-1e300, 1e300), (2.0, 2.0), (0.0, 0.0))
DOMAINS = {"log": (0.0, math.inf), "log10": (0.0, math.inf), "log2": (0.0, math.inf), "log1p": (-1.0, math.inf), "asin": (-1.0, 1.0),
           "acos": (-1.0, 1.0), "acosh": (1.0, math.inf), "atanh": (-1.0, 1.0)}


def closure(text):
    closed, _ = pipeline.closure(text.encode(), "test.toml")
    return closed


def certificate(text, boxes=FEW, **more):
    return prove(closure(text), boxes=boxes, **more)


# -- arithmetic

@pytest.mark.parametrize("name", sorted(FUNCTIONS))
def test_a_tabulated_function_encloses_its_values(name):
    generator = np.random.default_rng(1)
    x = np.concatenate([generator.normal(0.0, 3.0, 300), generator.uniform(-1.0, 1.0, 300), 1.0 + generator.normal(0.0, 1e-8, 30),
                        10.0 ** generator.uniform(-300.0, 300.0, 60), -10.0 ** generator.uniform(-300.0, 300.0, 60),
                        generator.uniform(-700.0, 700.0, 100), [0.0, 1.0, -1.0]])
    below, above = DOMAINS.get(name, (-math.inf, math.inf))
    x = x[(x > below) & (x < above)]
    _check_enclosed(FUNCTIONS[name], x)
    low, high = FUNCTIONS[name].image(np.array([0.37, 0.53]) if name != "acosh" else np.array([1.37]))
    assert np.all(high - low < 1e-14)


@pytest.mark.parametrize("exponent", ("1/3", "-7/3", "2.5"))
def test_a_power_function_encloses_its_values(exponent):
    exact = flint.fmpq(*map(int, exponent.split("/"))) if "/" in exponent else flint.fmpq(5, 2)
    _check_enclosed(power(lambda: flint.arb(exact)), 10.0 ** np.random.default_rng(2).uniform(-80.0, 80.0, 200))


def _check_enclosed(function, x):
    low, high = function.image(x)
    with precision(300):
        for point, bottom, top in zip(x, low, high):
            value = function.ball(flint.arb(float(point)))
            if not value.is_finite():       # beyond the exponents of a ball
                assert math.isinf(bottom) or math.isinf(top)
                continue
            assert math.isinf(bottom) or value >= flint.arb(float(bottom)) or value.overlaps(flint.arb(float(bottom)))
            assert math.isinf(top) or value <= flint.arb(float(top)) or value.overlaps(flint.arb(float(top)))


@st.composite
def boxes_with_points(draw):
    """(low, high, point) of three variables a, b and the share."""
    sides = [draw(st.sampled_from(BOXES)), draw(st.sampled_from(BOXES)), (0.0, 1.0)]
    shares = [sorted((draw(st.floats(0.0, 1.0)), draw(st.floats(0.0, 1.0)))) for _ in sides]
    low, high = zip(*((a + (b - a) * s, min(max(a + (b - a) * t, a + (b - a) * s), b)) for (a, b), (s, t) in zip(sides, shares)))
    point = [min(max(a + (b - a) * draw(st.sampled_from((0.0, 1.0, 0.5, 0.3))), a), b) for a, b in zip(low, high)]
    return low, high, point


@settings(max_examples=120, deadline=None)
@given(expressions(["a", "b", "x"]), st.lists(boxes_with_points(), min_size=4, max_size=4))
def test_an_enclosure_holds_the_exact_value(text, sample):
    chart = Chart(pipeline.model(spec("random", f"{text} + 0*a*b*x", ("0", "1"), {"a": (0, 1), "b": (0, 1)}).encode(), "random.toml")[0])
    low, high = (np.array([box[k] for box in sample]) for k in (0, 1))
    nodes = chart.residual.nodes
    natural = chart.natural(chart.residual, low, high)
    sharp, sharper = (form(chart.residual, low, high) for form in (chart.sharp, chart.sharper))
    for row, (_, _, point) in enumerate(sample):
        with precision(400):
            values = evaluate(chart.graph.instructions, nodes, Balls(), dict(zip(chart.variables, map(ball, point))))
        value = values[nodes[0]]
        if not value.is_finite():
            continue
        assert not values[nodes[-1]].is_finite() or values[nodes[-1]].overlaps(value)
        _check_between(value, natural.low[row], natural.high[row])
        if not natural.undefined[row] and not natural.jump[row]:
            _check_between(value, sharp[0][row], sharp[1][row])
            _check_between(value, sharper[0][row], sharper[1][row])


def _check_between(value, low, high):
    assert math.isinf(low) or not value < flint.arb(float(low))
    assert math.isinf(high) or not value > flint.arb(float(high))


def test_what_certainly_has_no_value_is_told_from_what_is_only_imprecise():
    model, _ = pipeline.model(spec("undefined", "x + 1/(a - 0.1) + sqrt(a - 0.1)", ("0", "1"), {"a": (0, 1)}).encode(), "u.toml")
    chart = Chart(model)
    node = chart.residual.nodes[0]
    at = {"_share": Fraction(1, 2), "x": UNDEFINED}
    assert value_at(chart.graph.instructions, [node], at | {"a": Fraction(1, 10)})[node] is UNDEFINED
    assert value_at(chart.graph.instructions, [node], at | {"a": Fraction(0.1)})[node] is not UNDEFINED


# -- verdicts

@pytest.mark.parametrize("case", cases(), ids=lambda case: case.id)
def test_no_verdict_contradicts_what_is_known(case):
    verdicts = certificate(case.text, 2000)
    for claim in CLAIMS:
        verdict = verdicts.claim(claim).verdict
        assert not (case.truth[claim] is True and verdict == "refuted"), claim
        assert not (case.truth[claim] is False and verdict == "proved"), claim
    assert case.doubles or verdicts.claim("exists").doubles != "proved"


PLAIN = ("line", "cube_root", "contact", "contact_at_end", "ratio_only", "required_order", "long_by_a_billionth", "corner_met",
         "open_log", "open_poles", "switch_beyond")


@pytest.mark.parametrize("case", [case for case in cases() if case.id in PLAIN], ids=lambda case: case.id)
def test_a_true_spec_is_proved(case):
    assert set(certificate(case.text).verdicts.values()) == {"proved"}


FAULTS = {"short_by_a_billionth": "exists", "corner_missed": "exists", "fold_in_a_sliver": "unique", "sliver_of_a_parameter": "unique",
          "removable_quotient": "defined", "squared_pole": "defined", "reversed_in_a_corner": "defined", "step": "exists",
          "closed_at_a_pole": "defined", "arcsine_outside": "defined"}


@pytest.mark.parametrize("case", [case for case in cases() if case.id in FAULTS], ids=lambda case: case.id)
def test_a_planted_fault_is_refuted_with_a_witness(case):
    claim = certificate(case.text, 20_000).claim(FAULTS[case.id])
    assert claim.verdict == "refuted" and claim.witness.point and claim.witness.reason


@pytest.mark.parametrize("name", ("kepler", "pipe_friction", "weak_acid", "wien_peak", "redlich_kwong", "plane_wall"))
def test_a_shipped_spec_is_proved(name):
    closed, _ = pipeline.closure(*pipeline.find(name))
    assert set(prove(closed, boxes=FEW).verdicts.values()) == {"proved"}


def test_a_zero_on_a_switch_is_refuted_between_two_points():
    claim = certificate(next(case.text for case in cases() if case.id == "kink_at_root")).claim("kink")
    assert claim.verdict == "refuted" and abs(float(dict(claim.witness.point)["a"])) < 1e-6


def test_a_flat_zero_is_refuted_at_its_place():
    claim = certificate(next(case.text for case in cases() if case.id == "triple_root")).claim("slope")
    assert claim.verdict == "refuted" and claim.witness.point[0][0] == "a"


def test_bounds_of_slope_and_sensitivities_hold_and_are_sharp():
    # x^2 = a over [1, 9]: slope 2*sqrt(a) from 2 up, dx/da = 1/(2*sqrt(a)) up to 1/2.
    numbers = dict(certificate(spec("square", "x^2 = a", ("0.5", "4"), {"a": (1, 9)})).claim("slope").numbers)
    assert 1.0 <= numbers["least_slope"] <= 2.0
    assert 0.5 <= numbers["dx/da"] <= 0.6


def test_a_bound_relative_to_a_pivot_holds_in_the_units_of_the_spec():
    # The slope of a*x - b is a, at least 3.
    numbers = dict(certificate(spec("product", "a*x = b", ("0", "4*b/a"), {"a": (3, 30), "b": (1, 2)})).claim("slope").numbers)
    assert 1.0 <= numbers["least_slope"] <= 3.0


def test_a_tighter_range_and_a_requirement_that_make_the_proof_go_through_are_proposed():
    found = certificate(spec("branch", "x^2 = a", ("0", "2"), {"a": (0, 4)}), 3000)
    assert found.claim("slope").verdict == "refuted"
    tighter, requirement = found.advice
    low = float(tighter.split("range = [")[1].split(",")[0])
    assert f'"a >= {low!r}"' in requirement
    assert set(certificate(spec("branch", "x^2 = a", ("0", "2"), {"a": (low, 4)}), 20_000).verdicts.values()) == {"proved"}


@pytest.mark.parametrize("equation, bracket", [("x = a", ("0", "1.999")), ("x + x^3 = a", ("0.1", "4")), ("x + x^3 = a", ("1 + a/2", "3"))])
def test_a_bracket_that_reaches_the_root_is_proposed(equation, bracket):
    found = certificate(spec("narrow", equation, bracket, {"a": (0, 2)}), 3000)
    assert found.claim("exists").verdict == "refuted"
    (line,) = found.advice
    wider = json.loads(line.split("bracket = ")[1])
    assert certificate(spec("narrow", equation, wider, {"a": (0, 2)}), 20_000).claim("exists").verdict == "proved"


# -- the certificate

def test_a_certificate_survives_its_text():
    found = certificate(next(case.text for case in cases() if case.id == "step"))
    assert parse(dump(found)) == found
    assert to_json(found)["claims"]["exists"]["verdict"] == "refuted"
    assert "refuted" in render(found)


def test_a_text_that_is_no_certificate_is_refused():
    for text in ("", "format = 1", "format = 9", "no toml ="):
        with pytest.raises(ValueError):
            parse(text)


def test_the_same_boxes_give_the_same_certificate():
    text = next(case.text for case in cases() if case.id == "fold_in_a_sliver")
    assert dump(certificate(text, 500)) == dump(certificate(text, 500))


def test_the_number_of_workers_changes_nothing():
    text = spec("many_boxes", "x + sin(9*x*b)/10 = a", ("-2", "2"), {"a": (-1, 1), "b": (0, 1)})
    assert dump(certificate(text, 6000, workers=1)) == dump(certificate(text, 6000, workers=3))
