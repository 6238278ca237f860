"""Where `verify` looks: corners of the operating range, random points inside it, and the published ones."""

import random

from rootwright.calculus.doubles import Doubles
from rootwright.calculus.program import interpret
from rootwright.calculus.sampling import between
from rootwright.evidence.trees import Place

TRIES = 200                     # points looked at for each one that meets every requirement


def choose(closure, count, seed):
    """(corners, random points) of the operating range, together up to `count`, each {parameter: double}.

    Corners make up to a quarter; the others are uniform in the coordinates that each `spread` says. Fewer where few
    points of the box of ranges meet every requirement.
    """
    generator = random.Random(seed)
    corners = list(_inside(closure, _corners(closure, generator), count // 4))
    return corners, list(_inside(closure, _box(closure, generator, TRIES * count), count - len(corners)))


def published(trees):
    """Points of the published values: the doubles next to what is given."""
    return [{name: number(trees, expression) for name, expression in entry.given} for entry in trees.model.published]


def number(trees, expression):
    """The double next to a constant expression."""
    return float(exact(trees, expression).mid())


def exact(trees, expression):
    """A ball of a constant expression, to some 250 bits."""
    return Place(trees, {}).value(trees.add(expression), None, 256)


def in_range(closure, point):
    """Whether a point lies in the operating range, as the module judges it."""
    return not interpret(closure.program, Doubles(), point, ["outside"])["outside"]


def _inside(closure, candidates, count):
    """The first `count` candidates that meet every requirement."""
    found = 0
    for point in candidates:
        if found == count:
            return
        if in_range(closure, point):
            found += 1
            yield point


def _corners(closure, generator):
    """All corners of the box where there are few of them, else random ones without repetition."""
    dimensions = len(closure.ranges)
    numbers = range(2 ** dimensions) if dimensions <= 10 else \
        sorted({generator.getrandbits(dimensions) for _ in range(1024)})
    seen = set()
    for k in generator.sample(numbers, len(numbers)):
        corner = tuple(ends[k >> bit & 1] for bit, ends in enumerate(closure.ranges))
        if corner not in seen:
            seen.add(corner)
            yield _point(closure, corner)


def _box(closure, generator, tries):
    for _ in range(tries):
        yield _point(closure, [between(low, high, generator.random(), parameter.spread)
                               for parameter, (low, high) in zip(closure.model.parameters, closure.ranges)])


def _point(closure, values):
    return {parameter.name: value for parameter, value in zip(closure.model.parameters, values)}
