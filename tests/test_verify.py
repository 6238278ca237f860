"""The reference, what `verify` holds modules to, and that it catches what is planted."""

import json
import math

import mpmath as mp
import pytest
from nasty_specs import nasty
from problem_specs import alefeld_potra_shi, scipy_collection, spec
from rootwright import pipeline
from rootwright.binding.module import load
from rootwright.calculus.balls import ball
from rootwright.emit.assemble import assemble
from rootwright.evidence.limits import LIMITS, ROOT_NOISE, ROOT_ULPS
from rootwright.evidence.noise import noise
from rootwright.evidence.points import choose
from rootwright.evidence.reference import NotSettled, Reference
from rootwright.evidence.verify import hold, render, to_json, verify
from soak import soak

POINTS = 12                     # of each shipped spec
PROBLEMS = (*alefeld_potra_shi(), *scipy_collection(), *nasty())


def _closure(text):
    return pipeline.closure(text.encode(), "test.toml")[0]


def _reference(equation, bracket, parameters, **keys):
    return Reference(_closure(spec("test", equation, bracket, parameters, **keys)).model)


def _shipped(name, order=1):
    return pipeline.promising(name, order)


def _python(closure):
    return load(closure, assemble(closure, "python"), "python")


def _digits(exact):
    """An exact ball as a number of mpmath."""
    mantissa, exponent = exact.man_exp()
    return mp.ldexp(mp.mpf(int(mantissa)), int(exponent))


# -- the reference


def test_a_certified_root_agrees_with_another_library_to_fifty_digits():
    """mpmath's own Lambert W function."""
    reference = _reference("x*exp(x) = a", ("0", "a"), {"a": (0.5, 100)})
    for a in (0.5, 1.0, 37.25):
        root = reference.root({"a": a})
        with mp.workdps(70):
            true = mp.lambertw(mp.mpf(a)).real
            assert abs(_digits(root.mid) - true) < abs(true)*mp.mpf(10)**-50
            assert _digits(root.radius) < abs(true)*mp.mpf(10)**-50


def test_certified_derivatives_agree_with_the_closed_form():
    """W' = W/(x*(1 + W)), with mpmath's own W; and by the chain rule for an output."""
    reference = _reference("x*exp(x) = a", ("0", "a"), {"a": (0.5, 100)}, outputs={"square": "x^2"})
    root = reference.root({"a": 37.25})
    found = reference.derivatives({"a": 37.25}, root.mid)
    with mp.workdps(40):
        w = mp.lambertw(mp.mpf(37.25)).real
        slope = w/(37.25*(1 + w))
        assert found["x", "a"].value == float(slope)
        assert found["square", "a"].value == float(2*w*slope)


def test_constants_are_the_decimals_written():
    root = _reference("x = a/10 + 0.1", ("0", "1"), {"a": (0, 1)}).root({"a": 0.0})
    with mp.workdps(60):
        assert abs(_digits(root.mid) - mp.mpf("0.1")) < mp.mpf(10)**-50


def test_a_derivative_at_the_edge_of_the_domain_is_taken_from_one_side():
    reference = _reference("x = sqrt(a)^5 + 3*a", ("0", "9"), {"a": (0, 1)})
    found = reference.derivatives({"a": 0.0}, reference.root({"a": 0.0}).mid)
    assert found["x", "a"].value == pytest.approx(3.0, abs=1e-15)


@pytest.mark.parametrize("equation", ["x = 1 + a^2", "x = 1 + 0.5*a*tanh(a)", "x = 1 + a*abs(a)"])
def test_a_derivative_that_is_zero_is_no_kink(equation):
    reference = _reference(equation, ("0", "9"), {"a": (-1, 1)})
    found = reference.derivatives({"a": 0.0}, reference.root({"a": 0.0}).mid)
    assert found["x", "a"].value == pytest.approx(0.0, abs=1e-25)


@pytest.mark.parametrize("equation, why", [
    ("x = 2 + abs(a)", "kink"), ("x = 2 + sqrt(a)", "unbounded"), ("x = 2 + cbrt(a)", "unbounded"),
    ("x = 2 + sqrt(abs(a))", "unbounded"), ("x = 2 + a^1.1", "undefined")])
