"""The arithmetic a module computes in: IEEE 754's binary64, or binary32 for hardware that has no other."""

import math
from dataclasses import dataclass
from fractions import Fraction

from rootwright.operations import OPERATIONS


@dataclass(frozen=True)
class Precision:
    """A binary format of IEEE 754, and how accurate a maths library is in it."""
    name: str                       # of the option --precision
    digits: int                     # of the significand, in bits
    smallest_exponent: int          # of the smallest normal number
    bits: int                       # of all
    unit: Fraction                  # the unit roundoff 2^-digits and a margin of 8 % for terms of second order
    largest_decimal: str
    accuracies: dict[str, float]    # of operations in ulp, where they differ from the operation table

    def ulps(self, op):
        """Accuracy of an operation, in units in the last place."""
        return self.accuracies.get(op, OPERATIONS[op].ulps)

    @property
    def smallest(self):
        """The smallest normal number; half the smallest subnormal in units of 2^-digits."""
        return 2.0 ** self.smallest_exponent

    def nearest(self, exact):
        """The number of this format nearest to a Fraction, ties to even, as a float. Raises OverflowError."""
        if self.digits == 53:
            return float(exact)
        if exact == 0:
            return 0.0
        exponent = abs(exact.numerator).bit_length() - exact.denominator.bit_length()     # |exact| is near 2^exponent
        exponent -= abs(exact) < Fraction(2) ** exponent
        spacing = Fraction(2) ** (max(exponent, self.smallest_exponent) - self.digits + 1)
        value = round(exact / spacing) * spacing
        if abs(value) >= Fraction(2) ** (2 - self.smallest_exponent):
            raise OverflowError(f"beyond {self.largest_decimal}")
        return math.copysign(float(value), exact)

    def decimal(self, value):
        """The shortest decimal, with a point or an exponent, whose nearest number of this format is a finite value."""
        if self.digits == 53:
            return repr(value)
        texts = (f"{value:.{digits}g}" for digits in range(1, 10))
        return repr(float(next(text for text in texts if self.nearest(Fraction(text)) == value)))


DOUBLE = Precision("double", 53, -1022, 64, Fraction("1.2e-16"), "1.8e308", {})

# Accuracies as in the operation table: the largest errors that the GNU C library manual lists for the functions of float
# on x86-64, from memory, plus one ulp of margin where it lists 2 or more.
SINGLE = Precision("single", 24, -126, 32, Fraction("6.45e-8"), "3.4e38", {
    "cbrt": 1.0, "log10": 3.0, "log1p": 3.0, "expm1": 1.0, "atan2": 2.0, "erfc": 4.0})

PRECISIONS = {precision.name: precision for precision in (DOUBLE, SINGLE)}
