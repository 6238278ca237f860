"""The solver core alone, in Python, against kernels written by hand and a corpus of published problems.

Roots are judged by ball arithmetic (python-flint): the exact residual has opposite signs on either side of the error
bound, or the exact root lies within it.
"""

import math
import random
from dataclasses import replace

import flint
import pytest

from corpus import APS, SPECIAL
from rootwright.spec.expression import parse
from solver_harness import INF, NAN, STATUS, Problem, evaluate, formula, python_core, solve

FEATURES = {"closed": (), "open-lower": ("OPEN_LOWER",), "open-upper": ("OPEN_UPPER",),
            "open": ("OPEN_LOWER", "OPEN_UPPER")}
STATUSES = {"solved": 0, "flat": STATUS["FLAT"], **{word.lower(): code for word, code in STATUS.items() if code < 0}}



def power(a, b):
    n = round(float(b))
    return a**n if b == n else a**b


BALLS = {
    "add": lambda a, b: a + b, "sub": lambda a, b: a - b, "mul": lambda a, b: a * b, "div": lambda a, b: a / b,
    "neg": lambda a: -a, "pow": power, "exp": flint.arb.exp,
    "log": flint.arb.log, "sin": flint.arb.sin, "cos": flint.arb.cos, "sqrt": flint.arb.sqrt,
    "cbrt": lambda a: a.root(3) if a > 0 else -(-a).root(3), "where": lambda test, a, b: a if test else b,
    "lt": lambda a, b: a < b, "gt": lambda a, b: a > b, "ge": lambda a, b: a >= b, "or": lambda a, b: a or b,
}


def exactly(expression, x=None):
    """An expression in ball arithmetic of 300 bits."""
    flint.ctx.prec = 300
    names = {"pi": flint.arb.pi(), "x": x}
    return evaluate(parse(expression, "equation").tree, names, BALLS, flint.arb)


def problem(case):
    return formula(case.equation, case.bracket, features=FEATURES[case.ends])


def line(root, lower=0.0, upper=1.0, **more):
    return Problem(lower, upper, lambda x: (x - root, 1.0), lambda x: (2.0**-53 * abs(x - root), 0.0, 0.0), **more)


def step(at, lower=-1.0, upper=1.0, **more):
    return Problem(lower, upper, lambda x: (1.0 if x >= at else -1.0, 0.0), **more)


def holds_its_root(case, outcome):
    """The exact root lies within the error bound and inside the reported bracket's reach."""
    x, bound = flint.arb(outcome.root), flint.arb(outcome.error_bound)
    if case.root is not None and not case.id.startswith("aps"):
        return abs(x - exactly(case.root)) <= bound
    if outcome.error_bound == 0.0:
        return exactly(case.equation, x).contains(0)
    return exactly(case.equation, x - bound) * exactly(case.equation, x + bound) < 0


@pytest.mark.parametrize("case", APS, ids=lambda case: case.id)
def test_every_problem_of_alefeld_potra_and_shi_is_solved_and_its_error_bound_holds(case):
    outcome = solve(problem(case))
    assert outcome.status == (STATUS["FLAT"] if case.id.startswith("aps.13") else 0)
    assert holds_its_root(case, outcome)
    printed = float(exactly(case.root))
    assert abs(outcome.root - printed) <= outcome.error_bound + 2.0 * math.ulp(printed)
    assert outcome.evaluations <= 30


def test_the_154_problems_take_fewer_than_1200_evaluations_together():
    assert len(APS) == 154
    assert sum(solve(problem(case)).evaluations for case in APS) < 1200


@pytest.mark.parametrize("case", SPECIAL, ids=lambda case: f"{case.equation} on {case.bracket} {case.ends}")
def test_each_special_case_has_its_stated_outcome(case):
    outcome = solve(problem(case))
    assert outcome.status == STATUSES[case.outcome]
    assert outcome.evaluations <= 200
    if outcome.status >= 0:
        assert holds_its_root(case, outcome)
        assert outcome.lower <= outcome.root <= outcome.upper
        assert outcome.error_bound >= 0.0
    else:
        assert all(math.isnan(value) for value in (outcome.root, outcome.residual, outcome.slope, outcome.error_bound))


# -- ends

