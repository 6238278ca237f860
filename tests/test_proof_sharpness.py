"""What makes a proof go through, each device against what is known without it; bounds that come along against samples."""

from fractions import Fraction
from itertools import product

import flint
import numpy as np
import pytest

from problem_specs import spec
from rootwright import pipeline
from rootwright.calculus.balls import Balls, ball, precision
from rootwright.calculus.differentiate import partials
from rootwright.calculus.program import evaluate
from rootwright.calculus.sampling import sample
from rootwright.proof.certificate import dump
from rootwright.proof.chart import Chart
from rootwright.proof.intervals import Interval, Intervals
from rootwright.proof.prove import prove
from rootwright.proof.settle import Domain

ENDS = (-np.inf, -3.0, -1e-300, -0.0, 0.0, 5e-324, 0.1, 1.0, 2.5, 1e300, np.inf)


def closure(text):
    closed, _ = pipeline.closure(text.encode(), "test.toml")
    return closed


def verdicts(text, boxes=6000, **more):
    return prove(closure(text), boxes=boxes, **more).verdicts


# -- arithmetic

def test_a_product_encloses_and_does_not_depend_on_what_is_multiplied_with_it():
    sides = [(a, b) for a, b in product(ENDS, ENDS) if a <= b and not (a == b and np.isinf(a))]
    (a, b), (c, d) = (np.array(part).T for part in zip(*product(sides, sides)))
    with np.errstate(all="ignore"):
        whole = Intervals().mul(Interval(a, b), Interval(c, d))
        for row in range(0, len(a), 7):
            one = Intervals().mul(*(Interval(np.repeat(low[row], 2), np.repeat(high[row], 2)) for low, high in ((a, b), (c, d))))
            assert (one.low[0], one.high[0]) == (whole.low[row], whole.high[row])
            for x, y in product((a[row], b[row]), (c[row], d[row])):
                if np.isfinite(x) and np.isfinite(y):
                    assert np.isinf(whole.low[row]) or Fraction(whole.low[row]) <= Fraction(x) * Fraction(y)
                    assert np.isinf(whole.high[row]) or Fraction(whole.high[row]) >= Fraction(x) * Fraction(y)


def test_a_rational_power_is_enclosed_to_the_last_digits():
    base = np.array([0.37, 1.9, 1e6])
    value = Intervals().pow_(Interval(base, base), Intervals().number(Fraction(2, 3)))
    assert np.all(value.high - value.low <= 1e-14 * value.high)
    with precision(200):
        for point, low, high in zip(base, value.low, value.high):
            exact = flint.arb(float(point)) ** (flint.arb(2) / 3)
            assert flint.arb(float(low)) < exact < flint.arb(float(high))


# -- cancellation, against the derivative as it comes from the operation table

@pytest.mark.parametrize("name, point", (
    ("implied_volatility", {"S": 0.9, "K": 1.1, "r": 0.07, "T": 0.8, "c": 0.06, "_share": 0.01}),
    ("oblique_shock", {"M": 2.5, "theta": 0.3, "k": 1.4, "_share": 0.4}),
    ("plastic_multiplier", {"qt": 1.1, "G": 50.0, "s0": 0.3, "sinf": 0.7, "H": 0.2, "delta": 10.0, "ep": 0.05, "_share": 0.6})))
def test_what_cancels_in_a_derivative_leaves_its_value(name, point):
    model = pipeline.closure(*pipeline.find(name))[0].model
    chart = Chart(model)
    inputs = [chart.graph.input(variable) for variable in chart.variables]
    forms = [form for factor in [chart.whole, *(product[0] for product in chart.products.values())]
             for form in (factor.form, *(part[1] for part in factor.relaxed))]
    checked = 0
    for form in forms:
        plain = partials(chart.graph, form.nodes[-1], inputs)
        others = [chart._expanded(node) for node in plain]
        with precision(400):
            values = evaluate(chart.graph.instructions, [*plain, *(twin for twins in others for twin in twins)], Balls(),
                              {variable: ball(value) for variable, value in point.items()})
        for node, twins in zip(plain, others):
            for twin in twins:
                if values[twin].is_finite():
                    assert values[twin].overlaps(values[node])
                    assert float(values[twin].rad()) <= 1e-60 * (1.0 + abs(float(values[node].mid())))
                    checked += 1
    assert checked > 3


def test_the_shocks_largest_deflection_cancels_at_the_brackets_end():
    # At the angle of the largest deflection the equation's left side is its tangent (NACA Report 1135, eq. 168), of which the range keeps 98 percent.
    model = pipeline.closure(*pipeline.find("oblique_shock"))[0].model
    chart = Chart(model)
    (_, relaxed, _), = [part for part in chart.products["upper"][0].relaxed if part[0] < 0]
    assert "theta" not in chart._inputs(relaxed.nodes)
    box = {"M": (2.0, 2.2), "theta": (0.0, 0.7), "k": (1.4, 1.42), "_share": (0.0, 0.0)}
    low, high = (np.array([[box[name][end] for name in chart.variables]]) for end in (0, 1))
    assert chart.natural(relaxed, low, high).low[0] > 0.0


# -- requirements

FOLD = "b*x*(2 - x) = a", ("0", "1"), {"a": (0, 2), "b": (1, 2)}


def test_a_requirement_keeps_zeros_off_a_fold_inside_the_bracket():
    assert set(verdicts(spec("fold", *FOLD, require=("a <= 0.98*b",))).values()) == {"proved"}


