"""The Program: one instruction list, printed as C and as Python and interpreted over any arithmetic.

A Program is in static single assignment form: instruction k computes value k from values before it. `Graph` builds one;
equal instructions are entered once, so sharing subexpressions needs no pass of its own.

Two ways to enter an operation. `Graph.apply` is for the author's form: it keeps every operation as written and folds
only arithmetic of exact rational constants. The named methods (`add`, `mul`, ...) are for what we derive ourselves
(derivatives, rounding bounds): they also drop neutral elements, which could change a NaN or a signed zero in the author's form.
"""

from dataclasses import dataclass, field
from fractions import Fraction

from rootwright.calculus.precision import DOUBLE, Precision
from rootwright.operations import OPERATIONS

LEAVES = ("number", "pi", "nan", "input", "named")
CONDITIONS = tuple(key for key, row in OPERATIONS.items() if row.kind in ("comparison", "logic"))


class Node(int):
    """Index of an instruction. A type of its own, so that a plain integer among operands is the number it looks like."""


@dataclass(frozen=True, slots=True)
class Instruction:
    op: str                      # a key of OPERATIONS, or one of LEAVES
    args: tuple[int, ...] = ()
    value: Fraction | str | None = None     # number: its exact value; input, named: its name


@dataclass(frozen=True)
class Program:
    """Instructions, the names the author gave to some of them, and the results asked for."""
    instructions: tuple[Instruction, ...]
    labels: dict[int, str]       # instruction -> name of the definition it computes
    results: dict[str, int]      # name of a result -> instruction


def needed(instructions, roots, known=()):
    """Instructions that the roots depend on, in order (the roots included), less those `known` and what only they need."""
    wanted = set()
    stack = list(roots)
    while stack:
        node = stack.pop()
        if node not in wanted and node not in known:
            wanted.add(node)
            stack.extend(instructions[node].args)
    return sorted(wanted)


def evaluate(instructions, roots, arithmetic, inputs, values=None):
    """Values of the roots and of everything they depend on, {node: value}, in the given arithmetic.

    `arithmetic` offers a method for every operation met, named like its key, with an underscore after and, or, not, min, max, abs, pow
    (`and_`), and `number(Fraction)`, `pi()`, `nan()`. `inputs` maps names to values of that arithmetic. `values` holds what is known
    already and is filled further.
    """
    values = {} if values is None else values
    for node in needed(instructions, roots, values):
        instruction = instructions[node]
        if instruction.op == "number":
            values[node] = arithmetic.number(instruction.value)
        elif instruction.op == "input":
            values[node] = inputs[instruction.value]
        elif instruction.op == "named":
            values[node] = values[instruction.args[0]]
        else:
            method = getattr(arithmetic, METHODS.get(instruction.op, instruction.op))
            values[node] = method(*(values[arg] for arg in instruction.args))
    return values


def interpret(program, arithmetic, inputs, names=None):
    """Values of the named results of a Program (all by default), {name: value}; see `evaluate`."""
    wanted = {name: program.results[name] for name in (program.results if names is None else names)}
    values = evaluate(program.instructions, wanted.values(), arithmetic, inputs)
    return {name: values[node] for name, node in wanted.items()}


METHODS = {key: key + "_" for key in ("and", "or", "not", "min", "max", "abs", "pow")}


