"""Infix text to expression tree. The tree keeps the author's form and the place of every part."""

from dataclasses import dataclass
from typing import Union


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
