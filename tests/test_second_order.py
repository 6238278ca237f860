"""Second derivatives: against second differences at high precision, closed forms of other libraries, differences of the
module's own adjoints, and one target against the other."""

import hashlib
import math
import os
import shutil
import struct
import subprocess
import sys
from types import SimpleNamespace

import mpmath as mp
import pytest
from hypothesis import HealthCheck, Phase, assume, given, settings
from hypothesis import strategies as st
from problem_specs import spec
from strategies import EXACT, points, solvable_specs

from rootwright import pipeline
from rootwright.binding.module import load
from rootwright.calculus.balls import ball
from rootwright.calculus.sampling import sample
from rootwright.evidence.limits import LIMITS
from rootwright.evidence.reference import NotSettled, Reference
from rootwright.evidence.second_differences import second_derivatives
from rootwright.evidence.verify import hold
from rootwright.plan.plan import PLAIN

POINTS = 6                      # of each shipped spec
STRICT = ["-pedantic", "-Wall", "-Wextra", "-Wconversion", "-Wfloat-conversion", "-Wdouble-promotion", "-Wshadow",
          "-Wfloat-equal", "-Wcast-qual", "-Wvla", "-Werror", "-ffp-contract=off"]


def closed(text, order=2):
    return pipeline.closure(text.encode(), "test.toml", order)[0]


def closed_or_passed_over(text):
    """Closure of a random spec; one with a constant that is not finite is refused by the compiler, and passed over."""
    try:
        return closed(text)
    except pipeline.SpecError:
        assume(False)


def shipped(name, order=2):
    return pipeline.promising(name, order)


def module(closure, target="python"):
    return load(closure, pipeline.emit(closure, target), target)


def solved(equation, bracket, point, target="python", wide=(-10, 10), **tables):
    """(module, parameters, root, hessian) of a closure at a point {name: number}."""
    built = module(closed(spec("test", equation, bracket, dict.fromkeys(point, wide), **tables)), target)
    p = list(point.values())
    r = built.solve(p)
    assert r.status >= 0
    return SimpleNamespace(module=built, p=p, r=r, hess=built.hessian(p, r.y[0]))


def reference(equation, bracket, point, wide=(-10, 10), **tables):
    """Second derivatives at high precision, {(result, parameter, parameter): Derivative}."""
    made = Reference(closed(spec("test", equation, bracket, dict.fromkeys(point, wide), **tables)).model)
    return second_derivatives(made, point, made.root(point).mid)


# -- the reference


def test_second_differences_agree_with_the_closed_form():
    """W'' = -W^2*(W + 2)/(x^2*(1 + W)^3) for Lambert's W, with mpmath's own W."""
    found = reference("x*exp(x) = a", ("0", "a"), {"a": 7.25}, outputs={"square": "x^2"})
    with mp.workdps(50):
        w = mp.lambertw(mp.mpf(7.25)).real
        first, second = w/(7.25*(1 + w)), -w**2*(w + 2)/(mp.mpf(7.25)**2*(1 + w)**3)
        assert found["x", "a", "a"].value == float(second)
        assert found["square", "a", "a"].value == float(2*first**2 + 2*w*second)


def test_mixed_second_differences_agree_with_the_closed_form():
    found = reference("x = a^3*b^2/c", ("-99", "99"), {"a": 1.5, "b": -0.75, "c": 3.0})
    for pair, value in {("a", "b"): 6*1.5**2*-0.75/3, ("a", "c"): -3*1.5**2*0.75**2/9, ("b", "c"): -2*1.5**3*-0.75/9,
                        ("c", "c"): 2*1.5**3*0.75**2/27}.items():
        assert found["x", *pair].value == pytest.approx(value, rel=1e-15)


@pytest.mark.parametrize("equation, why", [
    ("x = 2 + a*abs(a)", "kink"), ("x = 2 + abs(a)^1.5", "unbounded"), ("x = 2 + sqrt(a)^3", "unbounded"),
    ("x = 2 + where(a < 0, a, a + a^2)", "kink")])
def test_where_there_is_no_second_derivative_the_reference_says_why(equation, why):
    derivative = reference(equation, ("0", "9"), {"a": 0.0})["x", "a", "a"]
    assert (derivative.value, derivative.why) == (None, why)


