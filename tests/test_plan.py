"""A plan changes what a root costs, never which root it is, whether there is one, or what is promised of it."""

import math
from functools import cache

import pytest
from nasty_specs import nasty
from problem_specs import alefeld_potra_shi, scipy_collection
from rootwright import cli, pipeline
from rootwright.binding.module import load
from rootwright.calculus.doubles import Doubles
from rootwright.calculus.program import interpret
from rootwright.calculus.sampling import sample
from rootwright.emit.assemble import assemble
from rootwright.plan.plan import PLAIN

SHIPPED = pipeline.shipped()
PROBLEMS = (*nasty(), *scipy_collection(), *alefeld_potra_shi()[::9])


@cache
def closure_of(name):
    return pipeline.promising(name)


@cache
def shipped(name):
    """(closure, its plan, module with it, module without) in Python."""
    return (closure_of(name), *both(closure_of(name)))


def both(closure, target="python"):
    """(the chosen plan, module with it, module without)."""
    plan = pipeline.plan(closure)
    return plan, load(closure, assemble(closure, target, plan), target), load(closure, assemble(closure, target, PLAIN), target)


def beside(closure, count):
    """Points of the ranges, of which some are then moved out of them."""
    for k, point in enumerate(sample(closure, count)):
        values = list(point.values())
        if k % 7 == 3:
            values[k % len(values)] *= 1.5
        yield values


def assert_same(planned, plain, where):
    """One root within both error bounds, or none for the same reason.

    Where the plain solver met a hole, a pole or its limit on its way, a short way past it may still end at a root.
    """
    if plain.status in (-1, -3, -5) and planned.status >= 0:
        assert abs(planned.residual) <= planned.error_bound*abs(planned.slope), where
        return
    assert planned.status == plain.status, where
    if plain.status < 0:
        assert math.isnan(planned.y[0]) and math.isnan(planned.error_bound), where
        return
    near = planned.error_bound + plain.error_bound
    assert abs(planned.y[0] - plain.y[0]) <= near, where
    assert planned.lower <= planned.y[0] <= planned.upper, where


@pytest.mark.parametrize("name", SHIPPED)
def test_a_planned_module_finds_the_roots_of_the_plain_one_with_their_status(name):
    closure, _, planned, plain = shipped(name)
    for point in beside(closure, 200):
        assert_same(planned.solve(point), plain.solve(point), point)


@pytest.mark.parametrize("problem", PROBLEMS, ids=lambda problem: problem.id)
def test_statuses_and_roots_of_hard_problems_are_those_of_the_plain_solver(problem):
    closure, _ = pipeline.closure(problem.text.encode(), "problem.toml")
    plan, planned, plain = both(closure)
    if plan.closure is None:
        return
    points = [[float(point.given[name]) for name in planned.parameters] for point in problem.points]
    for point in (*points, *beside(closure, 40)):
        assert_same(planned.solve(point), plain.solve(point), point)


@pytest.mark.parametrize("name", ["kepler", "solar_diode", "redlich_kwong", "plastic_multiplier", "weak_acid"])
def test_both_targets_take_the_same_steps_of_a_plan(name):
    closure, plan, python, _ = shipped(name)
    c = load(closure, assemble(closure, "c", plan), "c")
    for point in beside(closure, 400):
        one, other = c.solve(point), python.solve(point)
        assert one.status == other.status, point
        if one.status >= 0:
            assert abs(one.y[0] - other.y[0]) <= one.error_bound + other.error_bound, point
            assert abs(one.evaluations - other.evaluations) <= 3, point


@pytest.mark.parametrize("name", ["kepler", "solar_diode", "redlich_kwong", "rachford_rice"])
def test_a_warm_start_is_taken_and_may_lie_anywhere(name):
    closure, _, planned, plain = shipped(name)
    for point in sample(closure, 40):
        values = list(point.values())
        root = plain.solve(values)
        for start in (root.y[0], root.lower, -1e300, 1e300, 0.0, math.inf, math.nan):
            assert_same(planned.solve(values, start), root, (values, start))
    values = list(next(iter(list(sample(closure, 40))[30:])).values())
    assert planned.solve(values, plain.solve(values).y[0]).evaluations <= planned.solve(values).evaluations


