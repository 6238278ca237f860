"""The demonstration, start to end: compile, solve, calibrate, take derivatives in other ways, tell the story."""

import math
import time
from dataclasses import dataclass, field

import numpy as np

from rootwright import pipeline
from rootwright.binding.build import NoCompiler
from rootwright.demo import reference, town
from rootwright.demo.calibrate import measure, search
from rootwright.demo.gradients import (Adjoints, Differences, LoopDifferences, LoopTape, WholeTape, taped_closures,
                                       tangent_readings)
from rootwright.demo.laws import SPECS, TURBULENT, VISCOSITY, compile_closures
from rootwright.demo.page import page

STEPS = (1.0e-3, 1.0e-4, 1.0e-5, 1.0e-6, 1.0e-7, 1.0e-8)       # tried for differences
WORST_IMBALANCE = 1.0e-12       # m^3/s
WORST_GRADIENT = 1.0e-9         # relative
MOST_ERRORS = 3.5               # standard errors between found and planted


@dataclass
class Way:
    """One way of taking derivatives: one gradient at the handbook's values, then a whole search with it."""
    name: str
    target: str
    work: object
    seconds: float
    error: float                # worst relative error of a derivative, against the reference
    found: object = None
    search_seconds: float = math.nan


@dataclass
class Told:
    """Everything that the page says."""
    target: str                 # of the fast closures: "c", or "python" where there is no C compiler
    seed: int = town.SEED
    closures: list = field(default_factory=list)    # model, links that use it, mean and most evaluations a solve
    compile_seconds: float = 0.0
    survey: object = None
    states: list = field(default_factory=list)      # for the planted values, solved from a rough guess
    solve_seconds: float = 0.0
    slow: int = 0                                   # pipe flows below the turbulent range, over all cases
    found: object = None                            # by closed-form adjoints
    search_seconds: float = 0.0
    errors: list = field(default_factory=list)      # standard errors of the unknowns found
    departures: list = field(default_factory=list)  # (found - planted)/standard error
    ways: dict = field(default_factory=dict)        # key -> Way
    blind: int = 0                                  # derivatives that a tape over warm starts takes for zero
    seconds: float = 0.0
    failures: list = field(default_factory=list)


def run(stream, progress=None, clock=time.perf_counter):
    """Play the story and print its page to a text stream; 0, or 1 if the run's checks of itself failed.

    progress, if given, is called with a line of text before each part; clock gives seconds. Raises BuildFailed if the C
    compiler refuses a module.
    """
    progress = progress or (lambda line: None)
    began = clock()
    told, closures = calibrated(progress, clock)
    compare(told, closures, progress, clock)
    told.seconds = clock() - began
    print("\n".join(page(told)), file=stream)
    return 1 if told.failures else 0


def calibrated(progress, clock):
    """The story up to the calibration, and the closures used: C, or Python where there is no C compiler."""
    progress("compiling three closures")
    started = clock()
    try:
        told, closures = Told("c"), compile_closures("c")
    except NoCompiler:
        told, closures = Told("python"), compile_closures("python")
    told.compile_seconds = clock() - started

    progress("solving the network")
    network = town.brindlemouth()
    told.survey = survey = measure(network, town.CASES, town.UNKNOWNS, closures, town.SEED)
    started = clock()
    told.states = survey.solve(_planted(survey), closures)
    told.solve_seconds = clock() - started
    told.closures = _usage(told.states, closures)
    told.slow = sum(_reynolds(pipe, flow) < TURBULENT
                    for state in told.states for pipe, flow in zip(network.pipes, state.flows))

    progress("calibrating with closed-form adjoints")
    started = clock()
    told.found = search(survey, closures, Adjoints(survey, closures))
    told.search_seconds = clock() - started
    _judge(told, closures)
    return told, closures


def _planted(survey):
    return [math.log(unknown.planted/unknown.handbook)/math.log(unknown.factor) for unknown in survey.unknowns]


def _reynolds(pipe, flow):
    return 4.0*abs(flow)/(math.pi*pipe.diameter*VISCOSITY)


