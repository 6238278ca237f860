"""`rootwright.load`: closures as functions of NumPy arrays."""

import inspect
import math
import pickle
import subprocess
import sys
import threading
import time

import numpy as np
import pytest
import rootwright
from rootwright import pipeline
from rootwright.binding import build
from scipy.integrate import solve_ivp
from scipy.optimize import least_squares, minimize
from scipy.special import lambertw

CLASH = """\
format = 1
name = "clash"
title = "Names \\u001b of options \\\\ taken"
[parameters]
start = { range = [1.0, 4.0], unit = "m", about = "a parameter" }
out = { range = [1.0, 4.0], unit = "m" }
[unknown]
name = "threads"
bracket = ["0", "9"]
unit = "m"
[residual]
equation = "threads = start + 2*out"
"""


@pytest.fixture(scope="module", autouse=True)
def cache(tmp_path_factory):
    """A cache folder of the tests' own."""
    with pytest.MonkeyPatch.context() as patch:
        folder = tmp_path_factory.mktemp("cache")
        patch.setenv("ROOTWRIGHT_CACHE", str(folder))
        yield folder


@pytest.fixture(scope="module")
def friction():
    return rootwright.load("pipe_friction")


@pytest.fixture(scope="module", params=["c", "python"])
def lambert(request):
    return rootwright.load("lambert_w", target=request.param, order=2)


def w_slopes(x):
    """W, dW/dx and d2W/dx2: SciPy's lambertw; NIST Digital Library of Mathematical Functions, 4.13.4, differentiated."""
    w = lambertw(x).real
    return w, 1/(np.exp(w)*(1 + w)), -(2 + w)/(np.exp(2*w)*(1 + w)**3)


# -- calls


def test_numbers_give_numbers_by_the_names_of_the_spec(friction):
    """Friction factor at Re = 1e5, rel = 1e-4: fluids (Python library), documented example of Colebrook(1E5, 1E-4)."""
    s = friction(1e5, 1e-4)
    assert abs(s.f - 0.018513866077471648) < 4e-17
    assert {name: type(value) for name, value in vars(s).items()} == {
        "y": float, "f": float, "error_bound": float, "status": int, "iterations": int}
    assert s == friction(rel=1e-4, Re=1e5) == friction(100000, rel=np.float64(1e-4)) == friction(np.array(1e5), 1e-4)


def test_arrays_broadcast_and_every_point_has_the_bits_of_its_own_call(friction):
    re, rel = np.geomspace(4e3, 1e8, 7).reshape(7, 1), np.array([0.0, 1e-4, 0.03])
    s = friction(re, rel)
    assert all(value.shape == (7, 3) for value in vars(s).values())
    for i, j in np.ndindex(7, 3):
        single = friction(re[i, 0], rel[j])
        assert all(getattr(s, name)[i, j] == value for name, value in vars(single).items())


def test_any_numbers_in_any_layout_are_read(lambert):
    x = np.arange(1.0, 13.0).reshape(3, 4)
    w, _, _ = w_slopes(x)
    for given, wanted in ((x, w), (x.T, w.T), (x[::-1, ::-2], w[::-1, ::-2]), (x.astype(np.float32), w),
                          (x.astype(int), w), (x.astype(object), w), (x.tolist(), w), (x[:, :1], w[:, :1]),
                          (x[:0], w[:0]), (np.broadcast_to(2.0, (2, 2)), w_slopes(2.0)[0])):
        found = lambert(given)
        np.testing.assert_allclose(found.w, np.broadcast_to(wanted, found.w.shape), rtol=4e-15)
        assert found.w.shape == np.shape(given)
    packed = np.zeros(3, np.dtype([("tag", "i1"), ("x", float)]))
    packed["x"] = 1.0, 2.0, 3.0
    np.testing.assert_allclose(lambert(packed["x"]).w, w[0, :3], rtol=4e-15)


