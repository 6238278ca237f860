"""The type at the door of this room."""

from dataclasses import dataclass

from rootwright.calculus.closure import Closure

TRIALS = 3                  # certificates tried, with a step of Newton's between them, before a point is left to the plain solver
METHODS = {"newton": "Newton's method", "halley": "Halley's method", "householder": "Householder's method of order 4"}


@dataclass(frozen=True)
class Plan:
    """`closure` has the kernels `guess`, `curve` and `trial` besides; None where the plain solver is all there is."""
    closure: Closure | None
    why: tuple[str, ...]            # lines for a reader
    ends: str = "evaluated"         # signs there: "proved" to differ, "steep" (follow from `least_rise`), "evaluated"
    method: str = "newton"          # a key of METHODS
    steps: int = 0                  # of it, before the first certificate
    least_rise: float = 0.0         # lower bound of |dg/dt|, t the share of the bracket
    sure: bool = False              # proved over the operating range: no root is flat, the slope is right

    @property
    def pace(self):
        """The steps in words."""
        return f"{self.steps} step{'s' if self.steps > 1 else ''} of {METHODS[self.method]}" if self.steps else "no step"

    @property
    def extra(self):
        """Evaluations that may go before those of the plain solver: both ends, the steps, the certificates, one beside a root."""
        return 0 if self.closure is None else 2 * (self.ends == "evaluated") + self.steps + TRIALS + (not self.sure)


PLAIN = Plan(None, ())
