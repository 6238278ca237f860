"""What a refutation shows: a point of the operating range in exact decimals, or a small box that certainly holds one."""

from dataclasses import dataclass
from fractions import Fraction

from rootwright.proof.exact import decimal


@dataclass(frozen=True)
class Witness:
    """Where a claim fails: ((parameter, decimal or "[low, high]"), ...); `reason` says how, with the values that decide."""
    point: tuple[tuple[str, str], ...]
    reason: str


def at_point(point, reason):
    """Witness at {parameter: Fraction}."""
    return Witness(tuple((name, decimal(value)) for name, value in point.items()), reason)


def in_box(box, reason):
    """Witness somewhere in {parameter: (low, high)} of Fractions; what does not vary is one decimal."""
    return Witness(tuple((name, decimal(low) if low == high else f"[{decimal(low)}, {decimal(high)}]") for name, (low, high) in box.items()),
                   reason)


def middle(text):
    """The number of a witness's parameter as text: its decimal, or the double nearest to a quotient or to the middle of a box."""
    if text.startswith("["):
        low, high = text[1:-1].split(", ")
        return repr(float((Fraction(low) + Fraction(high)) / 2))
    return repr(float(Fraction(text))) if "/" in text else text


def simplest(low, high):
    """The fraction of the smallest denominator in [low, high] (Stern and Brocot's tree)."""
    low, high = Fraction(low), Fraction(high)
    if high < 0:
        return -simplest(-high, -low)
    if low <= 0:
        return Fraction(0)
    whole = low.numerator // low.denominator
    if whole == low:
        return Fraction(whole)
    if whole + 1 <= high:
        return Fraction(whole + 1)
    return whole + 1 / simplest(1 / (high - whole), 1 / (low - whole))