def test_a_root_at_a_closed_end_is_found_by_the_two_evaluations_of_the_ends():
    for lower, upper in ((0.25, 1.0), (0.0, 0.25), (0.25, 0.25)):
        outcome = solve(line(0.25, lower, upper))
        assert (outcome.status, outcome.root, outcome.evaluations) == (0, 0.25, 2)


def test_an_end_counts_as_a_root_only_within_its_rounding():
    def near(distance):
        return Problem(0.0, 1.0, lambda x: (x + distance, 1.0), lambda x: (1e-10, 0.0, 0.0), lower_rounding=1e-12)

    outcome = solve(near(1.005e-10))
    assert (outcome.status, outcome.root) == (0, 0.0)
    assert outcome.error_bound >= 1.005e-10
    assert solve(near(1.05e-10)).status == STATUS["NO_SIGN_CHANGE"]


def test_the_better_of_two_ends_within_rounding_is_the_root():
    def valley(g_lower, g_upper):
        return Problem(0.0, 1.0, lambda x: (g_lower if x < 0.5 else g_upper, 0.0), lambda x: (1e-3, 0.0, 0.0))

    assert solve(valley(1e-4, 1e-5)).root == 1.0
    assert solve(valley(1e-5, 1e-4)).root == 0.0


def test_an_unbounded_rounding_error_at_an_end_makes_no_root():
    for bound in (INF, NAN):
        hopeless = Problem(0.0, 1.0, lambda x: (x + 1.0, 1.0), lambda x: (bound, bound, bound))
        assert solve(hopeless).status == STATUS["NO_SIGN_CHANGE"]
        assert solve(replace(hopeless, rounding=lambda x: (0.0, 0.0, 0.0), lower_rounding=bound)).status \
            == STATUS["NO_SIGN_CHANGE"]


def test_ends_that_cross_by_their_rounding_are_equal_and_ends_that_cross_farther_are_refused():
    crossed = line(0.5, 0.5 + 1e-15, 0.5 - 1e-15, lower_rounding=1e-15, upper_rounding=1.5e-15)
    outcome = solve(crossed)
    assert outcome.status == 0
    assert abs(outcome.root - 0.5) <= outcome.error_bound < 1e-14
    refused = solve(replace(crossed, lower_rounding=0.0))
    assert refused.status == STATUS["BAD_BRACKET"]
    assert math.isnan(refused.lower) and math.isnan(refused.upper)


@pytest.mark.parametrize("ends", [(NAN, 1.0), (0.0, NAN), (-INF, 1.0), (0.0, INF)])
def test_a_bracket_end_that_is_no_number_is_refused_before_any_evaluation(ends):
    outcome = solve(line(0.5, *ends))
    assert (outcome.status, outcome.evaluations) == (STATUS["NOT_FINITE"], 0)
    assert math.isnan(outcome.lower) and math.isnan(outcome.upper)


def test_a_residual_that_is_nan_at_an_end_is_not_finite():
    for bad in (0.0, 1.0):
        outcome = solve(Problem(0.0, 1.0, lambda x: (NAN if x == bad else x - 0.3, 1.0)))
        assert outcome.status == STATUS["NOT_FINITE"]


def test_an_infinite_residual_at_an_end_is_used_for_its_sign():
    outcome = solve(Problem(0.0, 1.0, lambda x: ({0.0: -INF, 1.0: INF}.get(x, x - 0.3), 1.0)))
    assert (outcome.status, outcome.root) == (0, 0.3)


def test_open_ends_are_never_evaluated_at():
    seen = []

    def residual(x):
        seen.append(x)
        return 1.0 / x + 1.0 / (x - 1.0), -1.0 / max(x**2, 5e-324) - 1.0 / (x - 1.0)**2

    poles = Problem(0.0, 1.0, residual, lambda x: (0.0, 0.0, 2.0 / max(x**3, 5e-324) + 2.0 / (x - 1.0)**3),
                    features=("OPEN_LOWER", "OPEN_UPPER"))
    outcome = solve(poles)
    assert (outcome.status, outcome.root) == (0, 0.5)
    assert all(0.0 < x < 1.0 for x in seen)


