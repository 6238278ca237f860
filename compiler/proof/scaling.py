"""Scaling symmetries: changes of scale of parameters and unknown that leave the equation, its bracket and its range's requirements as they are.

Every value of the Program is given a weight, the power of the scale by which it is multiplied. A sum needs terms of one weight, a
sine an argument of weight 0, a product adds weights: linear equations, whose solutions are the symmetries (Buckingham's theorem, found from
the equation itself and not from units). One parameter of each symmetry, always positive, can then be set to 1, the others
taken relative to it: a proof over the smaller box of these ratios holds for every point of the operating range.
"""

from dataclasses import dataclass
from fractions import Fraction

from rootwright.calculus.program import needed

_EQUAL = ("add", "sub", "min", "max", "hypot", "lt", "le", "gt", "ge")
_KEPT = ("neg", "abs", "named")
_FREE = ("sign", "and", "or", "not", "ordered", "nan", "number", "pi")


@dataclass(frozen=True)
class Scaling:
    """`pivots` are parameters to set to 1; `powers[name][pivot]` is the power of the pivot by which a parameter is divided."""
    pivots: tuple[str, ...]
    powers: dict[str, dict[str, Fraction]]
    slope: dict[str, Fraction]          # powers of the pivots in the scale of g_x

    def of(self, weight):
        """Powers of the pivots in the scale of a value with a weight {input: factor}."""
        total = {}
        for name, factor in weight.items():
            total = _combine(total, 1, self.powers.get(name, {name: Fraction(1)} if name in self.pivots else {}), factor)
        return total


def symmetries(instructions, roots, same, unknown, pivots):
    """Scaling under which all of `roots` (the residual first) keep their form, and the nodes `same` have the weight of the unknown.

    `pivots` are the parameters that may be set to 1, in order of preference.
    """
    system = _Weights()
    for node in needed(instructions, [*roots, *same]):
        system.enter(node, instructions[node], instructions)
    for node in same:
        system.equal(system.weight(node), {unknown: Fraction(1)})
    pivots, powers = system.scaling(unknown, pivots)
    scaling = Scaling(pivots, powers, {})
    slope = scaling.of(_combine(system.weight(roots[0]) or {}, 1, {unknown: Fraction(1)}, -1))
    return Scaling(pivots, powers, slope)


class _Weights:
    """Weights as linear forms {input: factor}; `rows` are forms that must be 0. A literal 0 has any weight: None."""

    def __init__(self):
        self.weights = {}
        self.rows = []

    def weight(self, node):
        return self.weights[node]

    def equal(self, one, other):
        if one is not None and other is not None:
            self.rows.append(_combine(one, 1, other, -1))

    def enter(self, node, instruction, instructions):
        op, args = instruction.op, [self.weights.get(arg) for arg in instruction.args]
        if op == "number" and instruction.value == 0:
            weight = None
        elif op == "input":
            weight = {instruction.value: Fraction(1)}
        elif op in _KEPT:
            weight = args[0]
        elif op in _EQUAL:
            for arg in args[1:]:
                self.equal(args[0], arg)
            weight = next((arg for arg in args if arg is not None), None)
        elif op == "mul":
            weight = None if None in args else _combine(args[0], 1, args[1], 1)
        elif op == "div":
            weight = None if None in args else _combine(args[0], 1, args[1], -1)
        elif op in ("sqrt", "cbrt"):
            weight = None if args[0] is None else _combine(args[0], Fraction(1, 2 if op == "sqrt" else 3), {}, 0)
        elif op == "pow":
            exponent = instructions[instruction.args[1]]
            if exponent.op == "number" and args[0] is not None:
                weight = _combine(args[0], exponent.value, {}, 0)
            else:
                weight = self._plain(args)
        elif op == "where":
            branches = [arg for place, arg in zip(instruction.args[1:], args[1:]) if instructions[place].op != "nan"]
            if len(branches) == 2:
                self.equal(*branches)
            weight = next((branch for branch in branches if branch is not None), None)
        elif op == "atan2":
            self.equal(*args)
            weight = {}
        elif op in _FREE:
            weight = {}
        else:
            weight = self._plain(args)
        self.weights[node] = weight

    def _plain(self, args):
        """Arguments must be pure numbers."""
        for arg in args:
            self.equal(arg, {})
        return {}

    def scaling(self, unknown, pivots):
        """Gauss-Jordan elimination: inputs that stay free in the equations are the pivots."""
        names = sorted({name for weight in self.weights.values() if weight for name in weight} | {unknown})
        order = [name for name in [unknown, *names] if name not in pivots] + [name for name in reversed(pivots) if name in names]
        order = list(dict.fromkeys(order))
        solved = {}
        for row in self.rows:
            row = {name: value for name, value in row.items() if value}
            for name, other in solved.items():
                if name in row:
                    row = _combine(row, 1, other, -row[name])
            if not row:
                continue
            leading = min(row, key=order.index)
            row = {name: value / row[leading] for name, value in row.items()}
            solved = {name: _combine(other, 1, row, -other.get(leading, 0)) for name, other in solved.items()}
            solved[leading] = row
        free = [name for name in pivots if name in names and name not in solved]
        powers = {}
        for name in names:
            if name in free:
                continue
            row = solved.get(name)
            if row is None or any(other not in free and other != name for other in row):
                powers[name] = None         # moves with an input that cannot be a pivot
            else:
                powers[name] = {other: -value for other, value in row.items() if other != name}
        stuck = {other for name, row in solved.items() for other in row if other not in free and other != name}
        stuck |= {name for name in names if name not in free and name not in solved}
        if stuck:                           # weights of inputs that cannot be pivots are set to 0
            self.rows += [{name: Fraction(1)} for name in stuck]
            return self.scaling(unknown, pivots)
        return tuple(free), powers


def _combine(a, factor, b, other):
    total = {name: value * factor for name, value in a.items()}
    for name, value in b.items():
        total[name] = total.get(name, Fraction(0)) + value * other
    return {name: value for name, value in total.items() if value}