def test_at_the_edge_of_a_domain_second_differences_are_taken_from_one_side():
    found = reference("x = sqrt(a)^7 + 3*a^2 + a*b", ("-9", "9"), {"a": 0.0, "b": 1.0})
    assert found["x", "a", "a"].value == pytest.approx(6.0, abs=1e-12)
    assert found["x", "a", "b"].value == pytest.approx(1.0, abs=1e-12)


# -- the modules


@pytest.mark.parametrize("name", pipeline.shipped())
def test_a_shipped_spec_holds_its_second_derivatives_at_sampled_points(name):
    closure = shipped(name)
    report = hold(closure, {"python": module(closure)}, points=POINTS)
    assert not report.failed, report.findings
    measures = {measure.key: measure for measure in report.measures}
    assert measures["second"].within > 0.95 and measures["second"].count >= POINTS and "product" in measures


@pytest.mark.parametrize("target", ["c", "python"])
def test_the_hessian_of_keplers_equation_is_that_of_celestial_mechanics(target):
    """E_MM = -e*sin(E)/(1 - e*cos(E))^3; E by mpmath, the others by its numerical differentiation."""
    built = module(shipped("kepler"), target)
    for e, anomaly in ((0.3, 1.0), (0.9, 0.1), (0.0, 2.0)):
        r = built.solve([e, anomaly])
        hess = built.hessian([e, anomaly], r.y[0])[0]
        with mp.workdps(40):
            def root(e, m):
                return mp.findroot(lambda x: x - e*mp.sin(x) - m, r.y[0])
            x = root(mp.mpf(e), mp.mpf(anomaly))
            exact = -e*mp.sin(x)/(1 - e*mp.cos(x))**3
            assert hess[1][1] == pytest.approx(float(exact), rel=1e-12, abs=1e-15)
            for i, j in ((0, 0), (0, 1)):
                order = (2 - i - j, i + j)
                assert hess[i][j] == pytest.approx(float(mp.diff(root, (e, anomaly), order)), rel=1e-9)


@pytest.mark.parametrize("target", ["c", "python"])
def test_tangent_adjoint_is_the_derivative_of_the_adjoint(target):
    built = module(shipped("pipe_friction"), target)
    p, direction, weights, step = [1e5, 1e-4], [3e4, -2e-5], [0.25, -40.0], 1e-4
    sides = []
    for side in (1, -1):
        moved = [value + side*step*along for value, along in zip(p, direction)]
        sides.append(built.adjoint(moved, built.solve(moved).y[0], weights, [0.0, 0.0]))
    found = built.tangent_adjoint(p, built.solve(p).y[0], direction, weights, [0.0, 0.0])
    assert found == pytest.approx([(above - below)/(2*step) for above, below in zip(*sides)], rel=1e-6)


@pytest.mark.parametrize("target", ["c", "python"])
def test_tangent_adjoint_adds(target):
    built = module(shipped("lambert_w"), target)
    r = built.solve([2.0])
    (alone,) = built.tangent_adjoint([2.0], r.y[0], [1.0], [1.0], [0.0])
    assert built.tangent_adjoint([2.0], r.y[0], [1.0], [1.0], [5.0]) == [5.0 + alone] and alone != 0.0


def test_stiff_residuals_keep_the_digits_that_partial_derivatives_would_lose():
    """A diode behind a resistor: written out in partial derivatives, terms 1e9 times the sum cancel."""
    point = {"v": 300.0, "r": 4.0}
    tables = {"wide": (1, 1000), "outputs": {"junction": "v - x*r"}}
    equation, bracket = "x = 1e-12*expm1((v - x*r)/0.025)", ("0", "v/r")
    found = solved(equation, bracket, point, **tables)
    made = Reference(closed(spec("test", equation, bracket, dict.fromkeys(point, (1, 1000)),
                                 outputs=tables["outputs"])).model)
    exact = second_derivatives(made, point, ball(found.r.y[0]))     # at the root given: of the formulas alone
    assert found.hess[0][0][0] == pytest.approx(exact["x", "v", "v"].value, rel=1e-10)
    assert found.hess[1][0][0] == pytest.approx(exact["junction", "v", "v"].value, rel=1e-10)


