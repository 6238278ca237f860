"""Which names a spec declares, and which of them each expression may use."""

from rootwright.spec.expression import Expression, names_in
from rootwright.spec.names import FUNCTIONS, PREDEFINED, clipped, nearest, quoted, refusal
from rootwright.spec.source import Path
from rootwright.spec.tables import Findings

CONSTANT, PARAMETER, DEFINITION, UNKNOWN, OUTPUT = "constant", "parameter", "definition", "unknown", "output"

# Where an expression stands -> the kinds of names it may use, and how to say so. Definitions that depend on the unknown
# are closed to all but the residual, definitions and outputs.
_FIXED = (CONSTANT,), "numbers, constants and pi only"
_GIVEN = (CONSTANT, PARAMETER, DEFINITION), "parameters, constants, and definitions free of the unknown"
_FREE = (CONSTANT, PARAMETER, DEFINITION, UNKNOWN), "parameters, constants, definitions and the unknown"
_ALLOWED = {
    "constant": _FIXED, "range": _FIXED, "published value": _FIXED,
    "bracket": _GIVEN, "start": _GIVEN, "condition": _GIVEN,
    "definition": _FREE, "residual": _FREE,
    "output": ((*_FREE[0], OUTPUT), "parameters, constants, definitions, the unknown, and outputs above it"),
}


class Scope:
    """The declared names. Declare and define all of them first, then check every expression."""

    def __init__(self, findings: Findings):
        self.findings = findings
        self.kinds = {}              # name -> kind
        self.spans = {}              # name -> span of its declaration in the file
        self.order = {}              # name -> position among all declarations
        self.uses = {}               # constant, definition or output -> names that its expression mentions -> where
        self.paths = {}              # constant, definition or output -> path of its expression
        self.has_gaps = False        # a section that declares names is missing: then unknown names are no news
        self._dependent = None       # names whose value depends on the unknown, once somebody asks

    def declare(self, name: str, kind: str, path: Path, at_value: bool = False) -> None:
        """Declares `name`, which is the key at `path` or (`at_value`) the text there."""
        source = self.findings.source
        span = source.value_span(path) if at_value else source.key_span(path)
        refused = refusal(name)
        if refused:
            self.findings.error_in(span, f"the name {quoted(name)} {refused[0]}", refused[1])
        if name in self.kinds:
            (first, earlier), (second, _) = sorted([(self.spans[name], self.kinds[name]), (span, kind)])
            line = source.line_of(first)
            self.findings.error_in(second, f"the name {quoted(name)} is taken by the {earlier} on line {line}",
                                   "give each constant, parameter, definition, unknown and output its own name")
            return
        # A refused name counts as declared: its uses are not further mistakes.
        self.kinds[name], self.spans[name], self.order[name] = kind, span, len(self.order)

    def define(self, name: str, expression: Expression | None, path: Path) -> None:
        """Notes what a constant, definition or output stands for, and where its expression is."""
        self.uses[name], self.paths[name] = self.mentioned(expression), path

    def mentioned(self, expression: Expression | None) -> dict[str, tuple[int, int]]:
        """The names in the expression in order of appearance, each with the span of its first mention."""
        found = {}
        for mention in names_in(expression.tree) if expression else ():
            found.setdefault(mention.name, (mention.start, mention.end))
        return found

    def check(self, expression: Expression | None, place: str, path: Path) -> None:
        """Reports each name that the expression at `path` may not use where it stands, once."""
        allowed, wording = _ALLOWED[place]
        for word, part in self.mentioned(expression).items():
            kind = self.kinds.get(word)
            if word in PREDEFINED or kind is None and self.has_gaps:
                continue
            if kind is None:
                self.findings.error(path, f"the name {quoted(word)} is not declared",
                                    self._likeness(word, allowed), part)
            elif kind not in allowed:
                self.findings.error(path, f"the {place} uses the {kind} {quoted(word)}", f"it can have {wording}", part)
            elif allowed is _GIVEN[0] and kind == DEFINITION and self._depends_on_unknown(word):
                self.findings.error(path, f"the {place} uses {quoted(word)}, a definition that depends on the unknown",
                                    f"it can have {wording}", part)

    def check_order(self) -> None:
        """Reports uses of later declarations of the same kind, and circles. Call when every expression was checked."""
        in_circles = set()
        for name, path in self.paths.items():
            for word, part in self.uses[name].items():
                is_earlier = self.kinds.get(word) != self.kinds[name] or self.order[word] < self.order[name]
                if is_earlier or word in in_circles:
                    continue
                chain = self._chain(word, name)
                if chain:
                    in_circles.update(chain)
                    circle = clipped(" -> ".join([name, *chain]), 200)
                    self.findings.error(path, f"the {self.kinds[name]} {quoted(name)} is defined by itself: {circle}",
                                        "one of them must be defined without the others", part)
                else:
                    self.findings.error(path, f"{quoted(word)} is used before it is defined",
                                        f"move {word} above {name}: {self.kinds[name]}s are read in order", part)

    def _depends_on_unknown(self, name):
        if self._dependent is None:
            users = {}
            for user, words in self.uses.items():
                for word in words:
                    users.setdefault(word, []).append(user)
            self._dependent = _closure([name for name, kind in self.kinds.items() if kind == UNKNOWN], users)
        return name in self._dependent

    def reach(self, names) -> set[str]:
        """The names, and everything that their definitions use."""
        return _closure(names, self.uses)

    def _chain(self, first, last):
        """Names that lead from `first` to `last` by use, both included; empty when none do."""
        came_from, pending = {first: None}, [first]
        while pending:
            name = pending.pop()
            if name == last:
                chain = []
                while name is not None:
                    chain.append(name)
                    name = came_from[name]
                return chain[::-1]
            for word in self.uses.get(name, ()):
                if word not in came_from:
                    came_from[word] = name
                    pending.append(word)
        return []

    def _likeness(self, word, allowed):
        if word in FUNCTIONS:
            return f"{word} is a function: write {word}(...)"
        near = nearest(word, [*(name for name, kind in self.kinds.items() if kind in allowed), *PREDEFINED])
        if near:
            return f"did you mean {near}?"
        if word == "e":
            return "write exp(1) for Euler's number, or declare e as a constant"
        return "declare it in [constants], [parameters] or [definitions]"


def _closure(names, leads_to):
    """The names, and all that are reached from them."""
    found, pending = set(), list(names)
    while pending:
        name = pending.pop()
        if name not in found:
            found.add(name)
            pending.extend(leads_to.get(name, ()))
    return found
