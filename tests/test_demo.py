"""The demonstration: its network obeys its equations, its derivatives agree, and it finds what was planted."""

import io
import itertools
import math
import os
import subprocess
import sys

import pytest

from rootwright.binding.build import NoCompiler
from rootwright.demo import page, reference, story, town
from rootwright.demo.calibrate import Survey, measure
from rootwright.demo.gradients import (Adjoints, Differences, LoopDifferences, LoopTape, WholeTape, taped_closures,
                                       tangent_readings)
from rootwright.demo.laws import VISCOSITY, Pipe, compile_closures, evaluate
from rootwright.demo.network import MOST_STEPS, NotSolved, solve
from rootwright.demo.tape import Tape, TapedMath

HANDBOOK = [0.0]*len(town.UNKNOWNS)


def ticks():
    """A clock for runs that are compared: a second a look."""
    return itertools.count().__next__


@pytest.fixture(scope="module")
def told_and_closures():
    return story.calibrated(lambda line: None, ticks())


@pytest.fixture(scope="module")
def told(told_and_closures):
    return told_and_closures[0]


@pytest.fixture(scope="module")
def closures(told_and_closures):
    return told_and_closures[1]


@pytest.fixture(scope="module")
def hour(told):
    """A survey of one hour alone, with a hydrant open: all unknowns but the terrace's matter."""
    return Survey(told.survey.network, told.survey.cases[2:3], told.survey.unknowns, told.survey.readings[2:3])


@pytest.fixture(scope="module")
def states(hour, closures):
    return hour.solve(HANDBOOK, closures)


@pytest.fixture(scope="module")
def gradient(hour, states, closures):
    return Adjoints(hour, closures)(HANDBOOK, states)


@pytest.fixture(scope="module")
def taped():
    return taped_closures()


def agree(gradient, other, tolerance):
    assert gradient == pytest.approx(other, rel=tolerance, abs=0.0)


def test_the_town_has_loops_dead_ends_pumps_and_a_gate():
    network = town.brindlemouth()
    assert len(network.pipes) >= 50 and network.loops >= 10 and len(network.links) - len(network.pipes) >= 2
    ends = [name for link in network.links for name in (link.start, link.end)]
    assert sum(ends.count(junction.name) == 1 for junction in network.junctions) >= 5
    assert sum(pipe.gate is not None for pipe in network.pipes) == 1
    assert set(ends) == set(network.number) | set(network.sources)


def test_what_flows_to_a_junction_flows_on_or_is_drawn(told):
    # Flows are some 0.1 m^3/s and sums have at most five terms: their rounding is below 1e-15 m^3/s.
    network = told.survey.network
    for case, state in zip(told.survey.cases, told.states):
        for junction in network.junctions:
            balance = -junction.demand*case.demand - case.hydrants.get(junction.name, 0.0)
            for link, flow in zip(network.links, state.flows):
                balance += flow*((link.end == junction.name) - (link.start == junction.name))
            assert abs(balance) < 1e-14


def test_heads_differ_by_what_is_lost_between_them(told, closures):
    # Heads below 100 m have an ulp of 1.4e-14 m; the losses are evaluated once more at the flows found.
    network = told.survey.network
    planted = [unknown.planted for unknown in town.UNKNOWNS]
    for case, state in zip(told.survey.cases, told.states):
        head = dict(zip(network.number, state.heads)) | case.levels
        for link, flow in zip(network.links, state.flows):
            loss = evaluate(link, flow, planted, closures).loss
            assert head[link.start] - head[link.end] == pytest.approx(loss, abs=1e-11)


def test_the_slope_of_every_law_is_the_derivative_of_its_loss(closures):
    # Central quotients at steps of 1e-6 of the flow: their error is some 1e-12 of curvature and 1e-10 of rounding. The
    # flows lie in the laminar range, between the ranges, and in the turbulent range, in both directions.
    planted = [unknown.planted for unknown in town.UNKNOWNS]
    for link in town.brindlemouth().links:
        if isinstance(link, Pipe):
            unit = 0.25*math.pi*link.diameter*VISCOSITY
            flows = [sign*reynolds*unit for reynolds in (800, 2900, 6e3, 2e5) for sign in (1, -1)]
        else:
            flows = [0.005, 0.02]
        for flow in flows:
            above, below = (evaluate(link, flow*(1 + step), planted, closures).loss for step in (1e-6, -1e-6))
            assert evaluate(link, flow, planted, closures).slope == pytest.approx((above - below)/(2e-6*flow), rel=1e-7)


def test_newton_converges_quadratically_and_from_a_neighbour_sooner(told, closures):
    network, case = told.survey.network, told.survey.cases[0]
    state = told.states[0]
    worst = [row[0] for row in state.history]
    assert worst[-3] < 1e-3 and worst[-2] < 1e-5 and worst[-1] < 1e-10
    moved = [1.001*unknown.planted for unknown in town.UNKNOWNS]
    assert solve(network, case, moved, closures, state).steps < state.steps < MOST_STEPS