@pytest.mark.parametrize("target", ["c", "python"])
@pytest.mark.parametrize("equation, point, entries", [
    ("x = where(a > 0, log(a), a^2)", {"a": -1.0}, {(0, 0): 2.0}),
    ("x = where(a > 0, sqrt(a), b*a)", {"a": -1.0, "b": 3.0}, {(0, 0): 0.0, (0, 1): 1.0, (1, 1): 0.0}),
    ("x = max(b*b, sqrt(a))", {"a": -0.0, "b": 2.0}, {(0, 0): 0.0, (0, 1): 0.0, (1, 1): 2.0}),
    ("x = min(a^3, sqrt(b))", {"a": -1.0, "b": 0.0}, {(0, 0): -6.0, (0, 1): 0.0, (1, 1): 0.0}),
    ("x = where(b > 0, where(a > 0, log(a)/a, a^2*b), 1/(b*b*b))", {"a": -3.0, "b": 1.0}, {(0, 0): 2.0, (0, 1): -6.0}),
    ("x = abs(a)*a*b", {"a": -2.0, "b": 1.0}, {(0, 0): -2.0, (0, 1): 4.0}),
    ("x = sign(a)*a^2", {"a": -2.0}, {(0, 0): -2.0}),
])
def test_nothing_of_a_branch_that_is_not_chosen_leaks(target, equation, point, entries):
    """Exact derivatives of the branch chosen, by hand."""
    found = solved(equation, ("-99", "99"), point, target)
    assert all(math.isfinite(entry) for row in found.hess[0] for entry in row)
    assert {pair: found.hess[0][pair[0]][pair[1]] for pair in entries} == pytest.approx(entries, rel=1e-14, abs=1e-14)


def test_a_power_that_is_steep_at_zero_leaves_the_other_derivatives_alone():
    """x = (a*b)^1.3 + b^2 at a = 0: d2x/db2 is 2, and d2x/da2 has no bound."""
    found = solved("x = (a*b)^1.3 + b^2", ("-99", "99"), {"a": 0.0, "b": 2.0}, wide=(0, 10)).hess[0]
    assert found[1][1] == 2.0 and found[0][1] == found[1][0] == 0.0 and not math.isfinite(found[0][0])


@pytest.mark.parametrize("target", ["c", "python"])
def test_a_flat_root_has_no_second_derivatives_and_its_adjoint_says_so(target):
    found = solved("(x - a)^3 = 0", ("-99", "99"), {"a": 2.0, "b": 1.0}, target, outputs={"w": "x*b"})
    assert found.r.status & 2
    assert all(math.isnan(entry) for matrix in found.hess for row in matrix for entry in row)
    assert all(map(math.isnan, found.module.tangent_adjoint(found.p, 2.0, [1.0, 0.0], [1.0, 0.0], [7.0, 7.0])))


def test_parameters_that_are_not_differentiated_have_zero_rows_and_columns():
    built = module(shipped("orifice_flow"))
    names = list(built.parameters)
    p = [low if high > 1e5 else (low + high)/2 for low, high in shipped("orifice_flow").ranges]
    r = built.solve(p)
    held = [names.index("L1"), names.index("L2")]
    for matrix in built.hessian(p, r.y[0]):
        assert all(matrix[i][j] == 0.0 and matrix[j][i] == 0.0 for i in held for j in range(len(names)))
        assert any(entry for row in matrix for entry in row)


@settings(max_examples=20, deadline=None, database=None, derandomize=True, phases=[Phase.generate],
          suppress_health_check=list(HealthCheck))
@given(st.data())
def test_random_closures_agree_with_second_differences(data):
    text, box = data.draw(solvable_specs("random"))
    closure = closed_or_passed_over(text)
    built, made = module(closure), Reference(closure.model)
    names = list(box)
    for point in [data.draw(points(box)) for _ in range(3)]:
        p = list(point.values())
        r = built.solve(p)
        underflow = any(0.0 < abs(value) < 1e-290 for value in (*p, *r.y))      # moves the root, whatever the formulas
        if r.status or underflow or not all(map(math.isfinite, r.y)):
            continue
        try:
            root = made.root(point, r.y[0], r.error_bound)
        except NotSettled:
            continue
        hess, jac = built.hessian(p, r.y[0]), built.jacobian(p, r.y[0])
        for (result, a, b), exact in second_derivatives(made, point, root.mid).items():
            k, i, j = closure.model.results.index(result), names.index(a), names.index(b)
            if exact.value is None or not all(map(math.isfinite, (exact.value, jac[k][i], jac[k][j]))):
                continue
            reach = [max(abs(point[name]), (box[name][1] - box[name][0])/1000) for name in (a, b)]
            size = abs(r.y[k])/reach[0]/reach[1] + abs(jac[k][i])/reach[1] + abs(jac[k][j])/reach[0] + abs(exact.value)
            assert abs(hess[k][i][j] - exact.value) <= 1e-7*size, (text, point, result, a, b)


