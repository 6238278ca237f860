"""The accuracy that is promised, as numbers with their statements. `verify` holds modules to these."""

from dataclasses import dataclass

ROOT_ULPS = 4.0             # a root lies within so many units in its last place
ROOT_NOISE = 4.0            # ... plus so many times its noise of the exact root
DERIVATIVE = 1e-8           # largest error of a first derivative dY/dP, against its scale
DERIVATIVE_GOAL = 1e-12     # where nearly all of them should lie
SECOND = 1e-6               # largest error of a second derivative d2Y/dP/dQ, against its scale
SECOND_GOAL = 1e-9          # where nearly all of them should lie
SCALE_SHARE = 1e-6          # scale of dY/dP: |dY/dP|, but at least this share of |Y|/|P|
SCALE_WIDTH = 1e-3          # ... where |P| counts as at least this share of the width of its range
SCALE_TINY = 1e-30          # ... and at least this share of the largest derivative with respect to the same parameter
IDENTITY = 1e-13            # tangent against adjoint
OVERESTIMATE = 20.0         # goal for the median of error_bound / (true error + half an ulp) over the shipped specs

ALLOWED = f"{ROOT_ULPS:g} ulp + {ROOT_NOISE:g} noise"


@dataclass(frozen=True)
class Limit:
    """The worst value of `measure` stays at or below `worst`. `goal` is for nearly all values and fails nothing."""
    key: str
    measure: str
    worst: float
    goal: float | None
    statement: str


LIMITS = {limit.key: limit for limit in (
    Limit("root", f"root: error / ({ALLOWED})", 1.0, None, f"a root lies within {ALLOWED} of the exact root"),
    Limit("bound", "root: error / error_bound", 1.0, None, "error_bound covers the distance to the exact root"),
    Limit("output", f"output: error / ({ALLOWED})", 1.0, None,
          f"an output lies within {ALLOWED} of its exact value at the root given"),
    Limit("derivative", "derivative: error / scale", DERIVATIVE, DERIVATIVE_GOAL,
          f"a first derivative lies within {DERIVATIVE:g} of the exact one, against its size or {SCALE_SHARE:g} "
          "|result/parameter| if that is more; where the root's own error moves it further than that, of the exact one "
          "at the root given"),
    Limit("identity", "tangent against adjoint", IDENTITY, None,
          f"w.(J v) by tangent and (J' w).v by adjoint agree within {IDENTITY:g} of the sum of their terms' sizes"),
    Limit("second", "second derivative: error / scale", SECOND, SECOND_GOAL,
          f"a second derivative lies within {SECOND:g} of the exact one, against its size or {SCALE_SHARE:g} "
          "|result/parameter/parameter| or |first derivative/parameter| if one is more; where the root's own error "
          "moves it further than that, of the exact one at the root given"),
    Limit("product", "tangent_adjoint against hessian", IDENTITY, None,
          f"tangent_adjoint and the sum over the hessian agree within {IDENTITY:g} of the sum of its terms' sizes"),
    Limit("targets", f"C against Python / ({ALLOWED})", 1.0, None,
          f"C and Python give the same status, and roots within {ALLOWED} of each other"),
)}