def test_a_network_that_cannot_be_solved_says_for_which_hour_and_link(closures):
    values = [unknown.planted for unknown in town.UNKNOWNS]
    values[town.OPENING] = 1.5
    with pytest.raises(NotSolved, match="town asleep: no root at C3-D3 for the parameters 1.5"):
        solve(town.brindlemouth(), town.CASES[0], values, closures)


def test_the_adjoint_gradient_is_that_of_a_second_model_in_complex_arithmetic(hour, states, gradient):
    # Complex steps lose no digits; what differs is where the two Newton iterations stop (below 1e-11 m of some 10 m).
    agree(gradient, reference.gradient(hour, HANDBOOK, states), 1e-11)


def test_the_adjoint_gradient_is_that_of_central_differences(hour, states, gradient, closures):
    # Central steps of 1e-4 in a logarithm leave 1e-8/6 of the third derivative, which is at most ten times the first;
    # rounding leaves an ulp of the misfit (about 2000) over the step, 2e-9, of derivatives that exceed 10. Forward
    # steps of 1e-7 leave half that of the second derivative, and 2e-6 of rounding.
    agree(gradient, Differences(hour, closures, 1e-4, central=True)(HANDBOOK, states), 1e-7)
    agree(gradient, Differences(hour, closures, 1e-7, central=False)(HANDBOOK, states), 1e-5)


def test_the_adjoint_gradient_is_that_of_differences_within_each_closure(hour, states, gradient, closures):
    # Steps of 1e-5 of the parameter: 1e-10 of curvature, 1e-16/1e-5 of rounding, more where f hardly depends on it.
    agree(gradient, LoopDifferences(hour, closures, 1e-5)(HANDBOOK, states), 1e-7)


def test_the_adjoint_gradient_is_that_of_a_tape_through_the_loops(hour, states, gradient, taped):
    # The last iterate's derivative is wrong by what the one before was off by: at most the square root of an ulp, 1e-8,
    # and mostly its square.
    way = LoopTape(hour, taped)
    agree(gradient, way(HANDBOOK, states), 1e-8)
    assert way.work.operations > 10*way.work.closure_solves


def test_the_adjoint_gradient_is_that_of_a_tape_through_everything(hour, states, gradient, taped):
    agree(gradient, WholeTape(hour, taped)(HANDBOOK, states), 1e-8)


def test_a_tape_over_warm_starts_sees_no_derivative(hour, states, gradient, taped):
    warm = LoopTape(hour, taped, warm=True)(HANDBOOK, states)
    assert sum(value == 0.0 for value in warm) >= 4 and all(value != 0.0 for value in gradient)


def test_readings_tangents_and_the_adjoint_satisfy_the_dot_product_identity(hour, states, gradient, closures):
    # Both sides are sums of some 20 terms of one size; nothing else is approximate.
    chain = hour.chain(HANDBOOK)
    for k in range(len(HANDBOOK)):
        tangents = tangent_readings(hour, states[0], closures, k)
        deviations = hour.deviations(states[0], hour.readings[0])
        forward = sum(a*b/sensor.error for a, b, sensor in zip(tangents, deviations, hour.network.sensors))
        assert forward*chain[k] == pytest.approx(gradient[k], rel=1e-10)


def test_both_targets_give_one_gradient(hour, gradient):
    plain = compile_closures("python")
    agree(gradient, Adjoints(hour, plain)(HANDBOOK, hour.solve(HANDBOOK, plain)), 1e-11)


def test_the_calibration_finds_what_was_planted(told):
    assert len(told.departures) >= 3 and all(abs(departure) < 3.0 for departure in told.departures)
    assert told.failures == []
    # Half the sum of squares of normal errors less the unknowns: mean 37, standard deviation 6.
    free = len(told.survey.readings)*len(told.survey.network.sensors) - len(town.UNKNOWNS)
    assert abs(told.found.misfit - free/2) < 3.0*math.sqrt(free/2)
    # The start was nowhere near: every handbook value is off by more than five standard errors, but for smooth mains.
    off = [abs(unknown.handbook - unknown.planted)/error for unknown, error in zip(town.UNKNOWNS, told.errors)]
    assert sorted(off)[1] > 3.0


def test_a_seed_gives_one_set_of_readings(told, closures):
    again = measure(told.survey.network, town.CASES, town.UNKNOWNS, closures, town.SEED)
    other = measure(told.survey.network, town.CASES, town.UNKNOWNS, closures, town.SEED + 1)
    assert again.readings == told.survey.readings != other.readings