@pytest.mark.parametrize("name", ["kepler", "pipe_friction", "solar_diode", "epidemic_size", "rachford_rice", "wet_bulb"])
def test_the_same_spec_gives_the_same_plan_and_the_same_bytes(name):
    closure, plan, _, _ = shipped(name)
    again = pipeline.promising(name)
    assert assemble(closure, "c", plan) == pipeline.emit(again, "c", pipeline.plan(again))


def test_four_in_five_shipped_specs_have_a_short_way_that_takes_fewer_evaluations():
    planned = fewer = 0
    for name in SHIPPED:
        closure, plan, short, plain = shipped(name)
        if plan.closure is None:
            continue
        planned += 1
        points = [list(point.values()) for point in sample(closure, 60)
                  if not interpret(closure.program, Doubles(), point, ["outside"])["outside"]]
        spent = [(short.solve(point).evaluations, plain.solve(point).evaluations) for point in points]
        assert max(a for a, _ in spent) < 25
        fewer += plan.ends == "evaluated" or sum(a for a, _ in spent) < sum(b for _, b in spent)
    assert planned >= 0.8 * len(SHIPPED) and fewer == planned


def test_ends_without_a_change_of_sign_are_found_out_inside_the_range_too():
    text = """format = 1
name = "two_roots"
[parameters]
a = { range = [0.0, 2.0] }
[unknown]
name = "x"
bracket = ["-3", "2"]
[residual]
equation = "x^2 = a"
"""
    closure, _ = pipeline.closure(text.encode(), "two_roots.toml")
    plan, planned, plain = both(closure)
    assert plan.ends == "evaluated" or plan.closure is None
    for a in (0.5, 1.0, 2.0):
        assert_same(planned.solve([a]), plain.solve([a]), a)
        assert planned.solve([a]).status == -2


def test_a_residual_with_a_pole_gets_no_root_at_the_pole():
    text = """format = 1
name = "pole"
[parameters]
a = { range = [0.1, 0.9] }
[unknown]
name = "x"
bracket = ["-1", "2"]
[residual]
equation = "1/(x - a)"
"""
    closure, _ = pipeline.closure(text.encode(), "pole.toml")
    _, planned, plain = both(closure)
    for a in (0.1, 0.3, 0.5, 0.9):
        assert_same(planned.solve([a]), plain.solve([a]), a)
        assert planned.solve([a]).status == -5


def test_compile_prints_the_plan_and_why_and_fresh_makes_it_again(tmp_path, capsys):
    assert cli.main(["compile", "kepler", "--into", str(tmp_path/"chosen")]) == 0
    said = capsys.readouterr().out
    assert "start: " in said and "ends: " in said
    assert cli.main(["compile", "kepler", "--into", str(tmp_path/"plain"), "--plan", "plain"]) == 0
    chosen, plain = ((tmp_path/way/"kepler.c").read_text() for way in ("chosen", "plain"))
    assert "kepler_approach" in chosen and "kepler_approach" not in plain
    assert "--plan plain" in plain and "--plan" not in chosen and len(chosen) - len(plain) < 9000
    assert cli.main(["fresh", str(tmp_path)]) == 0


def test_a_large_residual_is_not_emitted_twice():
    terms = " + ".join(f"exp(-a*x/{k})" for k in range(2, 90))
    text = f"""format = 1
name = "large"
[parameters]
a = {{ range = [0.5, 2.0] }}
[unknown]
name = "x"
bracket = ["0", "100"]
[residual]
equation = "{terms} = 40"
"""
    closure, _ = pipeline.closure(text.encode(), "large.toml")
    plan = pipeline.plan(closure)
    assert plan.closure is None and "large" in plan.why[0]