def test_where_there_is_no_derivative_the_reference_says_why(equation, why):
    reference = _reference(equation, ("0", "9"), {"a": (-1, 1)})
    derivative = reference.derivatives({"a": 0.0}, reference.root({"a": 0.0}).mid)["x", "a"]
    assert (derivative.value, derivative.why) == (None, why)


@pytest.mark.parametrize("equation, bracket, a, kind, root", [
    ("(x - a)^2", ("a", "3"), 1.0, "exact", 1.0),
    ("(x^2 - a)^2", ("sqrt(a)", "3"), 2.0, "touching", math.sqrt(2.0)),
    ("x^2 - a", ("sqrt(a)", "3"), 2.0, "crossing", math.sqrt(2.0)),
    ("x*tanh(100*x) - a", ("a", "3"), 1.0, "crossing", 1.0),        # 1e-86 inside the end
    ("x*tanh(9999*x) - a", ("a", "3"), 1.0, "crossing", 1.0),       # 1e-8685 inside the end
    ("(x - a)^3", ("0", "3"), 1.25, "crossing", 1.25),
    ("x*(1 + a)", ("-1", "2"), 1.0, "exact", 0.0),
])
def test_a_root_at_an_end_or_a_multiple_one_is_certified(equation, bracket, a, kind, root):
    found = _reference(equation, bracket, {"a": (0, 4)}).root({"a": a})
    assert (found.kind, float(found.mid)) == (kind, root)


def test_a_root_a_rounding_beyond_the_bracket_is_found_there():
    """The bracket ends at 3/10 exactly, the root is the double above it."""
    reference = _reference("x = b", ("0", "0.3"), {"b": (0, 1)})
    with pytest.raises(NotSettled):
        reference.root({"b": math.nextafter(0.3, 1.0)})
    found = reference.root({"b": math.nextafter(0.3, 1.0)}, 0.3, 1e-15)
    assert (found.kind, float(found.mid)) == ("beyond", math.nextafter(0.3, 1.0))


@pytest.mark.parametrize("equation", ["where(x < 1, -a, a) + x/100", "a/(x - 1/3)", "a + x^2"])
def test_the_reference_takes_no_step_or_pole_for_a_root(equation):
    with pytest.raises(NotSettled):
        _reference(equation, ("0", "4"), {"a": (1, 2)}).root({"a": 1.0})


def test_the_reference_finds_the_154_roots_from_the_brackets_alone():
    for problem in alefeld_potra_shi():
        if problem.id == "aps13":           # zero in a whole neighbourhood of the root
            continue
        reference = Reference(_closure(problem.text).model)
        for point in problem.points:
            root = reference.root({name: float(text) for name, text in point.given.items()})
            with mp.workdps(60):
                true = mp.mpf(point.root)
                assert abs(_digits(root.mid) - true) <= abs(true)*mp.mpf(10)**-48, point.given


def test_a_residual_that_is_undefined_everywhere_has_no_root():
    with pytest.raises(NotSettled, match="undefined"):
        _reference("x + sqrt(-a)", ("-9", "4"), {"a": (1, 2)}).root({"a": 1.0})


@pytest.mark.parametrize("equation, root, size", [
    ("x*x - 3", 3**0.5, math.ulp(3.0)/(2*3**0.5)),      # one product; the difference is zero at the root
    ("x - 0.1", 0.1, math.ulp(0.1)),                    # a rounded constant
    ("x - 0.25", 0.25, 0.0),                            # a constant that is exact
    ("2*(x/3) - 1", 1.5, math.ulp(0.5)*3 + math.ulp(1.0)*1.5),
])
def test_the_noise_counts_every_operation_and_every_rounded_constant(equation, root, size):
    reference = _reference(equation + " + 0*a", ("0", "9"), {"a": (0, 1)})
    found, _ = noise(reference.place({"a": 0.0}), ball(root))
    assert found == pytest.approx(size, rel=1e-9, abs=1e-30)


# -- the shipped specs


