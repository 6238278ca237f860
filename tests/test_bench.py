"""The benchmark: every row computes what it says, the tape counts what it should, the page and the JSON say it all. No
time is asserted."""

import io
import json
import math
import subprocess
from importlib import resources

import cffi
import mpmath
import numpy as np
import pytest
from scipy import stats

from rootwright import cli, pipeline
from rootwright.binding.build import FLAGS
from rootwright.evidence.bench import benchmark as bench
from rootwright.evidence.bench import goals, page, rivals
from rootwright.evidence.bench.build import build
from rootwright.evidence.bench.judge import judge
from rootwright.evidence.bench.measure import crew
from rootwright.evidence.bench.pitfalls import pitfalls
from rootwright.evidence.bench.problem import pose
from rootwright.evidence.bench.rows import BY_KEY, LIMIT, ROWS, make, solver
from rootwright.evidence.bench.statistics import ratio, spread

SHARP = 1e-12                        # derivatives by the implicit rule
THROUGH = 1e-7                       # through an iteration that converged
DIFFERENCES = {"one_sided": (1e-5, 0.1), "central": (1e-7, 1e-3)}      # median, worst


def closed(name):
    return pipeline.promising(name)


@pytest.fixture(scope="module")
def friction(tmp_path_factory):
    """(Problem, Built) of a shipped spec, small."""
    closure = closed("pipe_friction")
    built = build(closure, pipeline.plan(closure), tmp_path_factory.mktemp("friction"))
    return pose(closure, solver(built, closure), points=40, checked=10), built


@pytest.fixture(scope="module")
def judged(friction):
    return judge(*friction)


