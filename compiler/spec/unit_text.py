"""The text of a unit, such as kg/m3 or J/(mol K), to its dimensions and scale.

Everyday SI units are known here, exactly as the SI brochure defines them; every other name is looked up, alone, in the
pint library, which is loaded for that only (it takes half a second). No text of a spec reaches a parser but this one.
"""

import functools
import math
import re
from dataclasses import dataclass, field
from fractions import Fraction

MAX_LENGTH = 120                 # characters of a unit's text
MAX_POWER = 100                  # largest numerator and denominator of a written exponent
_MAX_NESTING = 10
_SCALE_TOLERANCE = 1e-9          # relative: factors of units are products of rounded decimals


class UnitError(ValueError):
    """A text that is no unit. `start` and `end` tell where in it."""

    def __init__(self, start, end, message, help):
        super().__init__(message)
        self.start, self.end, self.message, self.help = start, end, message, help


@dataclass(frozen=True, slots=True)
class Unit:
    dimensions: tuple[tuple[str, Fraction], ...]     # base unit -> exponent, without zeros, in alphabetical order
    scale: float                                     # natural logarithm of the factor to SI base units
    origin: str = ""                                 # the offset scale of a temperature, e.g. "degC"; "" elsewhere
    text: str = field(default="", compare=False)     # as declared; "" for a unit that was inferred

    def __str__(self):
        return self.text or _spelled(self)

    def times(self, other: "Unit", power: Fraction | int = 1) -> "Unit":
        """self * other^power."""
        exponents = dict(self.dimensions)        # a product has no origin
        for base, exponent in other.dimensions:
            exponents[base] = exponents.get(base, Fraction(0)) + exponent * power
        nonzero = sorted((base, exponent) for base, exponent in exponents.items() if exponent)
        return Unit(tuple(nonzero), self.scale + other.scale * float(power))

    def to_the(self, power: Fraction | int) -> "Unit":
        return ONE.times(self, power)

    def agrees(self, other: "Unit") -> bool:
        """Same dimensions, same scale, same origin: what may be added and compared."""
        return (self.dimensions == other.dimensions and self.origin == other.origin
                and abs(self.scale - other.scale) <= _SCALE_TOLERANCE)

    def difference(self) -> "Unit":
        """The unit of differences: kelvin for temperatures in degC."""
        return Unit(self.dimensions, self.scale) if self.origin else self


ONE = Unit((), 0.0, text="1")


def _si(text, factor=1.0, **exponents):
    dimensions = sorted((base, Fraction(exponent)) for base, exponent in exponents.items())
    return Unit(tuple(dimensions), math.log(factor), text=text)


# Units that take SI prefixes, and units that take none. The SI brochure, 9th edition (2019), tables 2, 4, 7 and 8;
# percent, ppm and bar in common use.
_PREFIXED = {unit.text: unit for unit in (
    _si("m", m=1), _si("g", 1e-3, kg=1), _si("s", s=1), _si("A", A=1), _si("K", K=1), _si("mol", mol=1),
    _si("Hz", s=-1), _si("N", kg=1, m=1, s=-2), _si("Pa", kg=1, m=-1, s=-2), _si("J", kg=1, m=2, s=-2),
    _si("W", kg=1, m=2, s=-3), _si("C", A=1, s=1), _si("V", kg=1, m=2, s=-3, A=-1), _si("F", kg=-1, m=-2, s=4, A=2),
    _si("ohm", kg=1, m=2, s=-3, A=-2), _si("S", kg=-1, m=-2, s=3, A=2), _si("Wb", kg=1, m=2, s=-2, A=-1),
    _si("T", kg=1, s=-2, A=-1), _si("H", kg=1, m=2, s=-2, A=-2), _si("L", 1e-3, m=3), _si("bar", 1e5, kg=1, m=-1, s=-2),
)}
_PREFIXES = {"G": 1e9, "M": 1e6, "k": 1e3, "d": 1e-1, "c": 1e-2, "m": 1e-3, "u": 1e-6, "n": 1e-9}
_PLAIN = {unit.text: unit for unit in (
    _si("cd", cd=1), _si("rad"), _si("sr"), _si("deg", math.pi / 180), _si("percent", 1e-2), _si("ppm", 1e-6), _si("l", 1e-3, m=3),
    _si("min", 60.0, s=1), _si("h", 3600.0, s=1), Unit((("K", Fraction(1)),), 0.0, "degC", "degC"),
)}

# Dimensions as pint calls them -> base units.
_BASES = {"[length]": "m", "[mass]": "kg", "[time]": "s", "[current]": "A", "[temperature]": "K", "[substance]": "mol",
          "[luminosity]": "cd"}