@pytest.mark.parametrize("name", pipeline.shipped())
def test_a_shipped_spec_holds_its_limits_at_sampled_points(name):
    closure = _shipped(name)
    report = hold(closure, {"python": _python(closure)}, points=POINTS)
    assert not report.failed, render(report)
    assert report.corners + report.random == POINTS
    assert all(set(words) <= {"solved", "kink", "outside_range"} for words in report.statuses.values()), report.statuses


@pytest.mark.parametrize("problem", PROBLEMS, ids=lambda problem: problem.id)
def test_a_problem_holds_the_limits_wherever_it_has_a_root(problem):
    closure, built = _pair(problem.text)
    points = [{name: float(text) for name, text in point.given.items()} for point in problem.points]
    report = hold(closure, built, points)
    missed = [f for f in report.findings if f.key != "solved" or "finds none either" not in f.what]
    assert not missed, render(report)


def test_c_and_python_hold_their_limits_and_agree():
    report = verify(_shipped("pipe_friction", order=2), points=40, seed=3)
    assert not report.failed, render(report)
    assert report.targets == ("c", "python")
    assert {measure.key for measure in report.measures} == set(LIMITS)


def test_error_bound_is_no_gross_overestimate():
    report = soak("pipe_friction", 200)
    assert 0.5 < report.overestimate < 20.0


# -- what is planted is caught


class Planted:
    """A module with one thing wrong."""

    def __init__(self, module, **replaced):
        self.module = module
        self.replaced = replaced

    def __getattr__(self, name):
        function = getattr(self.module, name)
        return (lambda *args: self.replaced[name](function(*args))) if name in self.replaced else function


def _planted(name="lambert_w", points=20, **replaced):
    closure = _shipped(name)
    return hold(closure, {"python": Planted(_python(closure), **replaced)}, points=points)


def _changed(change):
    """solve_jacobian with its point changed."""
    def solve_jacobian(solved):
        change(solved[0])
        return solved
    return solve_jacobian


def _keys(report):
    return {finding.key for finding in report.findings}


def test_an_untouched_module_passes_where_the_planted_ones_fail():
    assert not _planted().failed


def test_a_wrong_published_value_is_caught():
    data, filename = pipeline.find("lambert_w")
    closure, _ = pipeline.closure(data.replace(b"0.56714329", b"0.56714339"), filename)
    report = hold(closure, {"python": _python(closure)}, points=4)
    assert _keys(report) == {"published"}
    assert [value.passed for value in report.published].count(False) == 1
    assert "DIFFERS" in render(report)


def test_a_root_off_by_twenty_ulp_is_caught():
    def off(r):
        r.y[0] += 20*math.ulp(r.y[0])
    report = _planted("pipe_friction", solve_jacobian=_changed(off))
    assert _keys(report) >= {"root", "bound"}


@pytest.mark.parametrize("field", ["root", "error_bound"])
def test_a_point_called_solved_that_holds_no_number_is_caught(field):
    def lose(r):
        if field == "root":
            r.y = [math.nan]*len(r.y)
        else:
            r.error_bound = math.nan
    assert _keys(_planted(solve_jacobian=_changed(lose))) == {"root"}


def test_an_error_bound_a_tenth_of_its_size_is_caught():
    def shrink(r):
        r.error_bound /= 10
    report = _planted(solve_jacobian=_changed(shrink))
    assert _keys(report) == {"bound"}


def test_derivatives_wrong_by_a_millionth_are_caught():
    def wrong(solved):
        return solved[0], [[entry*(1 + 1e-6) for entry in row] for row in solved[1]]
    report = _planted("pipe_friction", solve_jacobian=wrong)
    assert _keys(report) == {"derivative"}


def test_an_adjoint_that_contradicts_the_tangent_is_caught():
    report = _planted("pipe_friction", adjoint=lambda p_bar: [value*(1 + 1e-9) for value in p_bar])
    assert _keys(report) == {"identity"}


def test_a_wrong_output_is_caught():
    def wrong(r):
        r.y[1] *= 1 + 1e-13
    report = _planted("pipe_friction", solve_jacobian=_changed(wrong))
    assert _keys(report) == {"output"}


def test_an_unsolved_point_is_caught_with_the_root_it_missed():
    def give_up(r):
        r.y, r.status = [math.nan]*len(r.y), -2
    report = _planted(solve_jacobian=_changed(give_up))
    assert _keys(report) == {"solved"}
    assert "a root is at" in report.findings[0].what


