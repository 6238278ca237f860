"""The checked spec: what one closure says, by name, with nothing evaluated yet.

`Model` is the type at the door of `spec/`: every name in it is declared, every
expression is a tree over the operation table, units are consistent. Numbers are
still the text that the author wrote; `calculus/` gives them values.
"""

from dataclasses import dataclass

from rootwright.spec.expression import Expression


@dataclass(frozen=True, slots=True)
class Constant:
    name: str
    expression: Expression
    unit: str | None
    about: str


@dataclass(frozen=True, slots=True)
class Parameter:
    name: str
    low: Expression              # ends of the range: constant expressions
    high: Expression
    unit: str | None
    spread: str                  # "linear" | "log"
    differentiate: bool
    about: str


@dataclass(frozen=True, slots=True)
class Definition:
    name: str
    expression: Expression


@dataclass(frozen=True, slots=True)
class Unknown:
    name: str
    lower: Expression
    upper: Expression
    unit: str | None
    about: str
    root: str                    # "only"
    open_lower: bool
    open_upper: bool
    start: Expression | None


@dataclass(frozen=True, slots=True)
class Output:
    name: str
    expression: Expression
    unit: str | None
    about: str


@dataclass(frozen=True, slots=True)
class Published:
    given: tuple[tuple[str, Expression], ...]       # parameter -> constant expression, in parameter order
    expect: tuple[tuple[str, Expression], ...]      # result -> constant expression
    tolerance: tuple[tuple[str, Expression], ...]   # result -> absolute tolerance
    source: str


@dataclass(frozen=True, slots=True)
class Model:
    name: str
    title: str
    source: str
    caution: str
    dimensions: str                        # "checked" | "label" | "none" (no unit given, or not everywhere)
    constants: tuple[Constant, ...]
    parameters: tuple[Parameter, ...]
    definitions: tuple[Definition, ...]
    unknown: Unknown
    require: tuple[Expression, ...]        # conditions, each a comparison or and/or/not of comparisons
    equation: str                          # as the author wrote it
    residual: Expression                   # the residual g: "left = right" is Apply("sub", (left, right))
    outputs: tuple[Output, ...]
    published: tuple[Published, ...]
    digest: str                            # SHA-256 of the spec's bytes, hexadecimal

    @property
    def results(self) -> tuple[str, ...]:
        """Names of the results: the unknown first, then the outputs in spec order."""
        return (self.unknown.name, *(output.name for output in self.outputs))