# Letters and signs of print, as the tables spell them.
_SPELLINGS = (("\u2103", "degC"), ("\u00b0C", "degC"), ("\u00b0F", "degF"), ("\u00b0", "deg"), ("%", "percent"),
              ("\u2030", "permille"), ("\u00b5", "u"), ("\u03bc", "u"), ("\u03a9", "ohm"), ("\u2126", "ohm"),
              ("\u00c5", "angstrom"))
_SUPERSCRIPTS = str.maketrans("\u2070\u00b9\u00b2\u00b3\u2074\u2075\u2076\u2077\u2078\u2079\u207b", "0123456789-")

_TOKEN = re.compile(r"""
    (?P<space>  [ ]+)
  | (?P<number> [0-9]+(?:\.[0-9]+)?(?:e[+-]?[0-9]{1,2})?(?![0-9.]))
  | (?P<name>   [A-Za-z_\u00b0\u00b5\u03bc\u03a9\u2126\u00c5\u2103][A-Za-z_0-9\u00b5\u03bc\u03a9\u2126\u00c5]*
                (?:-[0-9]+)? | [%\u2030])
  | (?P<raised> [\u207b\u00b9\u00b2\u00b3\u2070\u2074-\u2079]+)
  | (?P<symbol> \*\*|[*/^()\u00b7\u22c5-])
""", re.VERBOSE)
_NAME_WITH_POWER = re.compile(r"(\D+?)(-?[0-9]+)")
_EXAMPLES = "units are written like kg/m3, m^3/s, J/(mol K) or 1"


@functools.lru_cache(maxsize=4096)
def parse_unit(text: str) -> Unit:
    """The unit that `text` names. Raises UnitError.

    Names are joined by * or a space and by /; powers are m2, m^2, m**2, m-2, m^(1/3). After a / no product may follow
    outside parentheses: J/mol K could be read in two ways. A temperature in degC (or degF) keeps its origin only when
    it stands alone: in 1/degC or J/(kg degC) a difference is meant.
    """
    if len(text) > MAX_LENGTH:
        raise UnitError(0, len(text), f"the unit has more than {MAX_LENGTH} characters", _EXAMPLES)
    if text.strip() == "-":
        return Unit((), 0.0, text=text.strip())
    unit = _UnitParser(text).run()
    return Unit(unit.dimensions, unit.scale, unit.origin, " ".join(text.split()))


class _UnitParser:
    """Recursive descent over a text that is short."""

    def __init__(self, text):
        self.text = text
        self.tokens = []
        self.at = 0
        position = 0
        while position < len(text):
            match = _TOKEN.match(text, position)
            if match is None:
                raise UnitError(position, position + 1, "this character has no place in a unit", _EXAMPLES)
            self.tokens.append((match.lastgroup, match.group(), position, match.end()))
            position = match.end()
        self.tokens = [token for token in self.tokens if token[0] != "space"]

    def run(self):
        unit = self._product(0)
        if self.at < len(self.tokens):
            self._stop("the unit should have ended here")
        return unit

    def _peek(self):
        return self.tokens[self.at] if self.at < len(self.tokens) else ("end", "", len(self.text), len(self.text))

    def _stop(self, message, help=_EXAMPLES):
        _, _, start, end = self._peek()
        raise UnitError(start, end, message, help)

    def _product(self, nesting):
        unit, divided = self._factor(nesting), False
        while True:
            kind, word, _, _ = self._peek()
            if word == "/":
                self.at += 1
                unit, divided = unit.times(self._factor(nesting), -1), True
            elif word in ("*", "\u00b7", "\u22c5") or kind in ("name", "number") or word == "(":
                if divided:
                    self._stop("a product after a division can be read in two ways", "use parentheses, as in J/(mol K)")
                self.at += word in ("*", "\u00b7", "\u22c5")
                unit = unit.times(self._factor(nesting))
            else:
                return unit

    def _factor(self, nesting):
        kind, word, start, end = self._peek()
        if word == "(":
            if nesting == _MAX_NESTING:
                self._stop("the unit nests too deep")
            self.at += 1
            unit = self._product(nesting + 1)
            if self._peek()[1] != ")":
                self._stop("the unit lacks a ')' here")
        elif kind == "number":
            if len(word) > 20 or float(word) == 0.0:
                self._stop("the factor of a unit is a short number above zero")
            unit = Unit((), math.log(float(word)))
        elif kind == "name":
            unit = self._named(word, start, end)
        else:
            self._stop("the name of a unit is missing here")
        self.at += 1
        kind, word, _, _ = self._peek()
        if kind == "raised":
            return self._raised(unit, word.translate(_SUPERSCRIPTS))
        if word in ("^", "**"):
            self.at += 1
            return self._raised(unit, self._exponent())
        return unit

    def _exponent(self):
        """The text of a number, possibly negative, or of a quotient in parentheses; the last token is left to take."""
        words, inside = "", self._peek()[1] == "("
        self.at += inside
        while self._peek()[0] == "number" or self._peek()[1] == "-" or inside and self._peek()[1] == "/":
            words += self._peek()[1]
            self.at += 1
        if inside and self._peek()[1] != ")":
            self._stop("an exponent is a number or a quotient such as (1/3)")
        self.at -= not inside
        return words

    def _raised(self, unit, exponent):
        try:
            power = Fraction(exponent) if len(exponent) <= 10 and "e" not in exponent else None
        except (ValueError, ZeroDivisionError):
            power = None
        if power is None or max(abs(power.numerator), power.denominator) > MAX_POWER:
            self._stop("an exponent is a number or a quotient such as (1/3)", f"neither part above {MAX_POWER}")
        self.at += 1
        raised = unit.to_the(power)
        if any(max(abs(e.numerator), e.denominator) > MAX_POWER for _, e in raised.dimensions):
            self._stop("the exponents of the unit are out of reach", f"keep them up to {MAX_POWER}")
        return raised

    def _named(self, word, start, end):
        with_power = _NAME_WITH_POWER.fullmatch(word)
        unit = _look_up(with_power.group(1)) if with_power else None
        if unit:
            power = int(with_power.group(2)) if len(with_power.group(2)) <= 3 else MAX_POWER + 1
            if abs(power) > MAX_POWER:
                self._stop("the exponents of the unit are out of reach", f"keep them up to {MAX_POWER}")
            return unit.to_the(power)
        unit = _look_up(word)
        if unit is None:
            raise UnitError(start, end, f"the unit '{word[:40]}' is not known",
                            _EXAMPLES + '; dimensions = "label" keeps units as labels')
        return unit


