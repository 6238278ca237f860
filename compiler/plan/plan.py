"""The type at the door of this room."""

from dataclasses import dataclass

from rootwright.calculus.closure import Closure

TRIALS = 6                  # evaluations of the short way, before a point is left to the plain solver


@dataclass(frozen=True)
class Plan:
    """`closure` has the kernels `trial` and `guess` besides; None where the plain solver is all there is."""
    closure: Closure | None
    ends: str                       # signs there: "proved" to differ, "steep" (follow from `least_rise`), "evaluated"
    start: str
    why: tuple[str, ...]            # lines for a reader
    least_rise: float = 0.0         # lower bound of |dg/dt|, t the share of the bracket
    trials: int = TRIALS
    option: str = "chosen"          # of `compile --plan`

    @property
    def extra(self):
        """Evaluations that may go before those of the plain solver: both ends, the steps, two certificates."""
        return 0 if self.closure is None else 2 * (self.ends == "evaluated") + self.trials + 2


PLAIN = Plan(None, "evaluated", "", (), option="plain")
