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
_EXPONENTS = 8          # terms of an exponent, and powers of an exponential
_RATIONAL = ("add", "sub", "mul", "div", "neg")
_AT_ZERO = {"exp": 1, "expm1": 0, "log1p": 0, "sin": 0, "cos": 1, "tan": 0, "asin": 0, "atan": 0, "sinh": 0, "cosh": 1,
            "tanh": 0, "asinh": 0, "atanh": 0, "erf": 0, "erfc": 1, "sqrt": 0, "cbrt": 0, "abs": 0}
_AT_ONE = {"log": 0, "log10": 0, "log2": 0, "acos": 0, "acosh": 0, "sqrt": 1, "cbrt": 1, "abs": 1}
_INVERSE = {("sin", "asin"), ("cos", "acos"), ("tan", "atan"), ("exp", "log"), ("log", "exp"), ("expm1", "log1p"),
            ("log1p", "expm1"), ("sinh", "asinh"), ("cosh", "acosh"), ("tanh", "atanh")}


class _Full(Exception):
    """More atoms than there are generators."""


class Cancelling:
    """Simplified twins of the nodes of one graph, kept: `of(node)` is the twin of a node.

    With `exponentials` the exponential of a sum is a product, which cancels more and encloses less sharply.
    """

    def __init__(self, graph, roots, exponentials=False):
        self.graph, self.exponentials = graph, exponentials
        self.twins = {}
        count = sum(graph.instructions[node].op not in _RATIONAL + ("number",) for node in needed(graph.instructions, roots))
        names = [f"a{k}" for k in range(3 * count + 16)]
        self.context = flint.fmpq_mpoly_ctx.get(names, "lex")
        self.generators = self.context.gens()
        self.one = self.context.from_dict({(0,) * len(names): 1})
        self.atoms = {}         # node -> index of its generator
        self.nodes = []         # index -> node
        self.bases = {}         # exponent -> factors of it that have an atom
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
                return self._leg(inner.args[0])
            if inner.op == "mul" and graph.rational(inner.args[0]) == 2:
                angle = graph.instructions[inner.args[1]]
                if op == "cos" and angle.op in ("asin", "acos"):
                    twice = graph.mul(2, graph.mul(angle.args[0], angle.args[0]))
                    return self._rational(graph.sub(1, twice) if angle.op == "asin" else graph.sub(twice, 1))
                if op == "sin" and angle.op in ("asin", "acos"):
                    return graph.mul(2, graph.mul(angle.args[0], self._leg(angle.args[0])))
        if op in ("sin", "cos", "tan"):
            turned = self._turned(op, args[0])
            if turned is not None:
                return turned
        if op == "pow" and graph.rational(args[0]) == 1:
            return graph.number(1)
        return graph.enter(op, args)

    def _turned(self, op, node):
        """sin, cos or tan of a sum with a whole number of quarter turns in it, without them; None where there are none."""
        graph, pi = self.graph, self.graph.pi()
        try:
            numerator, denominator = self.fraction(node)
            if pi not in self.atoms or not denominator.is_constant():
                return None
            turn, _ = self._atom(pi)
            (exponents, _), = turn.terms()
            quarters = 2 * _exact(numerator.to_dict().get(exponents, 0)) / _exact(denominator.leading_coefficient())
            if quarters.denominator != 1 or not quarters:
                return None
            rest = self._build(numerator - turn * numerator.to_dict()[exponents], denominator)
        except _Full:
            return None
        if graph.rational(rest) == 0:
            sine, cosine = graph.number(0), graph.number(1)
        else:
            sine, cosine = graph.sin(rest), graph.cos(rest)
        for _ in range(int(quarters) % 4):
            sine, cosine = cosine, graph.neg(sine)
        if op == "tan":
            return graph.tan(rest) if quarters % 2 == 0 and graph.rational(rest) != 0 else graph.div(sine, cosine)
        return sine if op == "sin" else cosine

    def _leg(self, leg):
        """The other leg of a right triangle of hypotenuse 1."""
        graph = self.graph
        return graph.sqrt(self._rational(graph.sub(1, graph.mul(leg, leg))))

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
            elif self.exponentials and graph.instructions[step].op in ("exp", "expm1"):
                power = self._exponential(self.fraction(graph.instructions[step].args[0]))
                if power is None:
                    power = self._atom(step)
                elif graph.instructions[step].op == "expm1":
                    power = self._combined("sub", power, (self.one, self.one)) or self._atom(step)
                self.fractions[step] = power
            elif graph.instructions[step].op in _RATIONAL:
                parts = [self.fractions[arg] for arg in graph.instructions[step].args]
                self.fractions[step] = self._combined(graph.instructions[step].op, *parts) or self._atom(step)
            elif graph.instructions[step].op == "sqrt":
                argument = self.fractions[graph.instructions[step].args[0]]
                self.fractions[step] = self._atom(graph.sqrt(self._build(*argument)))
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

    def _exponential(self, exponent):
        """exp of a sum as the product of exp of its terms, so that exp(a + b) - exp(a) is exp(a)*(exp(b) - 1); None where it is too large."""
        numerator, denominator = exponent
        if len(numerator) > _EXPONENTS:
            return None
        above, below = self.one, self.one
        for exponents, coefficient in numerator.terms():
            unit, under = self._reduced(self.context.from_dict({exponents: 1}), denominator)
            scale = unit.leading_coefficient()
            unit, factor = unit / scale, coefficient * scale
            (top, bottom), power = self._base((unit, under), factor)
            if abs(power) > _EXPONENTS:
                return None
            top, bottom = (top, bottom) if power > 0 else (bottom, top)
            above, below = above * top ** abs(power), below * bottom ** abs(power)
        return self._reduced(above, below)

    def _base(self, unit, factor):
        """(fraction, whole power) that is exp(factor*unit)."""
        graph = self.graph
        node = self._build(*unit)
        inner = graph.instructions[node]
        if inner.op == "log" and factor.q in (1, 2):
            if factor.q == 1:
                return self.fraction(inner.args[0]), int(factor.p)
            return self._atom(graph.sqrt(inner.args[0])), int(factor.p)
        for known in self.bases.get(node, ()):
            power = factor / known
            if power.q == 1 and abs(power.p) <= _EXPONENTS:
                return self._atom(graph.exp(graph.mul(graph.number(_exact(known)), node))), int(power.p)
        half = abs(factor) / 2          # so that the square root of what comes first is a power as well
        self.bases.setdefault(node, []).append(half)
        return self._atom(graph.exp(graph.mul(graph.number(_exact(half)), node))), 2 if factor > 0 else -2

    def expanded(self, node):
        """The value as one reduced fraction in factors, however long, with sums nested and with sums in pairs; [] where it is too large."""
        try:
            fraction = self.fraction(node)
            if fraction == self._atom(node):
                return []
            gathered = self._gathered(*fraction) if len(fraction[1]) == 1 else []
            return list(dict.fromkeys([self._build(*fraction), self._build(*fraction, self._paired), *gathered]))
        except _Full:
            return []

    def _gathered(self, numerator, denominator):
        """[the value as a sum of polynomials times one exponential each], whose exponents are whole again: exp(-(a + b)^2) for a product of three."""
        graph, groups = self.graph, {}
        count = len(self.nodes)
        exponentials = [index for index in range(count) if graph.instructions[self.nodes[index]].op == "exp"]
        (below, unit), = denominator.terms()
        if not any(below[index] for index in exponentials):
            return []
        for exponents, value in numerator.terms():
            key = tuple(int(exponents[index]) - int(below[index]) for index in exponentials)
            rest = tuple(0 if index in exponentials else int(exponents[index]) for index in range(count))
            terms = groups.setdefault(key, {})
            terms[rest] = terms.get(rest, Fraction(0)) + _exact(value / unit)
        total = None
        for key, terms in sorted(groups.items()):
            part = self._horner(terms, self.nodes)
            exponent = self.one * 0, self.one
            for power, index in zip(key, exponentials):
                if power:
                    above, under = self.fraction(graph.instructions[self.nodes[index]].args[0])
                    exponent = exponent and self._combined("add", exponent, (above * power, under))
            if exponent is None:
                return []
            if exponent[0] != 0:
                part = graph.mul(part, graph.exp(self._squared(*exponent)))
            total = part if total is None else graph.add(total, part)
        divisor = self.context.from_dict({tuple(0 if index in exponentials else int(below[index]) for index in range(count))
                                          + (0,) * (len(below) - count): 1})
        return [graph.div(total, self._build(divisor, self.one))]

    def ratios(self, node, other):
        """Factors m, at most a few, with which node - m*other loses a term of its numerator."""
        try:
            (top, under), (other_top, other_under) = self.fraction(node), self.fraction(other)
            if len(top) * len(other_under) > 4 * _TERMS or len(other_top) * len(under) > 4 * _TERMS:
                return []
            here, there = (top * other_under).to_dict(), (other_top * under).to_dict()
        except _Full:
            return []
        return [_exact(here[term] / there[term]) for term in here if term in there]

    def terms(self, node):
        """{term: factor} of a sum, as it is written."""
        graph, total = self.graph, {}
        pending = [(node, Fraction(1))]
        while pending:
            node, factor = pending.pop()
            op, args = graph.instructions[node].op, graph.instructions[node].args
            if op in ("add", "sub"):
                pending += [(Node(args[0]), factor), (Node(args[1]), factor if op == "add" else -factor)]
            elif op == "neg":
                pending.append((Node(args[0]), -factor))
            elif op == "mul" and graph.rational(args[0]) is not None:
                pending.append((Node(args[1]), factor * graph.rational(args[0])))
            elif op in ("div", "mul") and graph.rational(args[1]):
                exact = graph.rational(args[1])
                pending.append((Node(args[0]), factor / exact if op == "div" else factor * exact))
            elif graph.rational(node) is not None:
                one = graph.number(1)
                total[one] = total.get(one, Fraction(0)) + factor * graph.rational(node)
            else:
                total[node] = total.get(node, Fraction(0)) + factor
        return {term: factor for term, factor in sorted(total.items()) if factor}

    def common(self, node, other):
        """Factors m with which node - m*other loses a term, not a constant one."""
        here, there = self.terms(node), self.terms(other)
        return [here[term] / there[term] for term in here if term in there and not self.graph.is_constant(term)]

    def combined(self, node, other, factor):
        """node + factor*other, less the terms that cancel."""
        graph, here, total = self.graph, self.terms(node), None
        for term, value in self.terms(other).items():
            here[term] = here.get(term, Fraction(0)) + factor * value
        for term, value in here.items():
            if value:
                part = graph.mul(graph.number(value), term)
                total = part if total is None else graph.add(total, part)
        return graph.number(0) if total is None else total

    def _squared(self, numerator, denominator):
        """A quotient whose numerator is quadratic in some atom, the square completed: what is squared then stands in one place."""
        graph = self.graph
        for index, degree in enumerate(numerator.degrees()[:len(self.nodes)]):
            parts = {0: {}, 1: {}, 2: {}}
            if degree == 2:
                for exponents, value in numerator.terms():
                    exponents = list(map(int, exponents))
                    power, exponents[index] = exponents[index], 0
                    parts[power][tuple(exponents)] = value
                a, b, c = (self.context.from_dict(parts[power]) for power in (2, 1, 0))
                if a.is_constant() and b != 0:
                    half = b / (2 * a.leading_coefficient())
                    inner = graph.add(self.nodes[index], self._build(half, self.one))
                    square = graph.mul(graph.number(_exact(a.leading_coefficient())), graph.mul(inner, inner))
                    rest = self._build(c - half * half * a.leading_coefficient(), self.one)
                    return graph.div(graph.add(square, rest), self._build(denominator, self.one))
        return self._build(numerator, denominator)

    def _combined(self, op, a, b=None):
        if op == "neg":
            return -a[0], a[1]
        if op == "div":
            if b[0] == 0:
                return None
            op, b = "mul", (b[1], b[0])
        if len(a[0]) * len(b[1]) > 4 * _TERMS or len(a[1]) * len(b[0]) > 4 * _TERMS or len(a[0]) * len(b[0]) > 4 * _TERMS:
            return None
        if op == "mul":
            return self._reduced(a[0] * b[0], a[1] * b[1])
        common = a[1].gcd(b[1])             # taken out before squares of roots are replaced, which hides it
        rest, other = b[1] / common, a[1] / common
        left, right = a[0] * rest, b[0] * other
        numerator, denominator = left + right if op == "add" else left - right, a[1] * rest
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
        pair = self._roots_of(numerator), self._roots_of(denominator)
        if all(pair):
            return self._one_root(numerator, denominator, pair[0][0], pair[1][0])
        leading = denominator.leading_coefficient()
        return numerator / leading, denominator / leading

    def _roots_of(self, polynomial):
        """Indices of the square roots that divide every term."""
        found = [index for index, degree in enumerate(polynomial.degrees()[:len(self.nodes)])
                 if degree and self.graph.instructions[self.nodes[index]].op == "sqrt"]
        return [index for index in found if all(exponents[index] for exponents, _ in polynomial.terms())]

    def _one_root(self, numerator, denominator, over, under):
        """sqrt(a)/sqrt(b) as sqrt(a/b): where the author's form has a value, a is not negative and b positive."""
        graph = self.graph
        parts = [self.fraction(graph.instructions[self.nodes[index]].args[0]) for index in (over, under)]
        ratio = self._reduced(parts[0][0] * parts[1][1], parts[0][1] * parts[1][0])
        if ratio is None:
            return None
        root, _ = self._atom(graph.sqrt(self._build(*ratio)))
        return self._reduced(numerator / self.generators[over] * root, denominator / self.generators[under])

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

    def _build(self, numerator, denominator, written=None):
        """`written` spells a sum from its terms: Horner's scheme by default."""
        above, below = (self._factored(part, written or self._horner) for part in (numerator, denominator))
        return self.graph.div(above, below)

    def _factored(self, polynomial, written):
        graph = self.graph
        if polynomial.is_constant():
            return graph.number(_exact(polynomial.leading_coefficient() if polynomial != 0 else 0))
        used = [index for index, degree in enumerate(polynomial.degrees()) if degree]
        terms = {tuple(int(exponents[index]) for index in used): value for exponents, value in polynomial.terms()}
        atoms = [self.nodes[index] for index in used]
        unit, factors = self._within(len(used)).from_dict(terms).factor()
        result = None
        for factor, multiplicity in factors:
            terms = {tuple(map(int, exponents)): _exact(value) for exponents, value in factor.terms()}
            part = graph.power(written(terms, atoms), graph.number(int(multiplicity)))
            result = part if result is None else graph.mul(result, part)
        unit = _exact(unit)
        return graph.number(unit) if result is None else graph.mul(graph.number(unit), result)

    @staticmethod
    def _within(count):
        """A context of so many generators: factors are found much faster among the few atoms that occur."""
        return flint.fmpq_mpoly_ctx.get([f"a{k}" for k in range(count)], "lex")

    def _paired(self, terms, atoms):
        """Terms of different signs brought together where they have most in common: a*(b - c) + d for a*b + d - a*c."""
        graph, rest, total = self.graph, dict(sorted(terms.items())), None
        for negative in [term for term, value in rest.items() if value < 0]:
            partners = [(sum(map(min, negative, term)), term) for term, value in rest.items() if value > 0]
            shared, partner = max(partners, default=(0, None))
            if shared:
                group = self._horner({term: rest.pop(term) for term in (negative, partner)}, atoms)
                total = group if total is None else graph.add(total, group)
        for sign in (1, -1):
            part = {term: value for term, value in rest.items() if value * sign > 0}
            if part:
                total = self._horner(part, atoms) if total is None else graph.add(total, self._horner(part, atoms))
        return total

    def _horner(self, terms, atoms):
        """Horner's scheme: what all terms have in common taken out, then the atom of most terms."""
        graph = self.graph
        counts = [0] * len(atoms)
        for exponents in terms:
            for index in range(len(atoms)):
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
        product = graph.mul(self._horner(inner, atoms), graph.power(atoms[best], graph.number(low)))
        return product if not rest else graph.add(product, self._horner(rest, atoms))