def _usage(states, closures):
    """For each closure its model, how many links use it, mean and most evaluations of its residual a solve."""
    rows = []
    for spec, name in zip(SPECS, ("friction", "gate", "pump")):
        counts = [getattr(closures, name).solve(use.p).evaluations
                  for state in states for fall in state.falls for use in fall.uses if use.closure == name]
        model, _ = pipeline.model(*pipeline.find(spec))
        rows.append((model, len(counts)//len(states), sum(counts)/len(counts), max(counts)))
    return rows


def _judge(told, closures):
    """Standard errors from the tangents of the readings, and the run's checks of itself."""
    survey = told.survey
    values = survey.values(told.found.z)
    rows = []
    for state in told.found.states:
        columns = [tangent_readings(survey, state, closures, k) for k in range(len(values))]
        rows += [[value/sensor.error for value in row] for row, sensor in zip(zip(*columns), survey.network.sensors)]
    scaled = np.array(rows)*values          # with respect to logarithms, which are of one size
    spread = np.sqrt(np.diag(np.linalg.inv(scaled.T @ scaled)))
    told.errors = [float(value*share) for value, share in zip(values, spread)]
    told.departures = [(value - unknown.planted)/error
                       for value, unknown, error in zip(values, survey.unknowns, told.errors)]

    imbalance = max(abs(inflow - demand) for case, state in zip(survey.cases, told.states)
                    for inflow, demand in zip(survey.network.gather(state.flows), survey.network.demands(case)))
    if not imbalance <= WORST_IMBALANCE:
        told.failures.append(f"a junction gains or loses {imbalance:.1e} m^3/s")
    for unknown, departure in zip(survey.unknowns, told.departures):
        if not abs(departure) <= MOST_ERRORS:
            told.failures.append(f"{unknown.name}: found {departure:.1f} standard errors from the truth")


def compare(told, fast, progress, clock):
    """One gradient in every way, against the reference; then the whole search in every way that can afford it."""
    survey, target = told.survey, told.target
    z = [0.0]*len(survey.unknowns)
    slow, taped = compile_closures("python"), taped_closures()
    states = {target: survey.solve(z, fast), "python": survey.solve(z, slow)}
    exact = reference.gradient(survey, z, states["python"])

    def worst(gradient):
        return max(abs(value/true - 1.0) for value, true in zip(gradient, exact))

    def look(key, name, target, make, times=5):
        progress(f"one gradient: {name}")
        taken = []
        for _ in range(times):
            way = make()
            started = clock()
            gradient = way(z, states[target])
            taken.append(clock() - started)
        told.ways[key] = Way(name, target, way.work, min(taken), worst(gradient))

    def repeat(key, closures, make):
        way = told.ways[key]
        progress(f"search: {way.name}")
        started = clock()
        way.found = search(survey, closures, make())
        way.search_seconds = clock() - started

    def best(make):
        """The step, of those tried, with the least error."""
        return min(STEPS, key=lambda step: worst(make(step)(z, states[target])))

    look("adjoints", "closed-form adjoints", target, lambda: Adjoints(survey, fast))
    told.ways["adjoints"].found, told.ways["adjoints"].search_seconds = told.found, told.search_seconds
    local = best(lambda step: LoopDifferences(survey, fast, step))
    look("closures", f"differences of closures, {local:.0e}", target, lambda: LoopDifferences(survey, fast, local))
    repeat("closures", fast, lambda: LoopDifferences(survey, fast, local))
    for key, central in (("forward", False), ("central", True)):
        step = best(lambda step: Differences(survey, fast, step, central))
        look(key, f"{key} differences of it all, {step:.0e}", target, lambda: Differences(survey, fast, step, central))
        if not central:
            repeat(key, fast, lambda: Differences(survey, fast, step, central))
    if target != "python":
        look("plain", "closed-form adjoints", "python", lambda: Adjoints(survey, slow))
        repeat("plain", slow, lambda: Adjoints(survey, slow))
    look("loops", "tape through the closures' loops", "python", lambda: LoopTape(survey, taped))
    repeat("loops", slow, lambda: LoopTape(survey, taped))
    look("whole", "tape through it all", "python", lambda: WholeTape(survey, taped), times=1)
    told.blind = sum(value == 0.0 for value in LoopTape(survey, taped, warm=True)(z, states["python"]))
    if not told.ways["adjoints"].error <= WORST_GRADIENT:
        told.failures.append(f"the adjoints' gradient is off by {told.ways['adjoints'].error:.1e}")