@pytest.mark.parametrize("call, words", [
    (lambda c: c(1e5), "rel is missing"), (lambda c: c(1e5, 1e-4, 3.0), "3 given"),
    (lambda c: c(1e5, Re=1e5, rel=0), "twice"), (lambda c: c(1e5, roughness=0), "'roughness'"),
    (lambda c: c("1e5", 0), "real numbers"), (lambda c: c(1e5, 1j), "real numbers"),
    (lambda c: c(1e5, None), "real numbers"), (lambda c: c(np.ones(3), np.ones(4)), r"Re \(3,\), rel \(4,\)"),
    (lambda c: c(1e5, 0, errors="ignore"), '"nan" or "raise"'), (lambda c: c(1e5, 0, threads=0), "whole number"),
    (lambda c: c.tangent(1e5, 0), "p_dot is missing"), (lambda c: c.tangent(1e5, 0, p_dot=1.0), "last axis"),
    (lambda c: c.adjoint(1e5, 0, y_bar={"Re": 1.0}), "'Re' is not one of y, f"),
    (lambda c: c.hessian(1e5, 0), "order=2"), (lambda c: c(1e5, 0, out={"z": 1}), "out takes"),
    (lambda c: c(np.ones(2), 0, out={"y": np.ones(3)}), r"shape \(2,\)"),
    (lambda c: c(np.ones(2), 0, out={"y": np.ones(2, int)}), "int64"), (lambda c: c(1e5, 0, out=[1]), "out takes"),
])
def test_a_wrong_call_is_told_in_words(friction, call, words):
    with pytest.raises((TypeError, ValueError), match=words):
        call(friction)


def test_a_warm_start_saves_iterations_and_moves_the_root_by_no_more_than_its_error_bound(friction):
    re = np.geomspace(4e3, 1e8, 200)
    cold = friction(re, 0.001)
    for start in (cold, cold.y, cold.y*(1 + 1e-9)):
        warm = friction(re, 0.001, start=start)
        assert (abs(warm.y - cold.y) <= cold.error_bound + warm.error_bound).all()
        assert warm.iterations.sum() < cold.iterations.sum()
    assert friction(1e5, 0.001, start=friction(1e5, 0.001)).iterations <= friction(1e5, 0.001).iterations
    assert friction(1e5, 0.001, start=[3.0, 5.0]).y.shape == (2,)


def test_results_are_written_where_the_caller_wants_them(friction):
    re = np.geomspace(4e3, 1e8, 50)
    plain = friction(re, 0.001)
    f, y, status = np.empty(50), np.empty(100)[::2], np.empty(50, np.int64)
    s = friction(re, 0.001, out={"f": f, "y": y, "status": status})
    assert s.f is f and s.y is y and s.status is status
    assert (f == plain.f).all() and (y == plain.y).all() and (s.error_bound == plain.error_bound).all()
    assert not status.any()
    again = friction(re[::-1], 0.001, out=s)
    assert again.f is f and (f == plain.f[::-1]).all()
    jac = np.empty((50, 2, 2))
    assert friction.jacobian(re, 0.001, out=jac) is jac and (jac == friction.jacobian(re, 0.001)).all()


def test_results_may_be_written_over_the_parameters_they_come_from(friction):
    re = np.geomspace(4e3, 1e8, 3001)
    wanted = friction(re[::-1], 0.001).y
    friction(re[::-1], 0.001, out={"y": re}, threads=2)
    assert (re == wanted).all()


def test_a_point_without_a_root_is_nan_and_says_why(lambert):
    s = lambert([1.0, math.nan, -0.5])
    assert np.isfinite(s.w).tolist() == [True, False, False] and s.status.tolist() == [0, -1, -2]
    assert np.isnan(lambert.jacobian([1.0, math.nan])).ravel().tolist() == [False, True]
    assert math.isnan(lambert(math.inf).w)