def _exact(value):
    value = flint.fmpq(value)
    return Fraction(int(value.p), int(value.q))


def factors(graph, node):
    """(constant, {factor: multiplicity}) of a product or quotient, which has the sign of the product of them all."""
    constant, counts, pending = graph.number(1), {}, [node]
    while pending:
        node = pending.pop()
        instruction = graph.instructions[node]
        if graph.is_constant(node):
            constant = graph.mul(constant, node)
        elif instruction.op in ("mul", "div"):
            pending.extend(map(Node, instruction.args))
        elif instruction.op == "neg":
            constant = graph.neg(constant)
            pending.append(Node(instruction.args[0]))
        else:
            counts[node] = counts.get(node, 0) + 1
    return constant, dict(sorted(counts.items()))


def substituted(graph, node, values):
    """The node with other nodes in the place of some: {node: node}."""
    twins = dict(values)
    for step in needed(graph.instructions, [node], twins):
        instruction = graph.instructions[step]
        twins[step] = graph.enter(instruction.op, [twins[arg] for arg in instruction.args], instruction.value)
    return twins[node]


def with_inputs(graph, node, inputs):
    """The node with other nodes in the place of some inputs, {name: node}."""
    return substituted(graph, node, {graph.input(name): value for name, value in inputs.items()})