def test_a_trivial_root_at_an_open_end_is_shut_out():
    # x*(x - 1/2), negative between its roots and positive above
    outcome = solve(Problem(0.0, 2.0, lambda x: (x * (x - 0.5), 2.0 * x - 0.5), lambda x: (1e-16 * x, 1e-16, 2.0),
                            features=("OPEN_LOWER",)))
    assert outcome.root == pytest.approx(0.5, rel=1e-15)


def test_an_open_end_with_no_certain_sign_up_to_the_middle_has_no_sign_change():
    vague = Problem(0.0, 1.0, lambda x: (x - 0.9, 1.0), lambda x: (1.0, 0.0, 0.0), features=("OPEN_LOWER",))
    outcome = solve(vague)
    assert outcome.status == STATUS["NO_SIGN_CHANGE"]
    assert outcome.evaluations <= 12


def test_an_open_end_beside_which_nothing_is_finite_is_not_finite():
    outcome = solve(Problem(0.0, 1.0, lambda x: (NAN, NAN), features=("OPEN_UPPER", "OPEN_LOWER")))
    assert outcome.status == STATUS["NOT_FINITE"]
    assert outcome.evaluations <= 12


# -- the way there

def ordinal(x):
    return python_core(line(0.5))["_ordinal"](x)


def test_ordinals_number_the_doubles_without_a_gap():
    core = python_core(line(0.5))
    for x in (0.0, 5e-324, 1.0, 1.7976931348623157e308, -1e-300, -5e-324, -1.0):
        assert core["_ordinal"](math.nextafter(x, INF)) == core["_ordinal"](x) + 1
        assert core["_from_ordinal"](core["_ordinal"](x)) == x
    assert core["_ordinal"](-0.0) == core["_ordinal"](0.0) == 0


def liar(seed, lower, upper, root):
    """The sign changes at root; values and slopes are noise, so that every model misleads and none can be confirmed."""
    noise = random.Random(seed)
    slopes = [noise.choice((-1.0, 1.0)) * 10.0**noise.uniform(-30.0, 30.0) for _ in range(997)]
    values = [10.0**noise.uniform(-30.0, 30.0) for _ in range(991)]

    def residual(x):
        n = abs(ordinal(x))
        return math.copysign(values[n % 991], x - root if x != root else 1.0), slopes[n % 997]

    return Problem(lower, upper, residual, lambda x: (0.0, 0.0, INF))


BRACKETS = [(-1.7e308, 1.7e308), (1e-300, 1e300), (-1.0, 1e-4), (0.0, 200.0), (5e-324, 1e-310), (-3.0, -1.0)]


@pytest.mark.parametrize("lower, upper", BRACKETS)
def test_the_doubles_left_at_least_halve_over_every_three_evaluations_whatever_the_slopes(lower, upper):
    noise = random.Random(f"{lower} {upper}")
    core = python_core(line(0.5))
    for seed in range(40):
        at = core["_from_ordinal"](noise.randrange(ordinal(lower) + 1, ordinal(upper)))
        lies, seen = liar(seed, lower, upper, at), []

        def residual(x):
            seen.append(x)
            return lies.residual(x)

        outcome = solve(replace(lies, residual=residual))
        assert outcome.evaluations <= 200
        low, high, gaps = lower, upper, []
        for x in seen[2:2 + outcome.iterations]:
            assert low < x < high
            low, high = (x, high) if x < at else (low, x)
            gaps.append(ordinal(high) - ordinal(low))
        for before, after in zip(gaps, gaps[3:]):
            assert after <= before - before // 2


def test_steps_never_leave_the_bracket():
    seen = []

    def residual(x):
        seen.append(x)
        return x**3 - 2.0 * x + 2.0, 3.0 * x**2 - 2.0

    outcome = solve(Problem(-2.0, 0.8, residual, lambda x: (1e-15, 1e-15, 6.0 * x)))
    assert outcome.root == pytest.approx(-1.7692923542386314, rel=1e-14)        # Newton from 0 cycles between 0 and 1
    assert all(-2.0 <= x <= 0.8 for x in seen)


def test_holes_inside_the_bracket_are_stepped_over():
    def residual(x):
        return (NAN, NAN) if 0.4 < x < 0.6 or x == 0.25 else (math.atan(50.0 * (x - 0.3)), 0.0)

    outcome = solve(Problem(0.0, 1.0, residual, lambda x: (1e-14, 0.0, 0.0)))
    assert outcome.status == STATUS["FLAT"]
    assert abs(outcome.root - 0.3) <= outcome.error_bound < 1e-14