def test_unsolved_points_are_raised_where_the_caller_asks_for_that(lambert):
    with pytest.raises(rootwright.Unsolved, match=r"2 of 3 points .*first at \[1\]: x = nan") as caught:
        lambert([1.0, math.nan, -0.5], errors="raise")
    assert caught.value.status.tolist() == [0, -1, -2] and isinstance(caught.value, ArithmeticError)
    for call in (lambert, lambert.jacobian, lambert.hessian):
        with pytest.raises(rootwright.Unsolved, match="no_sign_change"):
            call(-0.5, errors="raise")
    with pytest.raises(rootwright.Unsolved, match="roots given"):
        lambert.jacobian(1.0, root=math.nan, errors="raise")
    assert lambert([1.0, 2.0], errors="raise").status.tolist() == [0, 0]


def test_threads_share_a_batch_and_leave_every_bit(friction):
    re, rel = np.geomspace(4e3, 1e8, 9001), np.linspace(0, 0.05, 9001)
    for one, many in zip(vars(friction(re, rel)).values(), vars(friction(re, rel, threads=3)).values()):
        assert (one == many).all()
    assert (friction.jacobian(re, rel) == friction.jacobian(re, rel, threads=3)).all()


def test_other_python_threads_run_while_a_batch_is_solved(friction):
    """Ticks of this thread in the middle half of the other's call, which is nearly all C."""
    x, ticks, span = np.geomspace(4e3, 1e8, 400_000), [], []

    def solve():
        span.append(time.perf_counter())
        friction(x, 0.001)
        span.append(time.perf_counter())

    thread = threading.Thread(target=solve)
    thread.start()
    while thread.is_alive():
        ticks.append(time.perf_counter())
        time.sleep(0.001)
    begin, end = span
    assert any(begin + 0.25*(end - begin) < tick < end - 0.25*(end - begin) for tick in ticks)


# -- derivatives


def test_derivatives_have_the_documented_shapes_and_values(lambert):
    x = np.array([[-0.36, -0.1, 0.5], [1.0, 20.0, 999.0]])
    w, slope, curvature = w_slopes(x)
    for given in (x, x[1, 1], x[:0]):
        shape = np.shape(given)
        assert lambert.jacobian(given).shape == (*shape, 1, 1) and lambert.hessian(given).shape == (*shape, 1, 1, 1)
        assert lambert.tangent(given, p_dot=[1.0]).shape == lambert.adjoint(given, y_bar=[1.0]).shape == (*shape, 1)
    np.testing.assert_allclose(lambert.jacobian(x)[..., 0, 0], slope, rtol=1e-13)
    np.testing.assert_allclose(lambert.hessian(x)[..., 0, 0, 0], curvature, rtol=1e-12)
    np.testing.assert_allclose(lambert.tangent(x, p_dot={"x": 3.0})[..., 0], 3*slope, rtol=1e-13)
    np.testing.assert_allclose(lambert.adjoint(x, y_bar={"w": x})[..., 0], x*slope, rtol=1e-13)
    found = lambert.tangent_adjoint(x, p_dot=[2.0], y_bar=x[..., np.newaxis])
    np.testing.assert_allclose(found[..., 0], 2*x*curvature, rtol=1e-12)