@pytest.fixture(scope="module")
def facts():
    """A small run of the whole, two processes, without the rows that need other people's libraries."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(rivals, "_need", refuse)
        closure = closed("lambert_w")
        with crew(2) as processes:
            return bench.benchmark(closure, pipeline.plan(closure), processes, seconds=0.0, points=16, checked=4)


def refuse(module):
    raise rivals.Absent("not installed")


@pytest.mark.parametrize("row", [row for row in ROWS if row.jacobian], ids=lambda row: row.key)
def test_every_row_computes_the_derivative_within_its_error(judged, row):
    found = judged[row.key]
    if found.absent:
        pytest.skip(f"{row.title}: {found.absent}")
    median, worst = DIFFERENCES.get(row.key, (SHARP, THROUGH if row.group == "through" else SHARP))
    assert found.failures == 0
    assert found.median <= median and found.worst <= worst
    assert found.root <= 1e-14


def test_differences_are_far_from_the_digits_of_the_implicit_rule(judged):
    assert judged["one_sided"].median > 1e3*judged["jacobian"].median
    assert judged["central"].median > 10.0*judged["jacobian"].median


@pytest.mark.parametrize("key", ["tape", "tape_forward", "dual"])
def test_the_loop_over_other_numbers_is_the_plain_modules_to_the_last_bit(friction, key):
    problem, built = friction
    module = make(BY_KEY["plain"], problem, built).outcome(len(problem.points))
    through = make(BY_KEY[key], problem, built).outcome(len(problem.points))
    assert np.array_equal(through.y, module.y)


def test_a_dependent_run_computes_the_same(friction):
    problem, built = friction
    for key in ("jacobian", "tape", "brent_c"):
        row = make(BY_KEY[key], problem, built)
        alone = row.outcome(len(problem.points)).y
        row.run(len(problem.points), True)
        assert np.array_equal(row.y, alone)


def test_the_limit_is_the_modules_own_jacobian_at_the_root(friction):
    problem, built = friction
    limit, kernels, module = (make(BY_KEY[key], problem, built).outcome(len(problem.points)).jac
                              for key in (LIMIT, "kernels", "jacobian"))
    assert np.array_equal(limit, kernels)
    assert np.allclose(limit, module, rtol=1e-14, atol=0.0)


def test_the_module_is_the_planned_one_and_the_plain_one_stands_beside_it(friction):
    problem, built = friction
    planned, plain = (make(BY_KEY[key], problem, built).outcome(len(problem.points)) for key in ("solve", "plain"))
    assert np.median(planned.count) < np.median(plain.count)
    assert np.allclose(planned.y, plain.y, rtol=4e-15, atol=0.0)


def test_a_bisection_on_the_tape_has_the_root_and_no_derivative(friction):
    found = pitfalls(*friction)["bisection"]
    assert found["root_worst"] < 1e-14
    assert found["zero"] == found["derivatives"] > 0         # the bracket is constant
    assert found["implicit_worst"] < SHARP


def test_a_derivative_through_an_early_stop_lags_behind_the_root(friction):
    stopped = pitfalls(*friction)["stopped"]
    early = next(row for row in stopped if 1e-12 < row["root_median"] < 1e-3)
    assert early["through_median"] > 10.0*early["root_median"]
    assert early["through_median"] > 10.0*early["implicit_median"]
    assert stopped[-1]["through_median"] < THROUGH


def test_a_where_in_the_loop_poisons_the_forward_sweep(friction):
    found = pitfalls(*friction)["where"]
    assert found["on"]["root_median"] < 1e-14
    assert found["on"]["not_a_number"] == found["on"]["derivatives"] > 0
    assert found["back"]["not_a_number"] == 0 and found["back"]["through_median"] < THROUGH


# -- the tape alone

PROGRAM = """
#include <cmath>
{number}
#include "numbers.hpp"
static real program(const real x[]) {{ const real five = real(2.0) + 3.0; return {text}; }}
extern "C" double run(const double *p, double *gradient, double *forward, long *operations, long *bytes)
{{
    real x[2];
    rw_independent(2, p, x);
    const real y = program(x);
    {sweep}
    return y.value;
}}
"""
TAPE = ('#include "tape.hpp"', """rw_reverse<1>(&y, gradient); rw_forward<2>(1, &y, forward);
    *operations = rw_operations(); *bytes = rw_bytes(rw_operations(), 1);""")
DUAL = ('#define RW_N 2\n#include "dual.hpp"', """for (int j = 0; j < 2; j++) gradient[j] = forward[j] = y.dot[j];
    *operations = *bytes = 0;""")


def run(folder, text, p, kind=TAPE):
    """(value, gradient swept back, gradient swept forward, operations, bytes) of a program of x[0], x[1]."""
    number, sweep = kind
    (folder/"program.cpp").write_text(PROGRAM.format(number=number, text=text, sweep=sweep))
    library = folder/"program.so"
    subprocess.run(["c++", "-std=c++17", "-w", *(flag for flag in FLAGS if "std" not in flag),
                    f"-I{resources.files('rootwright.runtime')}", "program.cpp", "-o", str(library)],
                   cwd=folder, check=True)
    ffi = cffi.FFI()
    ffi.cdef("double run(const double *p, double *gradient, double *forward, long *operations, long *bytes);")
    gradient, forward, counts = ffi.new("double[2]"), ffi.new("double[2]"), ffi.new("long[2]")
    value = ffi.dlopen(str(library)).run(ffi.new("double[2]", p), gradient, forward, counts, counts + 1)
    return value, list(gradient), list(forward), counts[0], counts[1]


def test_the_tape_counts_the_operations_of_a_known_program(tmp_path):
    value, back, on, operations, size = run(tmp_path, "five*x[0]*x[1] + sin(x[0])", [0.5, 3.0])
    assert operations == 4               # two products, the sine, the sum; what is done to constants leaves no record
    assert size == (4 + 3)*(24 + 8)      # and the inputs, and the record of every constant
    assert value == 7.5 + math.sin(0.5)
    assert back == on == [15.0 + math.cos(0.5), 2.5]


OF_A = "exp expm1 sin cos tan asin acos atan sinh cosh tanh asinh atanh erf erfc".split()
OF_B = "sqrt cbrt log log10 log1p acosh".split()
OPERATIONS = {                       # what is taped, and the same in mpmath
    **{f"{name}(a)": lambda a, b, exact=getattr(mpmath, name): exact(a) for name in OF_A},
    **{f"{name}(b)": lambda a, b, exact=getattr(mpmath, name): exact(b) for name in OF_B},
    "fabs(a)": lambda a, b: mpmath.fabs(a), "log2(b)": lambda a, b: mpmath.log(b, 2),
    "hypot(a, b)": lambda a, b: mpmath.hypot(a, b), "atan2(a, b)": lambda a, b: mpmath.atan2(a, b),
    "pow(b, a)": lambda a, b: b**a, "pow(b, 2.5)": lambda a, b: b**2.5, "pow(2.5, a)": lambda a, b: mpmath.mpf(2.5)**a,
    "a + b": lambda a, b: a + b, "a - b": lambda a, b: a - b, "a*b": lambda a, b: a*b, "a/b": lambda a, b: a/b,
    "-a": lambda a, b: -a, "2.0/b": lambda a, b: 2/b, "b/2.0": lambda a, b: b/2, "2.0 - a": lambda a, b: 2 - a,
    "copysign(b, a)": lambda a, b: -b, "ldexp(a, 3)": lambda a, b: 8*a, "fmin(a, b)": lambda a, b: a,
    "fmax(a, b)": lambda a, b: b,
}


@pytest.mark.parametrize("kind", [TAPE, DUAL], ids=["tape", "dual"])
def test_every_operation_has_the_derivative_that_high_precision_finds(tmp_path, kind):
    p = [-0.3, 1.7]
    weighted = [(1.0 + k/8.0, text, exact) for k, (text, exact) in enumerate(OPERATIONS.items())]
    total = " + ".join(f"{weight!r}*({text})" for weight, text, _ in weighted)
    _, back, on, _, _ = run(tmp_path, f"[](const real &a, const real &b) {{ return {total}; }}(x[0], x[1])", p, kind)
    with mpmath.workdps(40):
        exact = [float(mpmath.diff(lambda a, b: sum(weight*value(a, b) for weight, _, value in weighted), p, n))
                 for n in ((1, 0), (0, 1))]
    assert back == pytest.approx(exact, rel=1e-13) and on == pytest.approx(exact, rel=1e-13)


def test_a_sweep_back_passes_over_an_abandoned_quotient(tmp_path):
    text = "[](const real &a) { const real lost = (a - a)/(a - a); (void)lost; return a*a; }(x[0])"
    assert run(tmp_path, text, [3.0, 0.0])[1] == [6.0, 0.0]


# -- ratios

def test_the_interval_of_a_ratio_is_students(facts):
    above, below = [2.0, 2.2, 1.9, 2.4, 2.1], [1.0, 1.05, 1.0, 1.1, 0.9]
    logs = np.log(np.divide(above, below))
    low, high = stats.t.interval(0.95, 4, loc=logs.mean(), scale=stats.sem(logs))
    assert ratio(above, below) == pytest.approx(tuple(np.exp([logs.mean(), low, high])), rel=1e-3)
    assert spread([1.0, 2.0, 4.0]) == 0.75


# -- the page and the JSON

def test_the_json_has_its_members(facts):
    data = json.loads(json.dumps(facts))
    assert {"name", "title", "digest", "environment", "rows", "evaluations", "tape", "pitfalls", "goals",
            "terms", "plan", "wrong"} <= set(data)
    assert [row["key"] for row in data["rows"]] == [row.key for row in ROWS]
    for row in data["rows"]:
        assert {"key", "group", "title", "setting", "absent", "derivative_error", "root_error", "failures",
                "failures_of", "operations", "bytes"} <= set(row)
        if not row["absent"]:
            assert {"ns", "spread", "points", "to_module", "to_limit", "latency"} <= set(row)
            assert row["to_module"]["low"] <= row["to_module"]["value"] <= row["to_module"]["high"]
    assert {"processor", "load", "compiler", "flags", "processes", "rounds", "points"} <= set(data["environment"])


def test_the_page_has_its_sections_and_fits(facts):
    text = page.render(facts)
    for section in ("Cost of a root with all its derivatives", "Accuracy against certified values", "Latency", "Goals",
                    "Where the iterate-through approach goes wrong", "How it was measured", "What each row is"):
        assert f"\n{section}" in text
    assert max(map(len, text.splitlines())) <= page.WIDTH
    assert all(row.title in text for row in ROWS)


def test_rows_without_their_library_are_named_as_not_installed(facts):
    absent = {row["key"]: row["absent"] for row in facts["rows"]}
    text = page.render(facts)
    for key in ("autograd", "jax_forward", "brentq"):
        assert absent[key] == "not installed"
        assert f"{BY_KEY[key].title}: not installed" in text


def test_a_tape_has_its_operations_and_bytes(facts):
    rows = {row["key"]: row for row in facts["rows"]}
    n, m = 1, 1
    for key in ("tape", "tape_forward", "tape_textbook", "tape_last"):
        assert rows[key]["operations"] > 0
        assert rows[key]["bytes"] == (int(rows[key]["operations"]) + n + 1)*(24 + 8*m)
    assert rows["tape_last"]["operations"] < rows["tape_textbook"]["operations"] < rows["tape"]["operations"]
    assert rows["jacobian"]["operations"] is None


def judged_goal(facts, key, ratio, at_least=None, at_most=None):
    """(verdict, missed by) of the goal with this bound, were a row's ratio to the module or the limit so."""
    numbers = dict(zip(("low", "value", "high"), ratio))
    rows = [row | ({"to_module": numbers, "to_limit": numbers} if row["key"] == key else {}) for row in facts["rows"]]
    return next((goal["verdict"], goal["by"]) for goal in goals.goals(facts | {"rows": rows})
                if (goal["at_least"], goal["at_most"]) == (at_least, at_most))