def domain(graph, node):
    """[(kind, node)] of what makes sure that `node` has a value: `nonzero`, `positive`, `not negative`, all of which must hold;
    and `suffices`: it need not be positive, but no more is said.

    None where the expression chooses between branches, whose domains do not hold at once, or has a function whose domain is not said here.
    """
    conditions = []
    for step in needed(graph.instructions, [node]):
        instruction = graph.instructions[step]
        op, args = instruction.op, instruction.args
        if op in ("where", "atan2", "nan"):
            return None
        if op == "div":
            conditions.append(("nonzero", args[1]))
        elif op in ("log", "log10", "log2"):
            conditions.append(("positive", args[0]))
        elif op == "sqrt":
            conditions.append(("not negative", args[0]))
        elif op == "log1p":
            conditions.append(("positive", graph.add(1, args[0])))
        elif op in ("asin", "acos", "atanh"):
            kind = "positive" if op == "atanh" else "not negative"
            conditions += [(kind, graph.sub(1, args[0])), (kind, graph.add(1, args[0]))]
        elif op == "acosh":
            conditions.append(("not negative", graph.sub(args[0], 1)))
        elif op == "tan":
            conditions.append(("nonzero", graph.cos(args[0])))
        elif op == "pow":
            exponent = graph.rational(args[1])
            if exponent is None or exponent.denominator == 1:       # 0^0 is 1, and (-2)^n has a value for whole n
                kind = "suffices"
            else:
                kind = "not negative" if exponent > 0 else "positive"
            conditions.append((kind, args[0]))
    return list(dict.fromkeys(conditions))
