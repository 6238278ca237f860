"""Polynomials fitted to the root over the operating range by least squares, as first guesses.

Variables are the parameters, or their logarithms where the spec spreads them so, scaled to [-1, 1]. What is fitted is the root, its
logarithm, or its share of the bracket. Sums are exact (`math.fsum`) and coefficients are cut to five digits, so that the
same spec gives the same polynomial everywhere.
"""

import math
from fractions import Fraction
from itertools import combinations_with_replacement

import numpy as np

MOST_TERMS = 36


def exponents(count, degree):
    """Exponents of all products of `count` variables up to a total degree; shorter ones first."""
    found = []
    for total in range(degree + 1):
        for chosen in combinations_with_replacement(range(count), total):
            found.append(tuple(chosen.count(k) for k in range(count)))
    return found


def coordinates(measured, bent=False):
    """[(name, shape, scale, shift)]: the variable is scale*f(p) + shift, f by shape: "" as it is, "log", "sqrt".

    A log spread asks for the logarithm; bent asks for the square root of the other parameters that come down to 0. Parameters
    without a range to speak of are left out.
    """
    found = []
    for parameter, (low, high) in zip(measured.closure.model.parameters, measured.closure.ranges):
        shape = "log" if parameter.spread == "log" else "sqrt" if bent and 0.0 <= low <= 0.05 * high else ""
        a, b = (float(_BENT[shape](end)) for end in (low, high))
        if 1e-100 < b - a < 1e100 and max(abs(a), abs(b)) < 1e10 * (b - a):
            scale = _short(2.0 / (b - a))
            found.append((parameter.name, shape, scale, _short(-scale * 0.5 * (a + b))))
    return found


_BENT = {"": float, "log": math.log, "sqrt": math.sqrt}


def columns(measured, variables):
    """Values of the variables at the points, arrays."""
    return [scale * np.array([_BENT[shape](p) for p in measured.inputs[name].tolist()]) + shift
            for name, shape, scale, shift in variables]


def fit(values, powers, target):
    """Coefficients of the products with exponents `powers` that fit the target best; None where they are not determined."""
    rows = []
    for exponent in powers:
        row = np.ones(len(target))
        for value, power in zip(values, exponent):
            for _ in range(power):
                row = row * value
        rows.append(row)
    if not np.abs(target).max() < 1e100:
        return None
    matrix = [[math.fsum((a * b).tolist()) for b in rows] for a in rows]
    right = [math.fsum((a * target).tolist()) for a in rows]
    solution = _solve(matrix, right) if np.isfinite(matrix).all() and np.isfinite(right).all() else None
    if solution is None or not all(map(math.isfinite, solution)):
        return None
    largest = max(map(abs, solution))
    return [_short(c) if abs(c) > 1e-5 * largest else 0.0 for c in solution]


def polynomial(values, powers, coefficients):
    """The polynomial at arrays of its variables."""
    total = np.zeros(len(values[0])) if values else np.zeros(1)
    for exponent, coefficient in zip(powers, coefficients):
        term = coefficient
        for value, power in zip(values, exponent):
            for _ in range(power):
                term = term * value
        total = total + term
    return total


def horner(graph, nodes, terms):
    """The polynomial {exponents: coefficient} over nodes, nested in the first variable, then the next."""
    if not nodes:
        return graph.number(Fraction(repr(terms.get((), 0.0))))
    total = None
    for power in range(max((exponent[0] for exponent in terms), default=0), -1, -1):
        rest = {exponent[1:]: c for exponent, c in terms.items() if exponent[0] == power}
        if total is not None:
            total = graph.mul(total, nodes[0])
        if rest:
            inner = horner(graph, nodes[1:], rest)
            total = inner if total is None else graph.add(total, inner)
    return graph.number(0) if total is None else total


def _short(value):
    return float(f"{value:.5g}")


def _solve(matrix, right):
    """Cholesky's method; None for a matrix that is not positive definite to ten digits."""
    size = len(right)
    lower = [[0.0] * size for _ in range(size)]
    for i in range(size):
        for j in range(i + 1):
            rest = matrix[i][j] - math.fsum(lower[i][k] * lower[j][k] for k in range(j))
            if i == j:
                if not rest > 1e-10 * matrix[i][i]:
                    return None
                lower[i][i] = math.sqrt(rest)
            else:
                lower[i][j] = rest / lower[j][j]
    y = []
    for i in range(size):
        y.append((right[i] - math.fsum(lower[i][k] * y[k] for k in range(i))) / lower[i][i])
    x = [0.0] * size
    for i in reversed(range(size)):
        x[i] = (y[i] - math.fsum(lower[k][i] * x[k] for k in range(i + 1, size))) / lower[i][i]
    return x