def test_without_the_requirement_the_fold_is_not_passed_over():
    found = verdicts(spec("fold", *FOLD, require=("a <= b",)))
    assert found["exists"] == "proved" and found["slope"] != "proved"


def test_a_requirement_on_a_maximum_holds_for_each_of_its_parts():
    text = spec("parts", "x + x^3 = c - a", ("0", "3"), {"a": (0, 1), "b": (0, 1), "c": (0, 2)}, require=("c >= max(a, b)",))
    assert verdicts(text)["exists"] == "proved"
    text = spec("parts", "x + x^3 = c - a", ("0", "3"), {"a": (0, 1), "b": (0, 1), "c": (0, 2)}, require=("c >= min(a, b)",))
    assert verdicts(text)["exists"] != "proved"


# -- groups

def test_parameters_that_matter_only_together_are_one_variable():
    text = spec("together", "x + x^3 = a*exp(-b*c)", ("0", "3"), {"a": (1, 2), "b": (0, 1), "c": (0, 1)})
    domain = Domain(closure(text).model, grouped=True)
    assert domain.lower.variables == ["_group0", "_share"]
    assert domain.lower.groups[0].absorbed == ("a", "b", "c")
    low, high = domain.ranges.low[0], domain.ranges.high[0]     # a*exp(-b*c) goes from 1/e to 2
    assert 0.99 * np.exp(-1.0) < low <= np.exp(-1.0) and 2.0 <= high < 2.01
    assert set(verdicts(text).values()) == {"proved"}


def test_a_group_that_has_no_value_in_a_corner_proves_nothing():
    assert verdicts(spec("corner", "x = sqrt(a - b)", ("-1", "2"), {"a": (0, 1), "b": (0, 1)}))["defined"] == "refuted"
    assert verdicts(spec("corner", "x = sqrt(a - b)", ("-1", "2"), {"a": (1, 2), "b": (0, 1)}))["defined"] == "proved"


def test_a_switch_within_a_group_is_still_a_kink():
    assert verdicts(spec("switched", "x = max(a, b)", ("-1", "2"), {"a": (0, 1), "b": (0, 1)}))["kink"] != "proved"


def test_a_parameter_that_matters_elsewhere_too_is_not_absorbed():
    # a*b = 2 has zeros up to a = 2 only through the group; a alone moves the bracket's end.
    text = spec("elsewhere", "x = a*b*c", ("0", "a"), {"a": (1, 2), "b": (0.1, 1), "c": (0.1, 1)})
    assert set(verdicts(text).values()) == {"proved"}


# -- slopes

def test_a_slope_that_is_0_where_one_of_its_forms_has_no_value_is_not_bounded():
    # 1/(1/x) is x where it is defined: the zero at x = a = 0 has slope 0.
    for equation in ("x^2/(1 + 0*a) = a^2", "x*x*x = a^3", "x*abs(x) = a"):
        assert verdicts(spec("flat", equation, ("0", "1"), {"a": (0, 1)}))["slope"] != "proved"


# -- limits

def test_a_time_that_is_over_leaves_everything_open():
    found = prove(closure(spec("over", "x + abs(x) = a", ("0", "2"), {"a": (1, 2)})), seconds=0.0)
    assert set(found.verdicts.values()) == {"open"} and all(claim.share == 1.0 for claim in found.claims)


def test_the_length_of_waves_changes_nothing():
    closed = closure(spec("waves", "x + sin(9*x*b)/10 = a", ("-2", "2"), {"a": (-1, 1), "b": (0, 1)}))
    assert dump(prove(closed, boxes=4000)) == dump(prove(closed, boxes=4000, seconds=1000.0))


def test_progress_tells_stage_boxes_and_share():
    seen = []
    prove(pipeline.closure(*pipeline.find("plane_wall"))[0], boxes=4000, progress=lambda *state: seen.append(state))
    assert {stage for stage, *_ in seen} >= {"ends", "slope", "sensitivities"}
    assert [boxes for _, boxes, _, _ in seen] == sorted(boxes for _, boxes, _, _ in seen)
    assert all(0.0 <= settled <= 1.5 for *_, settled in seen)


# -- bounds

@pytest.mark.parametrize("name", ("kepler", "wien_peak", "throttle_gate", "pipe_friction", "plane_wall", "lambert_w"))
def test_bounds_hold_over_a_sample_and_the_least_slope_is_near_it(name):
    closed = pipeline.closure(*pipeline.find(name))[0]
    numbers = dict(prove(closed).claim("slope").numbers)
    module = pipeline.load(name, "python")
    names, largest, least = closed.kernels["jacobian"], {}, np.inf
    for point in sample(closed, 300):
        solved, jacobian = module.solve_jacobian(list(point.values()))
        if solved.status == 0:
            least = min(least, abs(solved.slope))
            for key, value in zip(names, (value for row in jacobian for value in row)):
                largest[key] = max(largest.get(key, 0.0), abs(value))
    rounding = 1.0 + 1e-9                       # of the doubles that are sampled
    assert numbers["least_slope"] <= least * rounding
    assert least <= 10.0 * numbers["least_slope"]
    bounded = [key for key in names if key in numbers]
    assert bounded
    for key in bounded:
        assert numbers[key] * rounding >= largest[key], key
    near = [key for key in bounded if largest[key] and numbers[key] <= 10.0 * largest[key]]
    assert 2 * len(near) >= len(bounded)
