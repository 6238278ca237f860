"""What every row of the benchmark is given: points of the operating range, starts, and the certified truth at some."""

import random
from dataclasses import dataclass

import numpy as np

from rootwright.calculus.sampling import between
from rootwright.evidence.bench.plain import spell
from rootwright.evidence.limits import SCALE_SHARE, SCALE_WIDTH
from rootwright.evidence.points import in_range
from rootwright.evidence.reference import NotSettled, Reference

POINTS = 4096
CHECKED = 48                     # points at which the truth is known
MOVED = 0.01                     # warm starts: every parameter moved by this share of its range


@dataclass(frozen=True)
class Problem:
    """Plain data: it goes to other processes. Arrays: n points, N parameters, M results, c points checked."""
    name: str
    results: tuple[str, ...]
    wanted: tuple[bool, ...]             # per parameter: differentiated
    points: np.ndarray                   # (n, N), in C order; the first c are the checked ones
    warm: np.ndarray                     # (n,): roots of points a little moved, where a warm start begins
    solved: np.ndarray                   # (n,): roots as the module finds them
    floors: np.ndarray                   # (N,): least size of a parameter that scales a step of a difference
    middles: np.ndarray                  # (N,)
    roots: np.ndarray                    # (c,): exact to the last bit
    derivatives: np.ndarray              # (c, M, N); NaN where there is none, or not wanted
    scales: np.ndarray                   # (c, M, N): what an error is measured against
    texts: dict[str, str]                # library: the formulas as functions in Python
    open_ends: tuple[bool, bool]
    has_start: bool


def pose(closure, solve, points=POINTS, checked=CHECKED, seed=1):
    """Problem of a Closure: random points, uniform in the coordinates that each `spread` says, inside the operating
    range (fewer where the range is hard to hit). solve: (n, N) -> roots, by the module."""
    model = closure.model
    inside = _inside(closure, points, seed)
    reference = Reference(model)
    rows = [(point, truth) for point in inside[:checked] if (truth := _truth(closure, reference, point)) is not None]
    known = {tuple(point.values()) for point, _ in rows}
    ordered = [point for point, _ in rows] + [point for point in inside if tuple(point.values()) not in known]
    array = np.array([list(point.values()) for point in ordered], float)
    unknown = model.unknown
    neighbours = np.array([_neighbour(closure, point) for point in ordered])
    return Problem(
        model.name, tuple(model.results), tuple(parameter.differentiate for parameter in model.parameters),
        array, solve(neighbours), solve(array),
        np.array([0.0 if parameter.spread == "log" else SCALE_WIDTH*(high - low)
                  for parameter, (low, high) in zip(model.parameters, closure.ranges)]),
        np.array([0.5*low + 0.5*high for low, high in closure.ranges]),
        np.array([root for _, (root, _, _) in rows]), np.array([d for _, (_, d, _) in rows]),
        np.array([scale for _, (_, _, scale) in rows]),
        {library: spell(closure, library) for library in ("math", "numpy", "autograd", "jax")},
        (unknown.open_lower, unknown.open_upper), "start" in closure.kernels)


def _inside(closure, count, seed):
    generator = random.Random(seed)
    found = []
    for _ in range(40*count):
        if len(found) == count:
            break
        point = {parameter.name: between(low, high, generator.random(), parameter.spread)
                 for parameter, (low, high) in zip(closure.model.parameters, closure.ranges)}
        if in_range(closure, point):
            found.append(point)
    return found


def _truth(closure, reference, point):
    """(root, derivatives (M, N), scales (M, N)); None where the reference settles no root."""
    model = closure.model
    try:
        root = reference.root(point)
        found = reference.derivatives(point, root.mid)
    except NotSettled:
        return None
    values = [float(root.mid)] + [float(reference.place(point).value(step, root.mid, 160).mid())
                                  for step in reference.trees.outputs.values()]
    derivatives = np.full((len(model.results), len(model.parameters)), np.nan)
    scales = np.ones_like(derivatives)
    for i, result in enumerate(model.results):
        for k, (parameter, (low, high)) in enumerate(zip(model.parameters, closure.ranges)):
            derivative = found.get((result, parameter.name))
            if derivative is not None and derivative.value is not None:
                derivatives[i, k] = derivative.value
                reach = max(abs(point[parameter.name]), SCALE_WIDTH*(high - low), 5e-324)
                scales[i, k] = max(abs(derivative.value), SCALE_SHARE*abs(values[i])/reach, 5e-324)
    return values[0], derivatives, scales


def _neighbour(closure, point):
    """The point with every parameter moved by MOVED of its range, inwards."""
    moved = []
    for parameter, (low, high) in zip(closure.model.parameters, closure.ranges):
        value = point[parameter.name]
        if parameter.spread == "log":
            factor = (high/low)**MOVED
            moved.append(value*factor if value*factor <= high else value/factor)
        else:
            step = MOVED*(high - low)
            moved.append(value + step if value + step <= high else value - step)
    return moved