def test_a_bracket_without_a_root_is_a_finding():
    report = hold(*_pair(spec("test", "x = a", ("0", "1"), {"a": (0.5, 2)})), points=8)
    assert _keys(report) == {"solved"}
    assert "the reference finds none either" in report.findings[0].what


def test_different_statuses_in_c_and_python_are_caught():
    def call_it_flat(r):
        r.status = 2
    closure = _shipped("lambert_w")
    module = _python(closure)
    report = hold(closure, {"c": Planted(module, solve_jacobian=_changed(call_it_flat)), "python": module}, points=4)
    assert "targets" in _keys(report)


def test_numbers_as_derivatives_of_a_flat_root_are_caught():
    def call_it_flat(r):
        r.status = 2
    assert _keys(_planted(solve_jacobian=_changed(call_it_flat))) == {"derivative"}


def test_a_kink_that_is_not_reported_is_caught():
    def call_it_smooth(r):
        r.status &= ~4
    closure, built = _pair(spec("test", "x = 2 + abs(a)", ("0", "9"), {"a": (0, 1)}))
    assert not hold(closure, built, points=4).failed
    planted = Planted(built["python"], solve_jacobian=_changed(call_it_smooth))
    assert _keys(hold(closure, {"python": planted}, points=4)) == {"kink"}


def _pair(text):
    closure = _closure(text)
    return closure, {"python": _python(closure)}


# -- the report


def test_a_finding_prints_its_point_as_a_table_that_eval_reads():
    def off(r):
        r.y[0] += 20*math.ulp(r.y[0])
    report = _planted("pipe_friction", solve_jacobian=_changed(off))
    lines = [text.strip() for text in render(report).splitlines()]
    header = lines.index("Re,rel")
    assert [float(cell) for cell in lines[header + 1].split(",")] == list(report.findings[0].point.values())


def test_the_report_is_plain_json_with_the_limits_that_were_enforced():
    data = json.loads(json.dumps(to_json(_planted())))
    assert data["failed"] is False
    assert {measure["key"]: measure["limit"] for measure in data["measures"]} == {
        key: limit.worst for key, limit in LIMITS.items() if key not in ("output", "targets", "second", "product")}


def test_the_accuracy_that_the_module_states_is_the_one_enforced():
    manual = " ".join(assemble(_shipped("lambert_w"), "python")["lambert_w.py"].split())
    assert f"within {ROOT_ULPS:g} units in the last place plus {ROOT_NOISE:g} times its noise" in manual


def test_without_a_c_compiler_the_python_module_is_verified_and_the_report_says_so(monkeypatch):
    monkeypatch.setenv("PATH", "")
    monkeypatch.delenv("CC", raising=False)
    report = verify(_shipped("lambert_w"), points=4)
    assert report.targets == ("python",)
    assert "no C compiler" in render(report)
    assert not report.failed


def test_the_same_seed_gives_the_same_points_and_all_meet_the_requirements():
    closure = _shipped("catenary")
    corners, inside = choose(closure, 40, 5)
    assert (corners, inside) == choose(closure, 40, 5)
    assert inside != choose(closure, 40, 6)[1]
    assert corners and all(0.0005*point["L"] <= point["sag"] <= 2*point["L"] for point in corners + inside)


def test_progress_is_reported_and_cleared():
    lines = []
    closure = _shipped("lambert_w")
    hold(closure, {"python": _python(closure)}, points=4, progress=lines.append)
    assert lines[0].startswith("lambert_w: 0 of ") and lines[-1] == ""


def test_a_spec_without_a_point_to_try_is_not_said_to_hold():
    text = b'format = 1\nname = "nowhere"\n[parameters]\na = { range = [1, 2] }\n[domain]\nrequire = ["a > 3"]\n' \
           b'[unknown]\nname = "x"\nbracket = ["0", "5"]\n[residual]\nequation = "x = a"\n'
    closed, _ = pipeline.closure(text, "nowhere.toml")
    report = verify(closed, points=20)
    assert report.failed and "nothing to verify" in render(report)