def test_two_runs_say_the_same_but_for_times(told):
    # The second run is a process of its own with another order of hashes; clocks that tick evenly take times out.
    script = ("import itertools; from rootwright.demo import page, story; "
              "told, _ = story.calibrated(lambda line: None, itertools.count().__next__); "
              "print('\\n'.join(page.opening(told)))")
    again = subprocess.run([sys.executable, "-c", script], env=os.environ | {"PYTHONHASHSEED": "71"}, check=True,
                           capture_output=True, text=True).stdout
    assert again == "\n".join(page.opening(told)) + "\n"


def changed(told, **fields):
    return story.Told(**{name: getattr(told, name) for name in story.Told.__dataclass_fields__} | fields)


def test_the_page_is_told_in_full(told, closures, hour, monkeypatch):
    # One hour stands for the four, and the searches of the rivals are left out: each would arrive where the first did.
    short = changed(told, survey=hour, states=told.states[2:3], ways={}, failures=[])
    monkeypatch.setattr(story, "calibrated", lambda progress, clock: (short, closures))
    monkeypatch.setattr(story, "search", lambda survey, closures, gradient: told.found)
    stream, seen = io.StringIO(), []
    assert story.run(stream, seen.append, ticks()) == 0
    lines = stream.getvalue().splitlines()
    assert len(lines) + 3 <= 80 and max(map(len, lines)) <= 120 and seen
    assert "licensed practice" in " ".join(lines[-2:]) and "invented" in " ".join(lines[:3])
    assert [line[:2] for line in lines if line[:1].isdigit() and line[1] == "."] == ["1.", "2.", "3.", "4.", "5."]
    for name in ("pipe_friction", "throttle_gate", "motor_pump", "adjoints", "differences", "tape"):
        assert any(name in line for line in lines)


def test_without_a_c_compiler_the_story_is_told_in_python_and_says_so(told, monkeypatch):
    def compiled(target):
        if target == "c":
            raise NoCompiler("none")
        return compile_closures(target)
    monkeypatch.setattr(story, "compile_closures", compiled)
    monkeypatch.setattr(story, "search", lambda survey, closures, gradient: told.found)
    monkeypatch.setattr(story, "STEPS", (1e-5, 1e-6))
    monkeypatch.setattr(town, "CASES", town.CASES[2:3])
    stream = io.StringIO()
    story.run(stream, None, ticks())
    assert "to Python (no C compiler was found)" in stream.getvalue()


def test_a_failed_check_is_said_and_counts(told, monkeypatch):
    failing = changed(told, failures=["a junction gains or loses water"])
    monkeypatch.setattr(story, "calibrated", lambda progress, clock: (failing, None))
    monkeypatch.setattr(story, "compare", lambda *arguments: None)
    monkeypatch.setattr(story, "page", lambda told: told.failures)
    stream = io.StringIO()
    assert story.run(stream, None, ticks()) == 1 and "gains or loses" in stream.getvalue()


@pytest.mark.parametrize(("name", "x"), [
    ("sqrt", 0.7), ("exp", 0.3), ("expm1", 0.3), ("log", 0.7), ("log1p", 0.3), ("log10", 0.7), ("log2", 0.7),
    ("sin", 0.3), ("cos", 0.3), ("tan", 0.3), ("atan", 0.3), ("sinh", 0.3), ("cosh", 0.3), ("tanh", 0.3),
    ("fabs", -0.3)])
def test_a_taped_function_has_the_derivative_of_its_difference_quotient(name, x):
    # Quotients of steps of 1e-5: 1e-10 of curvature, 1e-11 of rounding.
    tape = Tape()
    number = tape.number(x)
    function = getattr(math, name)
    slope, = tape.gradient(getattr(TapedMath(), name)(number), [number])
    assert slope == pytest.approx((function(x + 1e-5) - function(x - 1e-5))/2e-5, rel=1e-8)


def test_taped_arithmetic_has_the_derivatives_of_the_textbook():
    tape = Tape()
    a, b, taped = tape.number(3.0), tape.number(-2.0), TapedMath()
    assert tape.gradient(a + b, [a, b]) == [1.0, 1.0] == tape.gradient(a - -b, [a, b])
    assert tape.gradient(a*b, [a, b]) == [-2.0, 3.0]
    assert tape.gradient(a/b, [a, b]) == [-0.5, -0.75]
    assert tape.gradient((1.0 - a)*(2.0/b), [a, b]) == [1.0, 1.0]
    assert tape.gradient(abs(b) + -a, [a, b]) == [-1.0, -1.0]
    powers = taped.pow(a, 2.0) + taped.pow(2.0, b)
    assert tape.gradient(powers, [a, b]) == pytest.approx([6.0, 0.25*math.log(2.0)], rel=1e-15)
    assert tape.gradient(taped.copysign(a, -1.0) + taped.ldexp(b, 3), [a, b]) == [-1.0, 8.0]
    assert a > b and b <= -2.0 and a == 3.0 and float(a) == 3.0 and taped.isfinite(a)
    assert tape.size == 24*len(tape) and tape.gradient(5.0, [a]) == [0.0]