@dataclass
class Graph:
    """Builder of a Program. The named methods take nodes, or integers and Fractions for exact numbers."""
    instructions: list[Instruction] = field(default_factory=list)
    labels: dict[int, str] = field(default_factory=dict)
    constants: dict[int, tuple[float, float]] = field(default_factory=dict)     # kept by `constants.nearest`
    precision: Precision = DOUBLE           # what constants are rounded to
    _index: dict[Instruction, int] = field(default_factory=dict)
    _constant: list[bool] = field(default_factory=list)

    # -- entering instructions

    def enter(self, op, args=(), value=None):
        instruction = Instruction(op, tuple(args), value)
        node = self._index.get(instruction)
        if node is None:
            node = Node(len(self.instructions))
            self.instructions.append(instruction)
            self._index[instruction] = node
            self._constant.append(op not in ("input", "nan", *CONDITIONS) and all(self._constant[arg] for arg in args))
        return node

    def number(self, value):
        return self.enter("number", value=Fraction(value))

    def pi(self):
        return self.enter("pi")

    def nan(self):
        return self.enter("nan")

    def input(self, name):
        return self.enter("input", value=name)

    def named(self, name, node):
        """A constant that the author named; prints as its name."""
        return self.enter("named", (node,), name)

    def apply(self, op, *args):
        """Enter an operation of the author's form; exact rational arithmetic on constants is folded."""
        folded = self._fold(op, args)
        return self.enter(op, args) if folded is None else self.number(folded)

    # -- questions

    def is_constant(self, node):
        """True for a number that needs no input."""
        return self._constant[node]

    def rational(self, node):
        """The exact Fraction that a constant node is by rational arithmetic alone, else None."""
        instruction = self.instructions[node]
        if instruction.op == "number":
            return instruction.value
        if instruction.op == "named":
            return self.rational(instruction.args[0])
        if self._constant[node] and instruction.op in _RATIONAL:
            values = [self.rational(arg) for arg in instruction.args]
            if None not in values:
                return _rational(instruction.op, values)
        return None

    def literal(self, node):
        """The Fraction of an exact number, else None."""
        instruction = self.instructions[node]
        return instruction.value if instruction.op == "number" else None

    def _fold(self, op, args):
        values = [self.literal(arg) for arg in args]
        return _rational(op, values) if op in _RATIONAL and None not in values else None

    # -- derived forms: the methods that derivative rules and bounds are written in

    def add(self, a, b):
        a, b = self._operands(a, b)
        if self.literal(a) == 0:
            return b
        if self.literal(b) == 0:
            return a
        (left, left_base), (right, right_base) = self._multiple(a), self._multiple(b)
        if left_base == right_base:
            return self.mul(left + right, left_base)
        if self.instructions[a].op == "add" and self._multiple(self.instructions[a].args[1])[1] == right_base:
            return self.add(self.instructions[a].args[0], self.add(self.instructions[a].args[1], b))
        for one, other in ((a, b), (b, a)):
            if self._is_negative(other):
                return self.sub(one, self.neg(other))
        return self.apply("add", a, b)

    def sub(self, a, b):
        a, b = self._operands(a, b)
        if self.literal(b) == 0:
            return a
        if self.literal(a) == 0:
            return self.neg(b)
        if self._is_negative(b):
            return self.add(a, self.neg(b))
        return self.apply("sub", a, b)

    def neg(self, a):
        (a,) = self._operands(a)
        instruction = self.instructions[a]
        if instruction.op == "neg":
            return instruction.args[0]
        if instruction.op == "sub":
            return self.sub(*reversed(instruction.args))
        if instruction.op in ("mul", "div"):
            first, second = instruction.args
            if self.literal(first) is not None:
                return self.apply(instruction.op, self.number(-self.literal(first)), second)
            if self.instructions[first].op == "neg":
                return self.apply(instruction.op, self.instructions[first].args[0], second)
        return self.apply("neg", a)

    def mul(self, a, b):
        a, b = self._operands(a, b)
        if self.literal(b) is not None:
            a, b = b, a
        factor = self.literal(a)
        if factor == 0:
            return a
        if factor == 1:
            return b
        if factor == -1:
            return self.neg(b)
        if factor is not None and self.instructions[b].op in ("mul", "div"):
            inner = self.literal(self.instructions[b].args[0])
            if inner is not None:
                rest = self.instructions[b].args[1]
                return self.mul(self.number(factor * inner), rest) if self.instructions[b].op == "mul" \
                    else self.div(self.number(factor * inner), rest)
        for left, right in ((a, b), (b, a)):
            if self.instructions[left].op == "neg":
                return self.neg(self.mul(self.instructions[left].args[0], right))
        if self.instructions[a].op == "div" and self.literal(self.instructions[a].args[0]) == 1:
            return self.div(b, self.instructions[a].args[1])
        return self.apply("mul", a, b)

    def div(self, a, b):
        a, b = self._operands(a, b)
        if self.literal(a) == 0:
            return a
        if self.literal(b) == 1:
            return a
        if self.literal(b) == -1:
            return self.neg(a)
        if self.instructions[a].op == "neg":
            return self.neg(self.div(self.instructions[a].args[0], b))
        return self.apply("div", a, b)

    def where(self, condition, a, b):
        a, b = self._operands(a, b)
        return a if a == b else self.enter("where", (condition, a, b))

    def pow(self, a, b):
        """Power; an integer exponent is repeated multiplication."""
        a, b = self._operands(a, b)
        return self.power(a, b)

    def power(self, a, b):
        """The contract's power: integer exponents by repeated squaring and multiplication, 0**0 = 1."""
        exponent = self.rational(b)
        if exponent is None or exponent.denominator != 1 or abs(exponent) > 1024:
            return self.apply("pow", a, b if exponent is None else self.number(exponent))
        n = abs(int(exponent))
        if n == 0:
            return self.number(1)
        result, square = None, a
        while True:
            if n % 2:
                result = square if result is None else self.apply("mul", square, result)
            n //= 2
            if n == 0:
                break
            square = self.apply("mul", square, square)
        return result if exponent > 0 else self.apply("div", self.number(1), result)

    def _multiple(self, node):
        """The value as an exact number times another value."""
        instruction = self.instructions[node]
        factor = self.literal(instruction.args[0]) if instruction.op == "mul" else None
        return (Fraction(1), node) if factor is None else (factor, instruction.args[1])

    def abs_(self, a):
        (a,) = self._operands(a)
        value = self.literal(a)
        return self.apply("abs", a) if value is None else self.number(abs(value))

    def _is_negative(self, node):
        """True for a value written with a minus sign in front."""
        instruction = self.instructions[node]
        if instruction.op in ("mul", "div"):
            instruction = self.instructions[instruction.args[0]]
        return instruction.op == "neg" or instruction.op == "number" and instruction.value < 0

    def _operands(self, *values):
        return [value if isinstance(value, Node) else self.number(value) for value in values]

    def __getattr__(self, name):
        """Every other operation of the table is a method of its own name (`log`, `lt`, `or_`)."""
        op = name.rstrip("_")
        if op not in OPERATIONS:
            raise AttributeError(name)
        return lambda *args: self.apply(op, *self._operands(*args))


_LARGEST_FRACTION = 1 << 14     # bits; beyond it a constant is left to ball arithmetic

_RATIONAL = {
    "add": lambda a, b: a + b,
    "sub": lambda a, b: a - b,
    "mul": lambda a, b: a * b,
    "div": lambda a, b: a / b if b else None,
    "neg": lambda a: -a,
}


def _rational(op, values):
    if any(v.numerator.bit_length() + v.denominator.bit_length() > _LARGEST_FRACTION for v in values):
        return None
    return _RATIONAL[op](*values)
