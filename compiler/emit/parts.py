"""A large kernel in parts, each a function of its own that leaves what later ones need in an array.

C compilers share out registers among all values of a function at once, in time that grows much faster than its length: gcc
takes half a minute for ten thousand statements in one function, and seconds for the same in parts.
"""

import re
from dataclasses import dataclass

from rootwright.emit.layout import Statement

WHOLE = 600                 # statements of a kernel that stays one function
MOST = 80                   # statements of a part

_WORD = re.compile(r"[A-Za-z_]\w*")


@dataclass(frozen=True, slots=True)
class Part:
    """`reads` and `keeps`: statements of other parts and of this one with their places in the array."""
    reads: tuple[tuple[Statement, int], ...]
    statements: tuple[Statement, ...]
    keeps: tuple[tuple[Statement, int], ...]
    words: frozenset[str]                       # all names in the statements


def in_parts(statements, results):
    """(parts, size of the array) of a kernel's statements, for the texts of its results, a sequence: the last part has no statements of its own, and the results are evaluated there.

    A place in the array is used again once nothing later reads what is there.
    """
    statements = _as_needed(statements, results)
    groups = [statements[k:k + MOST] for k in range(0, len(statements), MOST)] + [()]
    texts = [[step.text for step in group] for group in groups]
    texts[-1] = list(results)
    words = [frozenset(word for text in part for word in _WORD.findall(text)) for part in texts]
    made = {step.name: (step, k) for k, group in enumerate(groups) for step in group}
    last = {}                                   # name -> the last part that reads it
    for k, names in enumerate(words):
        for name in names & made.keys():
            last[name] = k
    places, free, size, parts = {}, [], 0, []
    for k, group in enumerate(groups):
        reads = sorted(name for name in words[k] & made.keys() if made[name][1] < k)
        keeps = [step for step in group if last.get(step.name, k) > k]
        before = tuple((made[name][0], places[name]) for name in reads)
        free += sorted((places[name] for name in reads if last[name] == k), reverse=True)
        for step in keeps:
            if not free:
                free.append(size)
                size += 1
            places[step.name] = free.pop()
        parts.append(Part(before, group, tuple((step, places[step.name]) for step in keeps), words[k]))
    return parts, size


def _as_needed(statements, results):
    """The statements in an order in which each comes shortly before the first that needs it: fewer wait for later parts."""
    made = {step.name: step for step in statements}
    needs = {step.name: _needed(step.text, made) for step in statements}
    ordered, seen = [], set()
    pending = [(name, False) for text in reversed(results) for name in reversed(_needed(text, made))]
    while pending:
        name, ready = pending.pop()
        if ready:
            ordered.append(made[name])
        elif name not in seen:
            seen.add(name)
            pending.append((name, True))
            pending += [(other, False) for other in reversed(needs[name])]
    return tuple(ordered)


def _needed(text, made):
    return [word for word in dict.fromkeys(_WORD.findall(text)) if word in made]
