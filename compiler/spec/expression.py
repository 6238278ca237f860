"""Infix text to expression tree. The tree keeps the author's form and the place of every part.

The parser keeps its pending operators on a list of its own, so no text can exhaust Python's stack. Trees lean as
deep as a sum is long: walk them with `postorder`, never by recursion.
"""

import re
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Union

from rootwright.operations import OPERATIONS
from rootwright.spec.names import FUNCTIONS, clipped, nearest, quoted

MAX_NESTING = 200                # pending parentheses, calls, signs and powers
MAX_OPERATIONS = 20_000          # in one expression; each argument after a function's first counts as one

_LOGIC = frozenset(key for key, row in OPERATIONS.items() if row.kind == "logic")
_CONDITIONS = _LOGIC | frozenset(key for key, row in OPERATIONS.items() if row.kind == "comparison")


@dataclass(frozen=True, slots=True)
class Number:
    text: str                    # decimal exactly as written, e.g. "2.51" or "1e-3"
    start: int                   # span [start, end) in the expression's text
    end: int


@dataclass(frozen=True, slots=True)
class Name:
    name: str                    # a declared name, or "pi"
    start: int
    end: int


@dataclass(frozen=True, slots=True)
class Apply:
    op: str                      # a key of rootwright.operations.OPERATIONS
    args: tuple["Node", ...]
    start: int
    end: int


Node = Union[Number, Name, Apply]


@dataclass(frozen=True, slots=True)
class Expression:
    text: str                    # as written
    tree: Node


@dataclass(frozen=True, slots=True)
class Problem:
    """What is wrong with the characters [start, end) of an expression's text, and what would be right."""
    start: int
    end: int
    message: str
    help: str


class ExpressionError(ValueError):
    """An expression that cannot be read. `problems` holds everything found before reading stopped."""

    def __init__(self, problems):
        super().__init__("; ".join(problem.message for problem in problems))
        self.problems = tuple(problems)


def parse(text: str, form: str = "number") -> Expression:
    """The expression that `text` spells.

    `form` is "number", "condition" (a comparison, or comparisons joined by and/or/not) or "equation" ("left = right",
    which becomes left - right, or a number that is to be zero). Raises ExpressionError.
    """
    return Expression(text, _Parser(text, form).run())


def postorder(tree: Node) -> Iterator[Node]:
    """Every node of the tree, arguments before the operation that uses them."""
    pending = [(tree, False)]
    while pending:
        node, seen = pending.pop()
        if seen or not isinstance(node, Apply):
            yield node
        else:
            pending.append((node, True))
            pending.extend((argument, False) for argument in reversed(node.args))


def names_in(tree: Node) -> Iterator[Name]:
    """Every mention of a name, from left to right."""
    return (node for node in postorder(tree) if isinstance(node, Name))


_TOKEN = re.compile(r"""
    (?P<space>  [ \t\r\n]+)
  | (?P<number> (?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?)
  | (?P<name>   [A-Za-z][A-Za-z0-9_]*)
  | (?P<symbol> \*\*|<=|>=|==|[-+*/^<>=(),])
""", re.VERBOSE)
_POWER_OF_TEN_IN_FORTRAN = re.compile("[dD]([+-]?[0-9]+)")
_STUCK_TO_NUMBER = re.compile(r"[A-Za-z0-9_.]+")

# symbol -> (operation, precedence). Signs bind tighter than products and looser than powers; "not" looser than
# comparisons. Only powers group from the right.
_BINARY = {
    "=": ("sub", 0), "or": ("or", 1), "and": ("and", 2),
    "<": ("lt", 4), "<=": ("le", 4), ">": ("gt", 4), ">=": ("ge", 4),
    "+": ("add", 5), "-": ("sub", 5), "*": ("mul", 6), "/": ("div", 6), "^": ("pow", 8), "**": ("pow", 8),
}
_PREFIX = {"not": ("not", 3), "-": ("neg", 7)}
_OPEN, _EQUATION, _COMPARISON, _POWER = -1, 0, 4, 8

# Characters and spellings of other languages or of typeset mathematics, with what they are here.
_FOREIGN = {
    "\u2212": "-", "\u2013": "-", "\u00d7": "*", "\u00b7": "*", "\u22c5": "*", "\u00f7": "/", "\u2264": "<=",
    "\u2265": ">=", "\u00b2": "^2", "\u00b3": "^3", "\u03c0": "pi", "\u221a": "sqrt(...)", "\u00a0": "a plain space",
    "&": "and", "|": "or", "!": "not", "[": "(", "]": ")", "{": "(", "}": ")", "?": "where(condition, u, v)",
    "%": "/100",
}


@dataclass(slots=True)
class _Pending:
    """An operator that waits for its right-hand side, or an open parenthesis (op is None, or a function's name)."""
    op: str | None
    precedence: int              # _OPEN for a parenthesis
    operands: int                # how many it takes; for a parenthesis, how many stood on the list when it opened
    start: int
    end: int
    nests: bool                  # counts as a level of nesting