def test_a_residual_that_is_defined_at_the_ends_only_is_not_finite():
    outcome = solve(Problem(0.0, 1.0, lambda x: ({0.0: -1.0, 1.0: 1.0}.get(x, NAN), 1.0)))
    assert outcome.status == STATUS["NOT_FINITE"]
    assert (outcome.lower, outcome.upper) == (0.0, 1.0)
    assert outcome.evaluations <= 12


def test_holes_all_over_the_bracket_end_at_the_limit():
    def residual(x):
        n = ordinal(x) * 0x9E3779B97F4A7C15 >> 23
        return (NAN if n % 100 < 40 and abs(x) < 1e300 else 1.0 if x >= 1e-7 else -1.0), 0.0

    outcome = solve(Problem(-1e300, 1e300, residual))
    assert (outcome.status, outcome.evaluations) == (STATUS["ITERATION_LIMIT"], 200)
    assert outcome.lower < 1e-7 <= outcome.upper


def test_an_infinite_value_inside_is_used_for_its_sign():
    outcome = solve(Problem(-1.0, 3.0, lambda x: (-INF if x < 0.5 else INF if x > 1.5 else x - 0.75, 1.0)))
    assert (outcome.status, outcome.root) == (0, 0.75)


def test_a_slope_that_is_no_number_leaves_bisection():
    outcome = solve(Problem(0.0, 2.0, lambda x: (x * x - 2.0, NAN), lambda x: (1e-15, NAN, NAN)))
    assert outcome.status == STATUS["FLAT"]
    assert abs(outcome.root - math.sqrt(2.0)) <= outcome.error_bound < 1e-14


def test_an_infinite_slope_is_no_step_of_zero():
    outcome = solve(Problem(0.0, 1.0, lambda x: (math.sqrt(x) - 0.25, 0.5 / math.sqrt(x) if x > 0.0 else INF),
                            lambda x: (1e-16, 1e-16, 0.0)))
    assert outcome.root == pytest.approx(0.0625, rel=1e-14)


def test_a_limit_that_is_used_up_leaves_the_tightest_bracket():
    outcome = solve(step(0.1, limit=12))
    assert (outcome.status, outcome.evaluations) == (STATUS["ITERATION_LIMIT"], 12)
    assert -1.0 < outcome.lower < 0.1 <= outcome.upper < 1.0


def test_a_jump_reports_the_two_doubles_it_lies_between():
    outcome = solve(step(0.1))
    assert outcome.status == STATUS["JUMP"]
    assert (outcome.lower, outcome.upper) == (math.nextafter(0.1, -INF), 0.1)


def test_a_pole_at_which_rounding_is_huge_is_no_root():
    def residual(x):
        return (1.0 / (x - 0.3), -1.0 / (x - 0.3)**2) if x != 0.3 else (INF, -INF)

    assert solve(Problem(-1.0, 1.0, residual, lambda x: (1e290, 1e300, 1e300))).status == STATUS["JUMP"]


# -- starts

def test_a_start_changes_the_cost_and_the_last_bits_only():
    kepler = formula("x - 0.9*sin(x) - 0.3", ("-0.6", "1.2"))
    cold = solve(kepler)
    for start in (-1e9, -0.6, 0.0, 0.5, 1.2, 7.0, INF, -INF):
        warm = solve(kepler, start)
        assert warm.status == 0
        assert abs(warm.root - cold.root) <= cold.error_bound + warm.error_bound
    warm = solve(kepler, cold.root)
    assert warm.evaluations <= 4 <= cold.evaluations


def test_the_author_s_start_serves_where_no_other_is_given():
    seen = []

    def residual(x):
        seen.append(x)
        return x - 0.3, 0.0

    guided = Problem(0.0, 1.0, residual, lambda x: (1e-17, 0.0, 0.0), features=("START",), start=0.75)
    solve(guided)
    assert seen[2] == 0.75
    seen.clear()
    solve(guided, 0.875)
    assert seen[2] == 0.875


# -- what is reported

