"""Exact cancellation: instructions rewritten over the rational functions of what is not rational.

Every value is a quotient of two polynomials with rational coefficients in atoms: inputs, and functions of simplified arguments. Polynomial
arithmetic and factors come from FLINT. Of each value the form with fewer operations is kept, so that only what cancels
changes: `1 + (1/(1 - K) + t*w)*(K - 1)` becomes `t*w*(K - 1)`, and Kepler's residual at the bracket's end loses its anomaly.

A form that has cancelled may be defined where the author's is not. Whoever uses one asks for the author's domain apart from it
(`domain`): divisors that are not 0, arguments of logarithms that are positive.
"""

from fractions import Fraction

import flint

from rootwright.calculus.program import CONDITIONS, LEAVES, Node, needed

_TERMS = 80             # a polynomial of more terms is left as it is
_DEGREE = 64
_RATIONAL = ("add", "sub", "mul", "div", "neg")
_AT_ZERO = {"exp": 1, "expm1": 0, "log1p": 0, "sin": 0, "cos": 1, "tan": 0, "asin": 0, "atan": 0, "sinh": 0, "cosh": 1,
            "tanh": 0, "asinh": 0, "atanh": 0, "erf": 0, "erfc": 1, "sqrt": 0, "cbrt": 0, "abs": 0}
_AT_ONE = {"log": 0, "log10": 0, "log2": 0, "acos": 0, "acosh": 0, "sqrt": 1, "cbrt": 1, "abs": 1}
_INVERSE = {("sin", "asin"), ("cos", "acos"), ("tan", "atan"), ("exp", "log"), ("log", "exp"), ("expm1", "log1p"),
            ("log1p", "expm1"), ("sinh", "asinh"), ("cosh", "acosh"), ("tanh", "atanh")}


class _Full(Exception):
    """More atoms than there are generators."""