def test_goals_are_met_where_the_whole_interval_clears_them(facts):
    found = [judged_goal(facts, "tape", ratio, at_least=goals.TAPES) for ratio in ((21, 25, 30), (15, 25, 30), (4, 5, 7))]
    assert found == [("met", None), ("open", 0.8), ("missed", 4.0)]


def test_the_jacobian_is_judged_by_the_inverse_of_what_the_solve_takes_of_it(facts):
    found = [judged_goal(facts, "solve", ratio, at_most=goals.JACOBIAN)[0]
             for ratio in ((0.9, 0.95, 1.0), (0.8, 0.9, 1.0), (0.5, 0.6, 0.7))]
    assert found == ["met", "open", "missed"]


@pytest.mark.parametrize("name", goals.LIMITS)
def test_a_kind_of_closure_has_its_goal_against_the_limit(facts, name):
    most = goals.LIMITS[name]
    assert name in pipeline.shipped()
    found = [judged_goal(facts | {"name": name}, "jacobian", (0.9*most, ratio*most, high*most), at_most=most)[0]
             for ratio, high in ((0.95, 1.0), (0.95, 1.1))]
    assert found == ["met", "open"]


def test_evaluations_have_their_goals(facts):
    counted = facts | {"evaluations": {"median": 4, "worst": 24}}
    verdicts = {goal["goal"]: goal["verdict"] for goal in goals.goals(counted) if goal["goal"].startswith("evaluations")}
    assert list(verdicts.values()) == ["missed", "met"]


