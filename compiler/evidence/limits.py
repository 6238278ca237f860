"""The accuracy that is promised, as numbers with their statements: `verify` holds modules to these and prints these."""

from dataclasses import dataclass

ROOT_ULPS = 4.0             # a root lies within so many units in its last place
ROOT_NOISE = 4.0            # ... plus so many times its noise of the exact root
DERIVATIVE_GUARD = 1e-6     # scale of a derivative dY/dP: |dY/dP|, but at least this share of |Y|/|P|

ALLOWED = f"{ROOT_ULPS:g} ulp + {ROOT_NOISE:g} noise"


@dataclass(frozen=True)
class Limit:
    """What `measure` is measured; the worst value stays at or below `worst`. `median` is a goal: it is shown and fails nothing."""
    key: str
    measure: str
    worst: float
    median: float | None
    statement: str


LIMITS = {limit.key: limit for limit in (
    Limit("root", f"root: error / ({ALLOWED})", 1.0, None, f"a root lies within {ALLOWED} of the exact root"),
    Limit("bound", "root: error / error_bound", 1.0, None, "error_bound covers the distance to the exact root"),
    Limit("output", f"output: error / ({ALLOWED})", 1.0, None, f"an output lies within {ALLOWED} of its exact value at the root given"),
    Limit("derivative", "derivative: error / scale", 1e-8, 1e-12,
          f"a first derivative lies within 1e-08 of its scale, its size or {DERIVATIVE_GUARD:g} |result/parameter| if that is more, of the "
          "exact derivative; where the root's own error moves the derivative by more than that, of the exact one at the root given"),
    Limit("identity", "tangent against adjoint", 1e-13, None,
          "w.(J v) by tangent and (J' w).v by adjoint agree within 1e-13 of the sum of the sizes of their terms"),
    Limit("targets", f"C against Python / ({ALLOWED})", 1.0, None, f"C and Python give the same status, and roots within {ALLOWED} of each other"),
)}

OVERESTIMATE = 20.0         # goal for the median of error_bound / (true error + half an ulp) over the shipped specs
