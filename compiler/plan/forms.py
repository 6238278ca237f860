"""Other forms of what the short way computes. They may differ from the author's form in the last bits; the residual in the
certificate of a root is the author's.

What depends on the parameters alone is worked out once; divisions by it, or by what divides more than once, become products; a
power whose neighbour is at hand is a product or a quotient; logarithms of other bases are natural ones; exp(a) is
expm1(a) + 1 where expm1(a) is at hand and a keeps above -1/2, and in a step expm1(a) is exp(a) - 1, which is faster, and sinh(a) and cosh(a) share an exp(a).
"""

import math
from collections import Counter
from fractions import Fraction

from rootwright.calculus.constants import NotReal, nearest
from rootwright.calculus.magnitude import smallest
from rootwright.calculus.program import needed
from rootwright.plan.measure import effort

WORTH = 4.0                 # a value that takes less is worked out again rather than kept
_BASES = {"log10": Fraction(repr(1.0/math.log(10.0))), "log2": Fraction(repr(1.0/math.log(2.0)))}


class Quick:
    """Rewrites roots of a graph into quicker forms, one form a value however often it is asked for.

    moving: what depends on the unknown. magnitudes: of the values over the operating range. kept: values that stay as they
    are, with all they depend on. rough: digits may be lost where a difference cancels, as a step can stand.
    """

    def __init__(self, graph, moving, magnitudes, kept=(), rough=False):
        self.graph, self.magnitudes, self.rough = graph, magnitudes, rough
        self.forms = {node: node for node in needed(graph.instructions, kept)}
        self.products = {}      # form -> (factor without the unknown, the rest) where it is such a product
        self.powers = {}
        self.present = {(graph.instructions[node].op, *graph.instructions[node].args) for node in self.forms}
        self.moves = {node: node in moving for node in range(len(graph.instructions))}

    def __call__(self, roots):
        graph = self.graph
        nodes = needed(graph.instructions, roots)
        divisors = Counter(graph.instructions[node].args[1] for node in nodes if graph.instructions[node].op == "div")
        self.present |= {(graph.instructions[node].op, *graph.instructions[node].args) for node in nodes}
        for node in nodes:
            if node not in self.forms:
                self.forms[node] = self._form(node, graph.instructions[node], divisors)
                if self.forms[node] != node and node in graph.labels:
                    graph.labels.setdefault(self.forms[node], graph.labels[node])
        return [self.forms[root] for root in roots]

    def _form(self, node, instruction, divisors):
        graph = self.graph
        if not instruction.args or not self._moves(node):
            return node
        args = [self.forms[arg] for arg in instruction.args]
        if instruction.op == "mul":
            return self._product(*args)
        if instruction.op == "div":
            if not self._moves(instruction.args[1]):
                return self._product(args[0], graph.div(graph.number(1), args[1]))
            if divisors[instruction.args[1]] > 1:
                return _by(graph, graph.div(graph.number(1), args[1]), args[0])
            return self._product(args[0], None, args[1])
        if self.rough and instruction.op == "expm1" and ("exp", instruction.args[0]) in self.present:
            return graph.sub(graph.enter("exp", args), 1)
        if self.rough and instruction.op in ("sinh", "cosh") and {("sinh", *instruction.args), ("cosh", *instruction.args)} <= self.present:
            growth = graph.exp(args[0])
            return graph.mul(Fraction(1, 2), getattr(graph, "sub" if instruction.op == "sinh" else "add")(growth, graph.div(1, growth)))
        if not self.rough and instruction.op == "exp" and ("expm1", instruction.args[0]) in self.present \
                and self.magnitudes.of(instruction.args[0])[0] > -0.5:
            return graph.add(graph.enter("expm1", args), 1)
        if instruction.op in _BASES:
            return self._product(graph.number(_BASES[instruction.op]), graph.log(args[0]))
        if instruction.op == "pow" and graph.is_constant(instruction.args[1]):
            return self._power(args[0], graph.rational(instruction.args[1]), args[1])
        if instruction.op in ("add", "sub", "neg"):
            return getattr(graph, instruction.op)(*args)
        return graph.enter(instruction.op, args)

    def _product(self, a, b, divisor=None):
        """a*b, or a/divisor, with all that does not depend on the unknown in one factor."""
        graph = self.graph
        (still, rest), (other, more) = self._factors(a), (None, None) if b is None else self._factors(b)
        if divisor is not None:
            below, divisor = self._factors(divisor)
            rest = graph.div(graph.number(1) if rest is None else rest, divisor)
            still = still if below is None else graph.div(graph.number(1) if still is None else still, below)
        still = _times(graph, still, other)
        rest = _times(graph, rest, more)
        form = rest if still is None else still if rest is None else _by(graph, still, rest)
        if still is not None and rest is not None:
            self.products[form] = (still, rest)
        return form

    def _factors(self, form):
        """(factor without the unknown, the rest), either None where there is none."""
        if form in self.products:
            return self.products[form]
        return (None, form) if self._moves(form) else (form, None)

    def _moves(self, form):
        """Whether a form depends on the unknown."""
        if form not in self.moves:
            self.moves[form] = any(self._moves(arg) for arg in self.graph.instructions[form].args)
        return self.moves[form]

    def _power(self, base, exponent, written):
        """base^exponent from a power by one more or one less, where the base keeps away from 0."""
        graph = self.graph
        if exponent is not None and smallest(self.magnitudes.of(base)) > 0.0:
            above, below = self.powers.get((base, exponent + 1)), self.powers.get((base, exponent - 1))
            if above is not None:
                return graph.div(above, base)
            if below is not None:
                return graph.mul(below, base)
        power = graph.enter("pow", (base, written))
        self.powers.setdefault((base, exponent), power)
        return power


def _by(graph, still, rest):
    """still*rest, where a quotient of 1 stays one: it is worked out once, or serves more than one product."""
    instruction = graph.instructions[still]
    if instruction.op == "div" and graph.literal(instruction.args[0]) == 1 and abs(graph.literal(rest) or 0) != 1:
        return graph.apply("mul", rest, still)
    return graph.mul(still, rest)


def _times(graph, a, b):
    """Product of factors; a quotient of 1 becomes a quotient of the other."""
    if a is None or b is None:
        return b if a is None else a
    for one, other in ((a, b), (b, a)):
        instruction = graph.instructions[other]
        if instruction.op == "div" and graph.literal(instruction.args[0]) == 1:
            return graph.div(one, instruction.args[1])
    return graph.mul(a, b)


def worth_keeping(graph, users, known):
    """Values among the instructions `known` that others among `users` are made from, and that take some work; in order."""
    found = set()
    for node in users:
        for arg in graph.instructions[node].args if node not in known else ():
            if arg in known and not graph.is_constant(arg) and graph.instructions[arg].args \
                    and graph.instructions[arg].op not in ("lt", "le", "gt", "ge", "and", "or", "not", "ordered") \
                    and effort(graph.instructions, [arg]) >= WORTH:
                found.add(arg)
    return sorted(found)


def constants_of(graph, first, constants):
    """`constants` with the values of those entered from instruction `first` on."""
    found = dict(constants)
    for node in range(first, len(graph.instructions)):
        if graph.is_constant(node):
            try:
                found[node] = (nearest(graph, node), 0.0)
            except NotReal:
                continue
    return found