def _look_up(name):
    """The unit of that one name; None where it has none."""
    for sign, spelling in _SPELLINGS:
        name = name.replace(sign, spelling)
    if name in _PLAIN:
        return _PLAIN[name]
    if name in _PREFIXED:
        return _PREFIXED[name]
    prefix = _PREFIXES.get(name[:1])
    if prefix and name[1:] in _PREFIXED:
        unit = _PREFIXED[name[1:]]
        return Unit(unit.dimensions, unit.scale + math.log(prefix), text=name)
    return _ask_pint(name) if len(name) <= 40 and name.isascii() and name.isidentifier() else None


@functools.cache
def _registry():
    import pint                  # slow to load: only for a spec with a unit that is not in the tables above

    return pint.UnitRegistry()


def _ask_pint(name):
    registry = _registry()
    try:
        factor, _ = registry.get_root_units(name)
        dimensions = registry.get_dimensionality(name)
        at_zero = registry.Quantity(0.0, name).to_root_units().magnitude
        canonical = registry.get_name(name)
    except Exception:            # pint raises errors of many kinds for names that it cannot make sense of
        return None
    if not set(dimensions) <= set(_BASES) or not 0.0 < factor < math.inf:
        return None
    exponents = {_BASES[key]: Fraction(power).limit_denominator(MAX_POWER)
                 for key, power in dimensions.items() if power}
    # Root units count mass in grams.
    scale = math.log(factor) - math.log(1000.0) * float(exponents.get("kg", 0))
    if at_zero == 0.0:
        return Unit(tuple(sorted(exponents.items())), scale)
    # Zero is not zero: an offset scale. Temperatures have a meaning here; logarithmic units have none.
    is_temperature = exponents == {"K": 1}
    return Unit(tuple(exponents.items()), scale, canonical) if is_temperature else None


def _spelled(unit):
    """An inferred unit in words: an SI unit's own name where one fits, else base units with the factor in front."""
    bare = unit.difference()
    for known in _PREFIXED.values():
        if known.dimensions == bare.dimensions and known.text not in ("Hz", "L"):
            for prefix, factor in (("", 1.0), *_PREFIXES.items()):
                if abs(bare.scale - known.scale - math.log(factor)) <= _SCALE_TOLERANCE:
                    return prefix + known.text
    above = [_power(base, exponent) for base, exponent in unit.dimensions if exponent > 0]
    below = [_power(base, -exponent) for base, exponent in unit.dimensions if exponent < 0]
    words = " ".join(above) or "1"
    if below:
        words += "/" + (below[0] if len(below) == 1 else f"({' '.join(below)})")
    if abs(unit.scale) <= _SCALE_TOLERANCE:
        return words
    factor = f"{math.exp(unit.scale):.6g}" if abs(unit.scale) < 700 else "a factor out of reach of"
    return factor if words == "1" else f"{factor} {words}"


def _power(base, exponent):
    if exponent == 1:
        return base
    return f"{base}^{exponent}" if exponent.denominator == 1 else f"{base}^({exponent})"
