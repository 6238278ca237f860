"""Published root-finding problems and nasty specs, solved through the whole compiler."""

import math

import mpmath as mp
import pytest
from nasty_specs import nasty
from problem_specs import WORKING_DIGITS, alefeld_potra_shi, scipy_collection
from rootwright import pipeline
from rootwright.binding.module import load
from rootwright.evidence.evaluate import word

PROBLEMS = (*alefeld_potra_shi(), *scipy_collection(), *nasty())


def _module(problem, target="python"):
    closed, _ = pipeline.closure(problem.text.encode(), f"{problem.id}.toml")
    return load(closed, pipeline.emit(closed, target), target)


def _solve(module, point):
    return module.solve([float(point.given[name]) for name in module.parameters])


def _is_the_root(found, point):
    """Within 4 ulp of the root, or the error bound that it came with, or where doubles cannot tell it from the root."""
    with mp.workdps(WORKING_DIGITS):
        root = mp.mpf(point.root)
        ulp = mp.ldexp(1, max(mp.frexp(root)[1] - 53, -1074))
        near = max(4*ulp, mp.mpf(point.within), mp.mpf(found.error_bound))
        return abs(mp.mpf(found.y[0]) - root) <= near


def _check(problem, target):
    module = _module(problem, target)
    for point in problem.points:
        found = _solve(module, point)
        assert word(found.status) in point.status, point.given
        assert math.isnan(found.y[0]) if found.status < 0 else _is_the_root(found, point), point.given


@pytest.mark.parametrize("problem", PROBLEMS, ids=lambda problem: problem.id)
def test_a_problem_has_the_expected_status_and_root_at_every_point(problem):
    _check(problem, "python")


@pytest.mark.parametrize("problem", nasty(), ids=lambda problem: problem.id)
def test_a_nasty_spec_compiles_as_c_and_solves_there_too(problem):
    _check(problem, "c")


def test_the_154_problems_take_fewer_than_2000_evaluations_and_none_more_than_60():
    """Brent's method takes 2756, worst 38, and Algorithm 748 takes 2680, worst 34, on the same problems."""
    counts = [_solve(module, point).evaluations for problem in alefeld_potra_shi()
              for module in [_module(problem)] for point in problem.points]
    assert len(counts) == 154
    assert sum(counts) < 2000
    assert max(counts) <= 60


@pytest.mark.parametrize("mine, collection", [(alefeld_potra_shi(), "aps"), (scipy_collection()[5:], "chandrupatla")])
def test_the_roots_are_those_that_scipy_prints(mine, collection):
    tests = pytest.importorskip("scipy.optimize._tstutils").get_tests(collection)
    points = [point for problem in mine for point in problem.points]
    assert len(points) == len(tests)
    for point, test in zip(points, tests):
        assert float(point.root) == pytest.approx(test["root"], rel=1e-15, abs=0), test["ID"]