# -- C and Python


def bits(values):
    return [struct.pack("<d", value) if value == value else b"NaN" for value in values]


ARITHMETIC = ("x = a*b/(1 + x*x) - 3*b + 0.1*a", "x*sqrt(1 + x^2) + x = a - b^3/7", "x^3 + (1 + b*b)*x = a*a/(2 + b)",
              "2*x + max(x, a*b) = min(b, a)^2 + abs(a - x)/3")


@pytest.mark.parametrize("equation", ARITHMETIC)
def test_c_and_python_agree_to_the_bit_where_only_exact_operations_occur(equation):
    closure = closed(spec("exact", equation, ("-99", "99"), {"a": (-3, 3), "b": (0.1, 3)},
                          outputs={"w": "x*x/(1 + b) + sqrt(b)*a"}))
    assert_same_bits(closure, [[-2.7, 0.3], [0.1, 2.9], [3.0, 0.1], [1/3, 1/7], [-1e-3, 1.0]])


@settings(max_examples=6, deadline=None, database=None, derandomize=True, phases=[Phase.generate],
          suppress_health_check=list(HealthCheck))
@given(st.data())
def test_random_modules_of_exact_operations_agree_to_the_bit(data):
    text, box = data.draw(solvable_specs("random", functions=EXACT))
    assert_same_bits(closed_or_passed_over(text), [list(data.draw(points(box)).values()) for _ in range(4)])


def assert_same_bits(closure, parameters):
    c, python = module(closure, "c"), module(closure)
    for p in parameters:
        r = python.solve(p)
        if r.status < 0:
            continue
        assert bits(c.solve(p).y[:1]) == bits(r.y[:1])
        one, other = (sum((row for matrix in built.hessian(p, r.y[0]) for row in matrix), []) for built in (c, python))
        assert bits(one) == bits(other)
        v, w = [0.3, -1.7], [1.1, 0.7]
        assert bits(c.tangent_adjoint(p, r.y[0], v, w, [0.5, 0.0])) == \
            bits(python.tangent_adjoint(p, r.y[0], v, w, [0.5, 0.0]))


# -- the emitted text


@pytest.mark.parametrize("order", [0, 2])
@pytest.mark.parametrize("compiler, flags", [("gcc", ["-std=c99"]), ("g++", ["-x", "c++", "-std=c++17"])])
def test_modules_of_other_orders_compile_under_strict_flags(order, compiler, flags, tmp_path):
    if shutil.which(compiler) is None:
        pytest.skip(f"{compiler} is not installed")
    names = ("kepler", "orifice_flow", "wave_dispersion", "motor_pump")
    for name in names:
        for file, text in pipeline.emit(shipped(name, order), "c").items():
            (tmp_path/file).write_text(text)
    sources = [f"{name}.c" for name in names]
    done = subprocess.run([compiler, *flags, *STRICT, "-fsyntax-only", *sources], cwd=tmp_path, capture_output=True,
                          text=True, check=False)
    assert (done.returncode, done.stderr) == (0, "")


def test_a_module_of_order_1_has_the_kernels_of_order_2_but_for_the_hessian():
    """Who does not ask for second derivatives does not pay for them; who does gets the same roots and jacobians."""
    for target, file in (("c", "kepler.c"), ("python", "kepler.py")):
        first, second = (pipeline.emit(shipped("kepler", order), target, PLAIN)[file] for order in (1, 2))
        assert "second_partials" not in first and "hessian" not in first
        missing = [line for line in first.splitlines() if line not in second.splitlines()]
        assert all("--order" in line or "SHA-256" in line or len(line.split()[-1]) >= 32 for line in missing), missing


