"""The accuracy that is promised, as numbers: `verify` enforces these and its table states them, nothing else does.

Statements use the names of this module in braces, so that what is said and what is held are the same number.
"""

ROOT_ULPS = 4.0             # a root lies within so many units in its last place
ROOT_NOISE = 4.0            # ... plus so many times its noise of the exact root
DERIVATIVE = 1e-8           # largest error of a first derivative, against its scale
DERIVATIVE_MEDIAN = 1e-12   # median error of the first derivatives
OUTPUT = 1e-8               # largest error of an output, against its size
BOUND = 1.0                 # largest ratio of a root's true error to its error_bound
BOUND_MEDIAN = 20.0         # median ratio of error_bound to the true error plus half an ulp
IDENTITY = 1e-12            # tangent against adjoint: difference of the two dot products, against the sum of their terms' sizes

STATEMENTS = {
    "root": f"root within {ROOT_ULPS:g} ulp + {ROOT_NOISE:g} noise of the exact root",
    "bound": "error_bound covers the distance to the exact root",
    "bound_median": f"error_bound at most {BOUND_MEDIAN:g} times the true error plus half an ulp (median)",
    "derivative": f"first derivatives within {DERIVATIVE:g} of their scale",
    "derivative_median": f"first derivatives within {DERIVATIVE_MEDIAN:g} of their scale (median)",
    "output": f"outputs within {OUTPUT:g} of their size",
    "identity": f"tangent and adjoint agree within {IDENTITY:g} of their terms",
    "targets": f"C and Python: same status, roots within {ROOT_ULPS:g} ulp + {ROOT_NOISE:g} noise of each other",
    "solved": "every point of the operating range is solved",
    "published": "published values within their tolerances",
}