def test_rows_are_results_and_columns_parameters(friction):
    """By hand, from y = -2*log10(rel/3.7 + 2.51*y/Re): with inner = 10^(-y/2) and L = ln 10,
    dy/drel = -2/(3.7*L*inner) / (1 + 2*2.51/(Re*L*inner)), and f = 1/y^2."""
    re, rel = np.array([1e4, 1e6]), np.array([[1e-4], [1e-2], [0.05]])
    s, jac = friction(re, rel), friction.jacobian(re, rel)
    inner = 10**(-s.y/2)
    denominator = 1 + 2*2.51/(re*math.log(10)*inner)
    to_rel = -2/(3.7*math.log(10)*inner)/denominator
    to_re = 2*2.51*s.y/(re**2*math.log(10)*inner)/denominator
    assert jac.shape == (3, 2, 2, 2)
    for (i, j), wanted in {(0, 0): to_re, (0, 1): to_rel, (1, 0): -2*to_re/s.y**3, (1, 1): -2*to_rel/s.y**3}.items():
        np.testing.assert_allclose(jac[..., i, j], wanted, rtol=1e-12)
    p_dot, y_bar = np.array([3.0, 0.5]), np.array([0.25, -2.0])
    np.testing.assert_allclose(friction.tangent(re, rel, p_dot=p_dot), jac@p_dot, rtol=1e-13)
    np.testing.assert_allclose(friction.adjoint(re, rel, y_bar=y_bar), y_bar@jac, rtol=1e-13)
    np.testing.assert_allclose(friction.tangent(re, rel, p_dot={"rel": re}), jac[..., 1]*re[:, np.newaxis], rtol=1e-13)


def test_many_directions_at_one_point_give_the_jacobian(friction):
    assert (friction.tangent(1e5, 1e-4, p_dot=np.eye(2)).T == friction.jacobian(1e5, 1e-4)).all()
    assert (friction.adjoint(1e5, 1e-4, y_bar=np.eye(2)) == friction.jacobian(1e5, 1e-4)).all()


def test_given_roots_are_used_and_nothing_is_solved_again(lambert):
    x = np.array([0.5, 2.0])
    s = lambert(x)
    assert (lambert.jacobian(x, root=s) == lambert.jacobian(x)).all()
    assert (lambert.jacobian(x, root=s.w) == lambert.jacobian(x)).all()
    # The formula 1/(exp(w)*(1 + w)) at a root that is off by one part in 10^9.
    off = s.w*(1 + 1e-9)
    found = lambert.jacobian(x, root=off)[:, 0, 0]
    np.testing.assert_allclose(found, 1/(np.exp(off)*(1 + off)), rtol=1e-14)
    assert (abs(found/lambert.jacobian(x)[:, 0, 0] - 1) > 1e-10).all()


def test_second_derivatives_are_there_in_both_targets_and_symmetric():
    results = [rootwright.load("kepler", target=target, order=2).hessian([0.1, 0.7], 0.5) for target in ("c", "python")]
    assert results[0].shape == (2, 4, 2, 2) and (results[0] == results[1]).all()
    assert (results[0] == results[0].swapaxes(-1, -2)).all()


def test_order_0_solves_without_derivatives():
    closure = rootwright.load("lambert_w", order=0)
    assert closure(1.0).w == rootwright.load("lambert_w")(1.0).w
    with pytest.raises(TypeError, match="order=1"):
        closure.jacobian(1.0)


# -- what a closure says of itself


def test_signature_and_documentation_come_from_the_spec(friction):
    assert str(inspect.signature(friction)) == "(Re, rel, *, start=None, out=None, threads=1, errors='nan')"
    options = "root=None, out=None, threads=1, errors='nan'"
    assert str(inspect.signature(friction.tangent)) == f"(Re, rel, *, p_dot, {options})"
    text = inspect.getdoc(friction)
    for words in ("Darcy friction factor", "y = -2*log10(inner)", "Reynolds number, range 4.0e3 to 1.0e8", "1/y^2",
                  "Colebrook", "Caution: Turbulent flow only", "-2 no_sign_change", f"jacobian(Re, rel, *, {options})"):
        assert words in text
    assert "hessian" not in text and "hessian" in inspect.getdoc(rootwright.load("kepler", order=2))