def test_a_root_without_any_rounding_has_the_error_bound_zero():
    outcome = solve(line(0.25))
    assert (outcome.root, outcome.error_bound, outcome.lower, outcome.upper) == (0.25, 0.0, 0.25, 0.25)


def test_the_error_bound_covers_noise_of_either_sign():
    noise, costs = random.Random(5), []
    for _ in range(200):
        root, level = noise.uniform(0.1, 0.9), 10.0**noise.uniform(-15.0, -3.0)

        def residual(x):
            return math.sin(x - root) + level * math.cos(1e7 * x / (1.0 + x)), math.cos(x - root)

        outcome = solve(Problem(0.0, 1.0, residual, lambda x: (level + 1e-15, 1e-3, -math.sin(x - root))))
        assert outcome.status == 0
        assert abs(outcome.root - root) <= outcome.error_bound <= 4.0 * level + 1e-14
        costs.append(outcome.evaluations)
    assert sum(costs) < 7 * len(costs)                      # noise is recognised, not bisected


def test_the_error_bound_never_exceeds_the_bracket():
    outcome = solve(Problem(0.0, 1.0, lambda x: (x - 0.3, 1.0), lambda x: (INF, INF, INF), upper_rounding=0.25))
    assert outcome.status == STATUS["FLAT"]
    assert outcome.error_bound == pytest.approx(0.7)
    assert (outcome.lower, outcome.upper) == (0.0, 1.0)
    point = solve(Problem(0.5, 0.5, lambda x: (1e-3, 1.0), lambda x: (1e-2, 0.0, 0.0), lower_rounding=1e-15))
    assert (point.status, point.error_bound) == (0, 1e-15)


def test_a_flat_root_s_error_bound_comes_from_where_the_sign_is_certain():
    cube = Problem(-1.0, 1.0, lambda x: ((x - 0.1)**3, 3.0 * (x - 0.1)**2), lambda x: (1e-12, 1e-12, 6.0 * (x - 0.1)))
    outcome = solve(cube)
    assert outcome.status == STATUS["FLAT"]
    assert 0.5e-4 < outcome.error_bound < 4e-4                    # the noise zone reaches 1e-4 to either side
    assert abs(outcome.root - 0.1) <= outcome.error_bound


def test_a_root_on_a_switch_is_marked_and_told_its_error_bound():
    asked = []

    def kink(x, error_bound):
        asked.append((x, error_bound))
        return True

    outcome = solve(line(0.25, features=("SWITCHES",), kink=kink))
    assert outcome.status == STATUS["KINK"]
    assert asked == [(outcome.root, outcome.error_bound)]
    assert solve(line(0.25, features=("SWITCHES",))).status == 0


def test_flatness_is_judged_from_the_slope_s_rounding_and_the_bend():
    core = python_core(line(0.5))

    def is_flat(*numbers):
        return core["_is_flat"](core["_bend"](None, 0.5, *numbers))

    assert not is_flat(0.0, 1.0, 1e-16, 1e-16, 1.0)
    assert is_flat(0.0, 1e-16, 1e-16, 2e-16, 0.0)           # the slope is within its rounding
    assert not is_flat(0.0, 1.0, 0.24, 0.0, 1.0)
    assert is_flat(0.0, 1.0, 0.26, 0.0, 1.0)                # the curve bends within the error
    for bad in (NAN, INF):
        assert is_flat(0.0, bad, 1e-16, 1e-16, 1.0)
        assert is_flat(0.0, 1.0, bad, 1e-16, 1.0)
        assert is_flat(0.0, 1.0, 1e-16, 1e-16, 1.0) == is_flat(0.0, 1.0, 1e-16, 1e-16, bad)     # a line is straight


@pytest.mark.parametrize("scale", [1.0, 1e-6, 1e8])
def test_zero_reached_on_one_side_of_a_step_only_is_a_jump(scale):
    """The curve comes down to zero at 1, where it steps to -scale: there is no root, and nothing near it is taken for one."""
    one_sided = Problem(-3.0, 3.0, lambda x: (x - 1.0, 1.0) if x > 1.0 else (-scale, 0.0), lambda x: (1e-16*abs(x - 1.0), 0.0, 0.0))
    assert solve(one_sided).status == STATUS["JUMP"]
