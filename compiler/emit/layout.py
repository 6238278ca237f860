"""A kernel laid out as statements: what gets a name, what is written in place. Shared by all targets; spells nothing itself.

A value is written in place where it is used once, and becomes a named statement where it is used again, where the author
named it, or where the line would grow too long. Names the author gave stay; the others are numbered.
"""

from dataclasses import dataclass
from itertools import count

from rootwright.calculus.program import CONDITIONS
from rootwright.operations import OPERATIONS

LONGEST = 96                    # characters of an expression before it is split into statements

# Binding strength in C and in Python alike.
CHOICE, OR, AND, NOT, COMPARE, SUM, PRODUCT, SIGN, ATOM = range(9)
_STRENGTH = {"where": CHOICE, "or": OR, "and": AND, "not": NOT, "add": SUM, "sub": SUM, "mul": PRODUCT, "div": PRODUCT, "neg": SIGN}


@dataclass(frozen=True, slots=True)
class Statement:
    name: str
    text: str
    condition: bool              # a truth value, not a number


@dataclass(frozen=True, slots=True)
class Kernel:
    inputs: tuple[str, ...]                 # names of the inputs it reads, in the spec's order
    statements: tuple[Statement, ...]
    results: dict[str, str]                 # name of a result -> its expression
    reads_given: bool                       # whether it reads any of what was given


def lay_out(closure, kernel, target, taken, given=None):
    """Kernel of a Closure, spelled through `target` (`number`, `operation`, `name`), keeping clear of the names `taken`.

    `given` maps instructions that need no computing to the text that reads them.
    """
    program = closure.program
    roots = [program.results[f"{name}"] for name in closure.kernels[kernel]]
    return _Layout(closure, target, taken, given or {}).kernel(closure.kernels[kernel], roots)


def known(closure, kernel):
    """Names of the results that a kernel finds known when it is called, in the order of the array that holds them."""
    still = closure.kernels.get("still", ())
    if kernel in ("curve", "trial"):
        return still
    if kernel in ("outputs", "jacobian", "hessian"):
        return still + shared(closure)
    return ()


def shared(closure):
    """Names of the results that the certificate of a root leaves for the kernels after it."""
    return tuple(name for name in closure.kernels.get("trial", ()) if name.startswith("known_"))


def given(closure, kernel, array):
    """What a kernel reads from the array of what is known: {instruction: text}."""
    return {closure.program.results[name]: f"{array}[{k}]" for k, name in enumerate(known(closure, kernel))}


class _Layout:
    def __init__(self, closure, target, taken, given):
        self.given = given
        self.instructions = closure.program.instructions
        self.labels = closure.program.labels
        self.constants = closure.constants
        self.target = target
        self.taken = set(taken)
        self.numbered = (f"t{k}" for k in count(1))
        self.texts = {}          # node -> (text, strength)
        self.statements = []
        self.inputs = set()
        self.stated = set()

    def kernel(self, names, roots):
        nodes = self._wanted(roots)
        uses = dict.fromkeys(nodes, 0)
        for node in nodes:
            for arg in self._args(node):
                uses[arg] += 1
        for root in roots:
            uses[root] += 1
        for node in nodes:
            self._lay(node, uses[node], node in roots)
        results = {name: self.texts[root][0] for name, root in zip(names, roots)}
        return Kernel(tuple(sorted(self.inputs)), tuple(self.statements), results, not self.given.keys().isdisjoint(nodes))

    def _args(self, node):
        return () if self._folded(node) or node in self.given else self.instructions[node].args

    def _folded(self, node):
        """A constant written as one number; a named constant keeps its name."""
        return node in self.constants and self.instructions[node].op != "named"

    def _wanted(self, roots):
        wanted, stack = set(), list(roots)
        while stack:
            node = stack.pop()
            if node not in wanted:
                wanted.add(node)
                stack.extend(self._args(node))
        return sorted(wanted)

    def _lay(self, node, uses, is_root):
        instruction = self.instructions[node]
        if self._folded(node):
            text = self.target.number(self.constants[node][0])
            self.texts[node] = (text, SIGN if text.startswith("-") else ATOM)
        elif node in self.given:
            self._state(node, self._fresh(self.labels.get(node)), self.given[node])
        elif instruction.op == "input":
            self.inputs.add(instruction.value)
            self.texts[node] = (self.target.name(instruction.value), ATOM)
        elif instruction.op == "nan":
            self.texts[node] = (self.target.nan, ATOM)
        elif instruction.op == "named":
            self._state(node, self.target.name(instruction.value), self.texts[instruction.args[0]][0])
        else:
            text, strength = self._spell(node, instruction)
            label = self.labels.get(node)
            trivial = instruction.op == "neg" and strength >= SIGN and len(text) < 24
            last = is_root and uses == 1            # goes straight into its result
            if not last and (label is not None or uses > 1 and not trivial or len(text) > LONGEST):
                self._state(node, self._fresh(label), text)
            else:
                self.texts[node] = (text, strength)

    def _state(self, node, name, text):
        self.taken.add(name)
        self.stated.add(name)
        self.statements.append(Statement(name, text, self.instructions[node].op in CONDITIONS))
        self.texts[node] = (name, ATOM)

    def _fresh(self, label):
        """The author's name for a definition; for anything else a name that is free."""
        if label is None:
            return next(name for name in self.numbered if name not in self.taken)
        name = self.target.name(label)
        if name in self.target.names.used and name not in self.stated or name not in self.taken:
            return name
        stem = name.rstrip("_")
        return next(f"{stem}_{k}" for k in count(2) if f"{stem}_{k}" not in self.taken)

    def _spell(self, node, instruction):
        op = instruction.op
        strength = _STRENGTH.get(op, COMPARE if OPERATIONS[op].kind == "comparison" else ATOM)
        pattern, strength = self.target.operation(op, strength, [self.constants.get(arg, (0.0,))[0] for arg in instruction.args])
        infix = strength < ATOM
        parts = [self._operand(arg, strength, position) if infix else self.texts[arg][0]
                 for position, arg in enumerate(instruction.args)]
        return pattern.format(*parts), strength

    def _operand(self, arg, strength, position):
        """An operand in the parentheses that keep the author's order of operations."""
        text, inner = self.texts[arg]
        if strength == CHOICE:
            bare = inner > CHOICE
        elif strength == SIGN:
            bare = inner >= PRODUCT and not text.startswith("-")
        elif strength == NOT:
            bare = inner == ATOM
        elif strength in (AND, OR):
            bare = inner >= COMPARE or inner == strength
        elif position == 0:
            bare = inner >= strength
        elif strength == COMPARE:
            bare = inner > COMPARE
        else:
            bare = inner > strength and not text.startswith("-")
        return text if bare else f"({text})"