def test_the_representation_shows_formula_units_and_ranges():
    assert repr(rootwright.load("kepler")) == """\
kepler(e, M) -> E, E_deg, nu, r_a
  Eccentric anomaly of an elliptic orbit (Kepler's equation)
    E - e*sin(E) = M
      half_shape = e/(1 + sqrt(1 - e^2))
      degrees = 180/pi
  e      0.0 to 0.999    eccentricity
  M      0.0 to 2*pi     mean anomaly [rad]
  E      [M - 1, M + 1]  eccentric anomaly [rad]
  E_deg  = E*degrees     eccentric anomaly in degrees [deg]
  nu     = E + 2*atan(half_shape*sin(E)/(1 - half_shape*cos(E)))  true anomaly [rad]
  r_a    = 1 - e*cos(E)  distance over semi-major axis"""


def test_parameters_named_like_options_keep_their_names(tmp_path):
    (tmp_path/"clash.toml").write_text(CLASH)
    closure = rootwright.load(tmp_path/"clash.toml")
    assert closure(start=1.0, out=2.0, start__=4.0).threads == 5.0
    filled = np.empty(2)
    closure([1.0, 2.0], 1.0, out__={"threads": filled})
    assert filled.tolist() == [3.0, 4.0]
    assert "start__=None" in str(inspect.signature(closure))
    assert "<U+001B>" in repr(closure) and "\x1b" not in repr(closure) + closure.__doc__


def test_closures_solutions_and_errors_can_be_pickled(friction):
    again = pickle.loads(pickle.dumps(friction))
    s = pickle.loads(pickle.dumps(friction(1e5, 1e-4)))
    assert again(1e5, 1e-4) == s == friction(1e5, 1e-4) and repr(again) == repr(friction)


def test_importing_the_package_loads_nothing_heavy():
    script = "import sys, rootwright; rootwright.__version__; print(*sys.modules)"
    loaded = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True).stdout.split()
    assert not {"numpy", "cffi", "flint", "jinja2", "rootwright.pipeline"} & set(loaded)
    assert "rootwright.version" in loaded


def test_a_spec_that_cannot_be_used_is_refused_with_its_place_and_a_cure(tmp_path):
    (tmp_path/"clash.toml").write_text(CLASH.replace("2*out", "2*oout"))
    with pytest.raises(rootwright.SpecError, match=r"clash.toml:12:\d+: .*oout(.|\n)*did you mean out") as caught:
        rootwright.load(tmp_path/"clash.toml")
    assert len(caught.value.diagnostics) == 1
    with pytest.raises(rootwright.SpecError, match="no such file"):
        rootwright.load(tmp_path/"none.toml")
    for options in ({"target": "fortran"}, {"order": 3}):
        with pytest.raises(ValueError, match="it can be"):
            rootwright.load("kepler", **options)


def test_without_a_compiler_it_works_through_python_and_says_so_once(monkeypatch, friction):
    def find_compiler():
        raise build.NoCompiler("no C compiler found")

    monkeypatch.setattr(build, "find_compiler", find_compiler)
    pipeline._say_slower.cache_clear()
    with pytest.warns(RuntimeWarning, match="no C compiler found.*in Python") as told:
        closure = rootwright.load("pipe_friction")
        rootwright.load("kepler")
    assert len(told) == 1 and told[0].filename == __file__
    assert closure.target == "python" and "Python target" in repr(closure)
    re = np.geomspace(4e3, 1e8, 5).reshape(5, 1)
    assert (closure(re, [0, 0.01]).f == friction(re, [0, 0.01]).f).all()
    assert (closure.jacobian(re, [0, 0.01], threads=2) == friction.jacobian(re, [0, 0.01])).all()
    with pytest.raises(build.NoCompiler):
        rootwright.load("kepler", target="c")


def test_a_compiler_that_fails_is_no_obstacle_either(monkeypatch, tmp_path):
    (tmp_path/"broken").write_text("#!/bin/sh\necho no headers here >&2; exit 1\n")
    (tmp_path/"broken").chmod(0o755)
    monkeypatch.setenv("CC", str(tmp_path/"broken"))
    pipeline._say_slower.cache_clear()
    with pytest.warns(RuntimeWarning, match="no headers here"):
        closure = rootwright.load("lambert_w")
    assert closure.target == "python" and abs(closure(1.0).w - lambertw(1.0).real) < 1e-15
    with pytest.raises(build.BuildFailed):
        rootwright.load("lambert_w", target="c")