class Cancelling:
    """Simplified twins of the nodes of one graph, kept: `of(node)` is the twin of a node."""

    def __init__(self, graph, roots):
        self.graph = graph
        self.twins = {}
        count = sum(graph.instructions[node].op not in _RATIONAL + ("number",) for node in needed(graph.instructions, roots))
        names = [f"a{k}" for k in range(2 * count + 8)]
        self.context = flint.fmpq_mpoly_ctx.get(names, "lex")
        self.generators = self.context.gens()
        self.one = self.context.from_dict({(0,) * len(names): 1})
        self.atoms = {}         # node -> index of its generator
        self.nodes = []         # index -> node
        self.fractions = {}     # node -> (numerator, denominator)

    def of(self, node):
        graph = self.graph
        for step in needed(graph.instructions, [node], self.twins):
            instruction = graph.instructions[step]
            if instruction.op in LEAVES or instruction.op in CONDITIONS:
                twin = Node(step) if instruction.op in LEAVES else \
                    graph.enter(instruction.op, [self.twins[arg] for arg in instruction.args])
            elif instruction.op in _RATIONAL:
                twin = self._rational(graph.apply(instruction.op, *(self.twins[arg] for arg in instruction.args)))
            else:
                twin = self._function(instruction.op, [self.twins[arg] for arg in instruction.args])
            self.twins[step] = twin
        return self.twins[node]

    def _rational(self, node):
        """The shorter of a node and its reduced fraction."""
        if self.graph.rational(node) is not None:
            return node
        try:
            other = self._build(*self.fraction(node))
        except _Full:
            return node
        return other if self._cost(other) < self._cost(node) else node

    def _cost(self, node):
        return sum(self.graph.instructions[step].op not in LEAVES for step in needed(self.graph.instructions, [node]))

    def _function(self, op, args):
        graph = self.graph
        if len(args) == 1:
            value = graph.rational(args[0])
            table = _AT_ZERO if value == 0 else _AT_ONE if value == 1 else {}
            if op in table:
                return graph.number(table[op])
            inner = graph.instructions[args[0]]
            if (op, inner.op) in _INVERSE:
                return inner.args[0]
            if (op, inner.op) in (("cos", "asin"), ("sin", "acos")):
                return graph.sqrt(self._rational(graph.sub(1, graph.mul(inner.args[0], inner.args[0]))))
        if op == "pow" and graph.rational(args[0]) == 1:
            return graph.number(1)
        return graph.enter(op, args)

    # -- fractions of polynomials

    def fraction(self, node):
        """(numerator, denominator) of a node, in lowest terms."""
        graph = self.graph
        for step in needed(graph.instructions, [node], self.fractions):
            if step in self.fractions:
                continue
            exact = graph.rational(step)
            if exact is not None:
                self.fractions[step] = self.one * flint.fmpq(exact.numerator, exact.denominator), self.one
            elif graph.instructions[step].op in _RATIONAL:
                parts = [self.fractions[arg] for arg in graph.instructions[step].args]
                self.fractions[step] = self._combined(graph.instructions[step].op, *parts) or self._atom(step)
            else:
                self.fractions[step] = self._atom(step)
        return self.fractions[node]

    def _atom(self, node):
        if node not in self.atoms:
            if len(self.nodes) == len(self.generators):
                raise _Full
            self.atoms[node] = len(self.nodes)
            self.nodes.append(Node(node))
        return self.generators[self.atoms[node]], self.one

    def _combined(self, op, a, b=None):
        if op == "neg":
            return -a[0], a[1]
        if op == "div":
            if b[0] == 0:
                return None
            op, b = "mul", (b[1], b[0])
        if len(a[0]) * len(b[1]) > 4 * _TERMS or len(a[1]) * len(b[0]) > 4 * _TERMS or len(a[0]) * len(b[0]) > 4 * _TERMS:
            return None
        denominator = a[1] * b[1]
        if op == "mul":
            numerator = a[0] * b[0]
        else:
            left, right = a[0] * b[1], b[0] * a[1]
            numerator = left + right if op == "add" else left - right
        return self._reduced(numerator, denominator)

    def _reduced(self, numerator, denominator):
        if len(numerator) > _TERMS or len(denominator) > _TERMS or max(numerator.total_degree(), denominator.total_degree()) > _DEGREE:
            return None
        numerator, up = self._without_roots(numerator)
        denominator, below = self._without_roots(denominator)
        numerator, denominator = numerator * below, denominator * up
        common = numerator.gcd(denominator)
        if not common.is_one():
            numerator, denominator = numerator / common, denominator / common
        leading = denominator.leading_coefficient()
        return numerator / leading, denominator / leading

    def _without_roots(self, polynomial):
        """Squares of square roots replaced by their arguments: (polynomial, divisor)."""
        divisor = self.one
        for index, degree in enumerate(polynomial.degrees()[:len(self.nodes)]):
            instruction = self.graph.instructions[self.nodes[index]]
            if degree < 2 or instruction.op != "sqrt":
                continue
            above, below = self.fraction(instruction.args[0])
            half = int(degree) // 2
            total = self.one * 0
            for exponents, coefficient in polynomial.terms():
                power, rest = int(exponents[index]), list(map(int, exponents))
                rest[index] = power % 2
                total += self.context.from_dict({tuple(rest): coefficient}) * above ** (power // 2) * below ** (half - power // 2)
            polynomial, divisor = total, divisor * below ** half
        return polynomial, divisor

    # -- back to instructions

    def _build(self, numerator, denominator):
        above, below = self._factored(numerator), self._factored(denominator)
        return self.graph.div(above, below)

    def _factored(self, polynomial):
        graph = self.graph
        if polynomial == 0:
            return graph.number(0)
        unit, factors = polynomial.factor()
        result = None
        for factor, multiplicity in factors:
            part = graph.power(self._nested(factor), graph.number(int(multiplicity)))
            result = part if result is None else graph.mul(result, part)
        unit = _exact(unit)
        return graph.number(unit) if result is None else graph.mul(graph.number(unit), result)

    def _nested(self, polynomial):
        """Horner's scheme: the atom of most terms taken out first."""
        return self._horner({tuple(map(int, exponents)): _exact(value) for exponents, value in polynomial.terms()})

    def _horner(self, terms):
        graph = self.graph
        counts = [0] * len(self.nodes)
        for exponents in terms:
            for index in range(len(self.nodes)):
                counts[index] += exponents[index] > 0
        best = max(range(len(counts)), key=lambda index: (counts[index], -index), default=None)
        if best is None or not counts[best]:
            (value,) = terms.values()
            return graph.number(value)
        low = min(exponents[best] for exponents in terms if exponents[best])
        inner, rest = {}, {}
        for exponents, value in terms.items():
            if exponents[best]:
                inner[exponents[:best] + (exponents[best] - low,) + exponents[best + 1:]] = value
            else:
                rest[exponents] = value
        product = graph.mul(self._horner(inner), graph.power(self.nodes[best], graph.number(low)))
        return product if not rest else graph.add(product, self._horner(rest))


def _exact(value):
    value = flint.fmpq(value)
    return Fraction(int(value.p), int(value.q))


def domain(graph, node):
    """[(kind, node)] of everything that must hold for `node` to have a value: `nonzero`, `positive` or `not negative`, `inside`.

    None where the expression chooses between branches, whose domains do not hold at once, or has a function whose domain is not said here.
    """
    conditions = []
    for step in needed(graph.instructions, [node]):
        instruction = graph.instructions[step]
        kind = {"div": "nonzero", "log": "positive", "log10": "positive", "log2": "positive", "sqrt": "not negative"}.get(instruction.op)
        if kind is not None:
            conditions.append((kind, instruction.args[1 if instruction.op == "div" else 0]))
        elif instruction.op == "pow":
            exponent = graph.rational(instruction.args[1])
            if exponent is None:
                conditions.append(("positive", instruction.args[0]))
            else:
                conditions.append(("not negative" if exponent > 0 else "positive", instruction.args[0]))
        elif instruction.op in ("where", "log1p", "tan", "asin", "acos", "acosh", "atanh", "atan2", "nan"):
            return None
    return list(dict.fromkeys(conditions))