class _Parser:
    def __init__(self, text, form):
        self.text = text
        self.form = form
        self.operands = []       # (node, start, end): the span includes parentheses around the node
        self.pending = []
        self.nesting = 0
        self.operations = 0
        self.wants_operand = True
        self.last = None         # the token before, as (kind, word, start, end)
        self.problems = []

    def run(self):
        for token in self._tokens():
            if self.wants_operand:
                self._operand(*token)
            else:
                self._operator(*token)
            self.last = token
        if self.last is None:
            self._stop(0, len(self.text), "the expression is empty", "write a number, a name or a formula")
        if self.wants_operand:
            end = self.last[3]
            self._stop(end, end, "the expression ends too early", f"something has to follow {self._word(self.last)}")
        self._reduce(_OPEN + 1)
        if self.pending:
            opened = self.pending[-1]
            self._stop(opened.end - 1, opened.end, "this parenthesis is never closed", "add the missing ')'")
        node, start, end = self.operands.pop()
        self._check_kind(node, start, end, self.form == "condition")
        if self.problems:
            raise ExpressionError(self.problems)
        return node

    def _tokens(self):
        """Tokens as (kind, word, start, end); a function's name and its parenthesis are one token, a "call"."""
        position, text, held = 0, self.text, None
        while position < len(text):
            match = _TOKEN.match(text, position)
            kind, word, end = (match.lastgroup, match.group(), match.end()) if match else ("foreign", "", position)
            if held and kind != "space":
                if word == "(":
                    kind, word, position = "call", held[1], held[2]
                else:
                    yield held
                held = None
            if kind == "foreign":
                self._refuse_character(position)
            if kind == "number" and (stuck := _STUCK_TO_NUMBER.match(text, end)):
                self._refuse_number(position, end, stuck.end())
            if kind == "name" and word not in _LOGIC:
                held = kind, word, position, end
            elif kind != "space":
                yield kind, word, position, end
            position = end
        if held:
            yield held

    def _operand(self, kind, word, start, end):
        """Takes a token where a value should begin."""
        if kind == "number":
            self._value(Number(word, start, end), start, end)
        elif kind == "call":
            self._push(_Pending(word, _OPEN, len(self.operands), start, end, True))
        elif word in _PREFIX:
            op, precedence = _PREFIX[word]
            self._push(_Pending(op, precedence, 1, start, end, True))
        elif kind == "name" and word not in _LOGIC:
            self._value(Name(word, start, end), start, end)
        elif word == "(":
            self._push(_Pending(None, _OPEN, len(self.operands), start, end, True))
        elif word == ")" and self.last and self.last[0] == "call":
            self._close(start, end)
        elif word == "+":
            self._count(start, end)
        else:
            place = f"between {self._word(self.last)} and" if self.last else "before"
            self._stop(start, end, f"a value is missing {place} '{word}'",
                       "write a number, a name or a parenthesis there")

    def _operator(self, kind, word, start, end):
        """Takes a token that follows a value."""
        if word in _BINARY:
            op, precedence = _BINARY[word]
            if precedence == _EQUATION:
                self._check_equation_sign(start, end)
            self._reduce(precedence + (precedence in (_COMPARISON, _POWER)))
            if precedence == _COMPARISON and self.pending and self.pending[-1].precedence == _COMPARISON:
                self._stop(start, end, "comparisons cannot be chained", "write a < b and b < c for a < b < c")
            self._push(_Pending(op, precedence, 2, start, end, precedence == _POWER))
            self.wants_operand = True
        elif word == ")":
            self._reduce(_OPEN + 1)
            self._close(start, end)
        elif word == ",":
            self._reduce(_OPEN + 1)
            if not self.pending or self.pending[-1].op is None:
                self._stop(start, end, "a comma has no place here",
                           "commas separate the arguments of a function; decimals have a point, as in 0.5")
            self._count(start, end)
            self.wants_operand = True
        elif word == "==":
            self._stop(start, end, "'==' is not an operator",
                       "an equation has a single '='; conditions compare with < <= > >=")
        else:
            self._stop(start, end, f"an operator is missing between {self._word(self.last)} and "
                       + self._word((kind, word, start, end)), "write * to multiply")

    def _check_equation_sign(self, start, end):
        inside = any(item.precedence == _OPEN for item in self.pending)
        if inside or self.form == "condition":
            self._stop(start, end, "an equation sign has no place here", "conditions compare with < <= > >=")
        if self.form != "equation":
            self._stop(start, end, "an equation sign has no place here", "only the residual is an equation")
        if any(item.precedence == _EQUATION for item in self.pending):
            self._stop(start, end, "a second equation sign", "write left = right, once")

    def _value(self, node, start, end):
        self.operands.append((node, start, end))
        self.wants_operand = False

    def _count(self, start, end):
        self.operations += 1
        if self.operations > MAX_OPERATIONS:
            self._stop(start, end, f"the expression has more than {MAX_OPERATIONS:,} operations",
                       "give parts of it names in [definitions]")

    def _push(self, item):
        if item.op is not None:
            self._count(item.start, item.end)
        self.pending.append(item)
        self.nesting += item.nests
        if self.nesting > MAX_NESTING:
            self._stop(item.start, item.end, f"the expression nests deeper than {MAX_NESTING} levels",
                       "give a part of it a name in [definitions]")

    def _reduce(self, precedence):
        """Applies the pending operators that bind at least as tightly as `precedence`, back to the open parenthesis."""
        while self.pending and self.pending[-1].precedence >= precedence:
            item = self.pending.pop()
            self.nesting -= item.nests
            taken = self.operands[-item.operands:]
            del self.operands[-item.operands:]
            start = item.start if item.operands == 1 else taken[0][1]
            self._apply(item.op, taken, start, taken[-1][2])

    def _close(self, start, end):
        if not self.pending:
            self._stop(start, end, "this parenthesis was never opened", "take it away, or add the missing '('")
        item = self.pending.pop()
        self.nesting -= item.nests
        if item.op is None:
            node, _, _ = self.operands.pop()
            self._value(node, item.start, end)
            return
        taken = self.operands[item.operands:]
        del self.operands[item.operands:]
        self._check_call(item.op, len(taken), item.start)
        self._apply(item.op, taken, item.start, end)

    def _apply(self, op, taken, start, end):
        for index, argument in enumerate(taken):
            self._check_kind(*argument, op in _LOGIC or op == "where" and index == 0)
        self._value(Apply(op, tuple(argument[0] for argument in taken), start, end), start, end)

    def _check_kind(self, node, start, end, condition):
        is_condition = isinstance(node, Apply) and node.op in _CONDITIONS
        if is_condition and not condition:
            self.problems.append(Problem(start, end, "a condition stands where a number is needed",
                                         "conditions belong in where(condition, u, v) and in [domain] require"))
        elif condition and not is_condition:
            self.problems.append(Problem(start, end, "a number stands where a condition is needed",
                                         "compare it with < <= > >=, as in a < b"))

    def _check_call(self, name, given, start):
        if name not in FUNCTIONS:
            near = nearest(name, FUNCTIONS)
            self.problems.append(Problem(
                start, start + len(name), f"no function is called {quoted(name)}",
                f"did you mean {near}?" if near else "write * to multiply; the functions are " + ", ".join(FUNCTIONS)))
            return
        fewest, most = OPERATIONS[name].arity
        if given < fewest or most is not None and given > most:
            wanted = f"{fewest} or more" if most is None else f"{fewest}" if fewest == most else f"{fewest} to {most}"
            self.problems.append(Problem(
                start, start + len(name), f"{name} takes {wanted} argument{'s' * (wanted != '1')}, not {given}",
                "write " + _usage(name, fewest, most)))

    def _refuse_character(self, position):
        character = self.text[position]
        if character in _FOREIGN:
            help = f"write {_FOREIGN[character]} instead"
        elif character == "_":
            help = "names begin with a letter"
        else:
            help = "expressions have ASCII letters, digits, and + - * / ^ ( ) , < > = ."
        self._stop(position, position + 1, f"the character {quoted(character)} has no place in an expression", help)

    def _refuse_number(self, start, number_end, end):
        word = self.text[start:end]
        number, rest = self.text[start:number_end], self.text[number_end:end]
        plain = word.replace("_", "")
        if "_" in word and _TOKEN.fullmatch(plain):
            help = f"digits are not grouped: {clipped(plain)}"
        elif power := _POWER_OF_TEN_IN_FORTRAN.match(self.text, number_end):
            help = f"powers of ten have an e: {clipped(number)}e{clipped(power.group(1))}"
        elif rest in ("e", "E"):
            help = f"the power of ten is missing: {clipped(number)}e0"
        elif not word.startswith(("0x", "0X")) and re.fullmatch("[A-Za-z][A-Za-z0-9_]*", rest):
            help = f"write * to multiply: {clipped(number)}*{clipped(rest)}"
        else:
            help = "numbers are decimal: 12, 0.5 or 1.5e-3"
        self._stop(start, end, f"{quoted(word)} is not a number", help)

    def _word(self, token):
        kind, word, _, _ = token
        return quoted(word + "(" if kind == "call" else word)

    def _stop(self, start, end, message, help):
        self.problems.append(Problem(start, end, message, help))
        raise ExpressionError(self.problems)


def _usage(name, fewest, most):
    if name == "where":
        return "where(condition, u, v)"
    letters = ["a", "b", "c"][:fewest]
    return f"{name}({', '.join(letters)}{', ...' if most is None else ''})"