def test_a_module_that_is_wrong_ends_with_status_1_and_says_so_first(facts, monkeypatch, capsys):
    rows = [row | ({"failures": 3} if row["key"] == "solve" else {}) |
            ({"derivative_error": {"median": 1e-16, "worst": 1e-3}} if row["key"] == "jacobian" else {})
            for row in facts["rows"]]
    assert facts["wrong"] == []
    found = facts | {"rows": rows, "wrong": goals.wrong(facts | {"rows": rows})}
    monkeypatch.setattr(bench, "benchmark", lambda closure, plan, crew, seconds, progress: found)
    assert cli.main(["bench", "lambert_w"]) == 1
    page_text = capsys.readouterr().out
    assert "Wrong: solve: 3 of 16 points failed" in page_text
    assert "Wrong: solve with jacobian: a derivative is off by 1.0e-03; the limit is 1e-06" in page_text


def test_a_goal_that_is_missed_is_no_fault(facts, monkeypatch, capsys):
    slow = facts | {"goals": [goal | {"verdict": "missed", "by": 2.0} for goal in facts["goals"]]}
    monkeypatch.setattr(bench, "benchmark", lambda closure, plan, crew, seconds, progress: slow)
    assert cli.main(["bench", "lambert_w"]) == 0
    assert "missed, factor 2.00" in capsys.readouterr().out


def test_many_specs_share_the_time():
    assert bench.share(1) == bench.SECONDS[1]
    assert bench.share(1) > bench.share(4) > bench.share(100) == bench.SECONDS[0]


def test_the_command_prints_the_page_or_one_json_object(facts, monkeypatch, capsys):
    monkeypatch.setattr(bench, "benchmark", lambda closure, plan, crew, seconds, progress: facts)
    assert cli.main(["bench", "lambert_w"]) == 0
    assert capsys.readouterr().out == page.render(facts)
    assert cli.main(["bench", "lambert_w", "--json"]) == 0
    data = json.loads(capsys.readouterr().out)
    assert data["valid"] and data["name"] == "lambert_w" and data["rows"]


def test_a_plot_without_its_library_is_refused(monkeypatch, capsys, tmp_path):
    from rootwright.evidence.bench import plot

    monkeypatch.setattr(plot, "available", lambda: False)
    assert cli.main(["bench", "lambert_w", "--plot", str(tmp_path)]) == 2
    assert "rootwright[plots]" in capsys.readouterr().err


def test_a_plot_is_written_where_its_library_is_installed(facts, tmp_path):
    pytest.importorskip("matplotlib")
    from rootwright.evidence.bench.plot import plot

    picture = io.BytesIO()
    plot(facts, picture)
    assert picture.getvalue().startswith(b"\x89PNG")


def test_a_range_that_no_point_meets_is_refused_in_one_line(monkeypatch, capsys):
    def nothing(closure, plan, crew, seconds, progress):
        raise bench.NotMeasured("no point of the operating range was found at which the reference settles a root")

    monkeypatch.setattr(bench, "benchmark", nothing)
    assert cli.main(["bench", "lambert_w"]) == 2
    assert "no point of the operating range" in capsys.readouterr().err
