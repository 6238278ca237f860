"""The author's expressions in ball arithmetic, straight from the trees of the Model.

The reference for `verify` shares nothing with the compiler's own path: no lowering, no folding, no common
subexpressions, no derivative rules. Numbers are the exact decimals that were written, parameters exact numbers; every
value is a rigorous enclosure at the working precision (`calculus/balls.py`).
"""

from dataclasses import dataclass
from fractions import Fraction

from rootwright.calculus.balls import Balls, precision
from rootwright.calculus.program import METHODS
from rootwright.spec.expression import Apply, Name, Number, postorder

CONSTANT, FIXED, MOVING = 0, 1, 2       # depends on nothing, on parameters, on the unknown
COMPARISONS = ("lt", "le", "gt", "ge")
BALLS = Balls()


def choose(condition, a, b, *operands):
    """`where`: a comparison with what is not a finite number makes the result NaN."""
    return BALLS.where(condition, a, b) if all(operand.is_finite() for operand in operands) else BALLS.nan()


@dataclass(frozen=True, slots=True)
class Step:
    op: str                      # an operation's key, "number", "pi" or "input"
    apply: object                # function of the arguments' values, or None
    args: tuple[int, ...]
    value: object                # the Fraction of a number, the name of an input
    depends: int                 # CONSTANT, FIXED or MOVING


class Trees:
    """Steps of the expressions of a Model. Targets are step numbers: `residual`, `ends`, and `outputs` by name."""

    def __init__(self, model):
        self.model = model
        self.steps = []
        self.names = {"pi": self._enter("pi", (), None)}
        for constant in model.constants:
            self.names[constant.name] = self.add(constant.expression)
        for parameter in model.parameters:
            self.names[parameter.name] = self._enter("input", (), parameter.name)
        self.unknown = self.names[model.unknown.name] = self._enter("input", (), model.unknown.name)
        for definition in model.definitions:
            self.names[definition.name] = self.add(definition.expression)
        self.residual = self.add(model.residual)
        self.ends = (self.add(model.unknown.lower), self.add(model.unknown.upper))
        self.outputs = {}
        for output in model.outputs:
            self.outputs[output.name] = self.names[output.name] = self.add(output.expression)
        self._orders = {}
        self._constants = {}
        self._moving = {}

    def add(self, expression):
        """Steps of an expression over the declared names; returns the number of its last step."""
        stack = []
        for node in postorder(expression.tree):
            if isinstance(node, Number):
                stack.append(self._enter("number", (), Fraction(node.text)))
            elif isinstance(node, Name):
                stack.append(self.names[node.name])
            else:
                args = stack[len(stack) - len(node.args):]
                del stack[len(stack) - len(node.args):]
                stack.append(self._operation(node, args))
        return stack[0]

    def _operation(self, node: Apply, args):
        if node.op in ("min", "max"):
            result = args[0]
            for arg in args[1:]:
                result = self._enter(node.op, (result, arg))
            return result
        if node.op == "where":
            return self._enter("where", (*args, *self._operands(args[0])))
        return self._enter(node.op, tuple(args))

    def _operands(self, condition):
        """What the comparisons of a condition compare."""
        step = self.steps[condition]
        return step.args if step.op in COMPARISONS else tuple(x for arg in step.args for x in self._operands(arg))

    def _enter(self, op, args, value=None):
        if op == "input":
            depends = MOVING if value == self.model.unknown.name else FIXED
        else:
            depends = max((self.steps[arg].depends for arg in args), default=CONSTANT)
        apply = None if op in ("number", "pi", "input") else choose if op == "where" else \
            getattr(BALLS, METHODS.get(op, op))
        self.steps.append(Step(op, apply, args, value, depends))
        return len(self.steps) - 1

    def order(self, target):
        """The steps that a target needs, in order, sorted by what they depend on: (constant, fixed, moving)."""
        if target not in self._orders:
            needed, pending = set(), [target]
            while pending:
                step = pending.pop()
                if step not in needed:
                    needed.add(step)
                    pending.extend(self.steps[step].args)
            inner = [k for k in sorted(needed) if self.steps[k].op != "input"]
            self._orders[target] = tuple([k for k in inner if self.steps[k].depends == kind]
                                         for kind in (CONSTANT, FIXED, MOVING))
        return self._orders[target]

    def moving(self, target):
        """The steps of a target that move with the unknown, in order: (step, function, first argument, second or None,
        all of them where there are more)."""
        if target not in self._moving:
            self._moving[target] = [
                (k, step.apply, step.args[0], step.args[1] if len(step.args) > 1 else None, step.args[2:] and step.args)
                for k in self.order(target)[MOVING] for step in [self.steps[k]]]
        return self._moving[target]

    def constants(self, target, bits):
        """Values of the constant steps of a target at a precision, worked out once."""
        known = self._constants.setdefault(bits, {})
        for k in self.order(target)[CONSTANT]:
            if k not in known:
                known[k] = self._leaf(k) if self.steps[k].apply is None else run(self.steps[k], known)
        return known

    def _leaf(self, k):
        return BALLS.pi() if self.steps[k].op == "pi" else BALLS.number(self.steps[k].value)


def run(step, values):
    """Value of a step whose arguments are known."""
    return step.apply(*[values[arg] for arg in step.args])


class Place:
    """The expressions at fixed parameters {name: ball}: values as functions of the unknown, at any precision."""

    def __init__(self, trees, parameters):
        self.trees = trees
        self.parameters = parameters
        self._fixed = {}

    def values(self, target, x, bits):
        """Values of all steps of a target, {step: ball}, good until the next call. x: None where it plays no part."""
        with precision(bits):
            if (target, bits) not in self._fixed:
                values = dict(self.trees.constants(target, bits))
                for name, value in self.parameters.items():
                    values[self.trees.names[name]] = value
                for k in self.trees.order(target)[FIXED]:
                    values[k] = run(self.trees.steps[k], values)
                self._fixed[target, bits] = values
            values = self._fixed[target, bits]
            values[self.trees.unknown] = x
            for k, apply, a, b, more in self.trees.moving(target):       # nearly all of the time of `verify` is spent here
                values[k] = apply(*[values[arg] for arg in more]) if more else \
                    apply(values[a]) if b is None else apply(values[a], values[b])
            return values

    def value(self, target, x, bits):
        return self.values(target, x, bits)[target]

    def residual(self, x, bits):
        return self.value(self.trees.residual, x, bits)