# -- with SciPy


def test_solve_ivp_takes_the_exact_jacobian(friction):
    """Water falling down a rough pipe: u' = g - f*u^2/(2*D), f of Re = u*D/nu. At the terminal velocity f*u^2 = 2*g*D,
    so Re*sqrt(f) is known and Colebrook's formula gives f, and with it u, without iteration (White, Fluid Mechanics:
    the problem where the head loss is known)."""
    g, d, nu, rel = 9.81, 0.1, 1.0e-6, 2.0e-4

    def acceleration(_, u):
        return g - friction(u*d/nu, rel).f*u**2/(2*d)

    def jacobian(_, u):
        f, f_re = friction(u[0]*d/nu, rel).f, friction.jacobian(u[0]*d/nu, rel)[1, 0]
        return [[-(f*u[0] + f_re*d/nu*u[0]**2/2)/d]]

    run = solve_ivp(acceleration, (0.0, 60.0), [0.1], method="Radau", jac=jacobian, rtol=1e-10, atol=1e-10)
    known = d*math.sqrt(2*g*d)/nu
    terminal = math.sqrt(2*g*d)*-2*math.log10(rel/3.7 + 2.51/known)
    assert run.success and abs(run.y[0, -1] - terminal) < 1e-8*terminal


def test_least_squares_takes_the_exact_jacobian(friction):
    """A roughness, and the scale of a flow meter, from friction factors. The data come from
    Colebrook's formula, iterated by substitution (the textbook way), not from the closure."""
    scale, re = 1.25, np.geomspace(2e4, 5e6, 12)
    rel = 1.5e-3
    y = np.full(12, 5.0)
    for _ in range(100):
        y = -2*np.log10(rel/3.7 + 2.51*y/(re*scale))
    chain = np.stack([np.ones(12), re], axis=-1)
    fit = least_squares(lambda q: friction(re*q[1], q[0]).y - y, [1e-2, 1.0], x_scale=[1e-3, 1.0],
                        jac=lambda q: friction.jacobian(re*q[1], q[0])[:, 0, ::-1]*chain,
                        xtol=1e-15, ftol=1e-15, gtol=1e-15)
    np.testing.assert_allclose(fit.x, [rel, scale], rtol=1e-9)


def test_minimize_takes_exact_gradients_and_hessians():
    """The orbit that has a true anomaly of 2 rad at a distance of 0.9 semi-major axes: 0.9*(1 + e*cos(2)) = 1 - e^2,
    from the equation of the ellipse; M follows from E = 2*atan(sqrt((1 - e)/(1 + e))*tan(1)) and Kepler's equation."""
    kepler = rootwright.load("kepler", order=2)
    wanted = np.array([0.0, 0.0, 2.0, 0.9])

    def weights(q):
        s = kepler(*q)
        return np.array([0.0, 0.0, s.nu, s.r_a]) - wanted

    def hessian(q):
        jac = kepler.jacobian(*q)[2:]
        return jac.T@jac + np.einsum("i,ijk->jk", weights(q), kepler.hessian(*q))

    fit = minimize(lambda q: weights(q)@weights(q)/2, [0.4, 1.0], method="trust-exact", options={"gtol": 1e-13},
                   jac=lambda q: kepler.adjoint(*q, y_bar=weights(q)), hess=hessian)
    b = 0.9*math.cos(2)
    e = (-b + math.sqrt(b*b - 4*(0.9 - 1)))/2
    anomaly = 2*math.atan(math.sqrt((1 - e)/(1 + e))*math.tan(1))
    np.testing.assert_allclose(fit.x, [e, anomaly - e*math.sin(anomaly)], rtol=1e-9)
