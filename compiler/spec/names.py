"""Names a spec may declare, names that are taken, and the nearest known name to a misspelt one."""

import difflib
import keyword
import re

from rootwright.operations import OPERATIONS

# Callable by name in an expression; every other operation is written with an operator.
FUNCTIONS = tuple(key for key, row in OPERATIONS.items() if row.kind in ("function", "choice"))
PREDEFINED = ("pi",)

MAX_NAME_LENGTH = 200            # the module's name is also the stem of file names, which end at 255 bytes

_KEYWORDS_OF_C = frozenset("""
    alignas alignof auto bool break case char const constexpr continue default do double else enum extern false float
    for goto if inline int long nullptr register restrict return short signed sizeof static static_assert struct switch
    thread_local true typedef typeof typeof_unqual union unsigned void volatile while asm
""".split())
_KEYWORDS_OF_CPP = frozenset("""
    and and_eq asm bitand bitor catch char16_t char32_t char8_t class co_await co_return co_yield compl concept
    const_cast consteval constinit decltype delete dynamic_cast explicit export friend mutable namespace new noexcept
    not not_eq operator or or_eq private protected public reinterpret_cast requires static_cast template this throw
    try typeid typename using virtual wchar_t xor xor_eq
""".split())
# C's maths functions that emitted code may call besides those of the spec language.
_FUNCTIONS_OF_C = frozenset(
    "pow fabs fmin fmax fma copysign isfinite isnan isinf signbit nextafter ldexp frexp".split())
_EMITTED = frozenset(
    "solve solve_jacobian tangent adjoint jacobian hessian tangent_adjoint solve_many".split())
# A module of such a name would stand in the way of the headers and modules that it, or its users, include.
_IMPORTED = frozenset("""
    assert complex ctype errno fenv inttypes limits locale math setjmp signal stdarg stdbool stddef stdint stdio stdlib
    string tgmath time
    uchar wchar wctype struct sys types builtins
""".split())
_EVAL_COLUMNS = frozenset("status iterations error_bound".split())

# What people write who come from another language or from handwriting.
_HABITS = {
    "ln": "log", "lg": "log10", "lb": "log2", "arcsin": "asin", "arccos": "acos", "arctan": "atan", "arctan2": "atan2",
    "arsinh": "asinh", "arcosh": "acosh", "artanh": "atanh", "arcsinh": "asinh", "arccosh": "acosh",
    "arctanh": "atanh", "fabs": "abs", "sgn": "sign", "signum": "sign", "if": "where", "ifelse": "where",
    "fmin": "min", "fmax": "max", "minimum": "min", "maximum": "max", "root": "sqrt", "exp1m": "expm1",
}

_IDENTIFIER = re.compile(r"[A-Za-z][A-Za-z0-9_]*\Z")


def nearest(word, known):
    """The known word most like `word`, or None when nothing is near. Long words are not compared: it takes too long."""
    if len(word) > 64:
        return None
    if word in _HABITS and _HABITS[word] in known:
        return _HABITS[word]
    candidates = [name for name in known if abs(len(name) - len(word)) <= 3][:100]
    same = [name for name in candidates if name.lower() == word.lower()]
    return (same or difflib.get_close_matches(word, candidates, 1, 0.6) or [None])[0]


def clipped(text, length=40):
    """`text`, its middle left out when it is long."""
    return text if len(text) <= length else text[:length - 8] + "..." + text[-5:]


def quoted(text):
    """`text` for a message: clipped, in quotes."""
    return f"'{clipped(text)}'"


def refusal(name, is_module=False):
    """Why `name` cannot be declared, as (what is wrong, what would be right); None when it can.

    A module's name is also the name of its file: not one that the emitted Python module imports.
    """
    if not _IDENTIFIER.match(name):
        return "is not a name", f"names are ASCII letters, digits and underscores, a letter first, as in {tidy(name)}"
    if "__" in name:
        return "has two underscores in a row", f"single underscores are fine: {tidy(name)}"
    if len(name) > MAX_NAME_LENGTH:
        return f"has more than {MAX_NAME_LENGTH} characters", "choose a shorter name"
    taken = "is a standard header or module" if is_module and name in _IMPORTED else _taken_by(name)
    if taken:
        return taken, f"choose another name, for example {name}_" + ("value" if name in PREDEFINED else "1")
    return None


def _taken_by(name):
    if name in PREDEFINED:
        return "is predefined"
    if name in FUNCTIONS:
        return "is a function of the spec language"
    if name in _EMITTED:
        return "is the name of an emitted function"
    if name in _EVAL_COLUMNS:
        return "is the name of a column that eval writes"
    if name in _KEYWORDS_OF_C:
        return "is a keyword of C"
    if name in _KEYWORDS_OF_CPP:
        return "is a keyword of C++"
    if keyword.iskeyword(name):
        return "is a keyword of Python"
    if name in _FUNCTIONS_OF_C:
        return "is a function of C's maths library"
    return None


def tidy(name):
    """A legal name in the likeness of `name`, to suggest."""
    kept = re.sub(r"[^A-Za-z0-9]+", "_", name[:40]).strip("_")
    if not kept:
        return "x_1"
    return kept if kept[0].isalpha() and not _taken_by(kept) else "x_" + kept