def test_planned_modules_of_order_1_and_2_find_the_same_roots_and_jacobians_to_the_bit():
    first, second = (load(shipped("kepler", order), pipeline.emit(shipped("kepler", order), "python"), "python") for order in (1, 2))
    for point in sample(shipped("kepler", 1), 100):
        (one, jac), (other, same) = (module.solve_jacobian(list(point.values())) for module in (first, second))
        assert one.y == other.y and one.evaluations == other.evaluations and jac == same, point


def test_the_bytes_do_not_depend_on_the_order_of_hashes():
    script = ("from rootwright import pipeline\nimport hashlib\n"
              "for name in ('kepler', 'oblique_shock'):\n"
              "    closed = pipeline.promising(name, 2)\n"
              "    for target in ('c', 'python'):\n"
              "        files = sorted(pipeline.emit(closed, target).items())\n"
              "        print(hashlib.sha256(repr(files).encode()).hexdigest())\n")
    runs = {subprocess.run([sys.executable, "-c", script], env=os.environ | {"PYTHONHASHSEED": seed},
                           capture_output=True, text=True, check=True).stdout for seed in ("0", "1", "77")}
    assert len(runs) == 1 and len(runs.pop().split()) == 4


def test_orders_give_different_bytes():
    for target in ("c", "python"):
        texts = [repr(sorted(pipeline.emit(shipped("lambert_w", order), target).items())) for order in (0, 1, 2)]
        assert len({hashlib.sha256(text.encode()).digest() for text in texts}) == 3


@pytest.mark.parametrize("target", ["c", "python"])
def test_names_of_derivatives_stay_clear_of_parameters_of_that_name(target):
    """dx/da would be called x_a, as is a parameter, and d(g_x)/db would be dg_x_db."""
    point = {"a": 2.0, "x_a": 3.0, "dg_x_db": 1.5, "b": 0.5, "x_b_b": 0.25}
    found = solved("x*x = x_a*dg_x_db + a + b*x + x_b_b", ("0", "99"), point, target)
    exact = reference("x*x = x_a*dg_x_db + a + b*x + x_b_b", ("0", "99"), point)
    names = list(point)
    for (_, p, q), derivative in exact.items():
        assert found.hess[0][names.index(p)][names.index(q)] == pytest.approx(derivative.value, rel=1e-13), (p, q)


# -- what is planted is caught


class Planted:
    """A module with something wrong in it."""

    def __init__(self, built, **wrong):
        self.built, self.wrong = built, wrong

    def __getattr__(self, name):
        return self.wrong.get(name) or getattr(self.built, name)


@pytest.mark.parametrize("key, change", [
    ("second", lambda hess: [[[entry*(1 + 3e-6) for entry in row] for row in matrix] for matrix in hess]),
    ("second", lambda hess: [[matrix[0], [matrix[1][0]*(1 + 1e-15), matrix[1][1]]] for matrix in hess]),
    ("second", lambda hess: [[[math.nan]*2]*2 for _ in hess]),
])
def test_verify_finds_a_wrong_hessian(key, change):
    closure = shipped("pipe_friction")
    built = module(closure)
    wrong = Planted(built, hessian=lambda p, root: change(built.hessian(p, root)))
    report = hold(closure, {"python": wrong}, points=8)
    assert report.failed and {finding.key for finding in report.findings} >= {key}


def test_verify_finds_a_wrong_tangent_adjoint():
    closure = shipped("pipe_friction")
    built = module(closure)

    def wrong(p, root, p_dot, y_bar, p_bar_dot):
        return built.tangent_adjoint(p, root, [p_dot[0], p_dot[1]*(1 + 1e-11)], y_bar, p_bar_dot)

    report = hold(closure, {"python": Planted(built, tangent_adjoint=wrong)}, points=8)
    assert {finding.key for finding in report.findings} == {"product"}


def test_verify_holds_a_module_to_the_derivatives_that_it_has():
    every = {"derivative", "identity", "second", "product"}
    for order, keys in ((0, set()), (1, {"derivative", "identity"}), (2, every)):
        closure = shipped("lambert_w", order)
        report = hold(closure, {"python": module(closure)}, points=5)
        assert not report.failed
        assert {measure.key for measure in report.measures} & every == keys
    assert LIMITS["second"].goal == 1e-9
