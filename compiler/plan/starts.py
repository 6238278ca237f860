"""First guesses: the author's, shares of the bracket, and polynomials fitted to the root over the operating range."""

import math
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from rootwright.plan.fit import MOST_TERMS, columns, coordinates, exponents, fit, horner, polynomial


@dataclass(frozen=True)
class Start:
    name: str
    x: np.ndarray                   # at the measured points
    node: int                       # that computes it


def starts(measured, graph):
    """The Starts for the points of a Range, cheap ones first; entered into the graph."""
    program = measured.program
    lower, upper = program.results["lower"], program.results["upper"]
    width = measured.upper - measured.lower
    if "start" in measured.closure.kernels:
        yield Start("the author's", measured.column("start"), program.results["start"])
    for eighths in (4, 2, 6, 1, 7):
        node = graph.add(lower, graph.mul(graph.number(Fraction(eighths, 8)), graph.sub(upper, lower)))
        name = "the middle of the bracket" if eighths == 4 else f"{eighths}/8 of the bracket from its lower end"
        yield Start(name, measured.lower + eighths / 8.0 * width, node)
    for bent in (False, True):
        variables = coordinates(measured, bent)
        if variables and (not bent or variables != coordinates(measured, False)):
            yield from _fitted(measured, graph, variables, lower, upper)


def _fitted(measured, graph, variables, lower, upper):
    values = columns(measured, variables)
    nodes = [_variable(graph, *variable) for variable in variables]
    in_words = "" if all(shape == "log" or shape == "" for _, shape, *_ in variables) else ", of square roots"
    for degree in (1, 2, 3, 4):
        powers = exponents(len(variables), degree)
        if len(powers) > MOST_TERMS or 2 * len(powers) > measured.size:
            return
        for name, target, back, finish in _targets(measured, graph, lower, upper):
            coefficients = fit(values, powers, target)
            if coefficients is None:
                continue
            guess = back(polynomial(values, powers, coefficients))
            terms = {power: c for power, c in zip(powers, coefficients) if c}
            yield Start(f"a polynomial of degree {degree} fitted to {name}{in_words}", guess, finish(horner(graph, nodes, terms)))


def _targets(measured, graph, lower, upper):
    """(what is fitted, its values, the way back to the root in arrays, and in the graph)."""
    low, width, root = measured.lower, measured.upper - measured.lower, measured.root
    yield "the root", root, lambda v: v, lambda node: node
    if not (np.ptp(low) == 0.0 and np.ptp(width) == 0.0):
        yield ("the root's share of the bracket", (root - low) / width, lambda v: low + v * width,
               lambda node: graph.add(lower, graph.mul(node, graph.sub(upper, lower))))
    if root.min() > 0.0 and root.max() > 4.0 * root.min():
        yield ("the logarithm of the root", np.array([math.log(v) for v in root.tolist()]),
               lambda v: np.array([math.exp(min(u, 700.0)) for u in v.tolist()]), graph.exp)


def _variable(graph, name, shape, scale, shift):
    node = graph.input(name)
    bent = {"log": graph.log, "sqrt": graph.sqrt}[shape](node) if shape else node
    return graph.add(graph.mul(graph.number(Fraction(repr(scale))), bent), graph.number(Fraction(repr(shift))))
