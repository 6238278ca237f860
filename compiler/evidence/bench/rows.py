"""The rows of the benchmark: what each one is, in words, and how it is run."""

from dataclasses import dataclass

import numpy as np

from rootwright.evidence.bench import rivals
from rootwright.evidence.bench.build import open_rows
from rootwright.evidence.bench.rivals import Absent

COLD, WARM, ROOT = "cold", "warm", "root"


@dataclass(frozen=True)
class Row:
    """`run`: (library, function, start) for a compiled row, else the name of a function in `rivals.py`."""
    key: str
    group: str
    title: str
    setting: str
    run: tuple[str, str, str] | str
    jacobian: bool = True
    taped: bool = False


BASE, SOLVE, PLAIN, LIMIT = "jacobian", "solve", "plain", "limit"
TAPE, TAPE_LEAN, ADOLC, BRENT_PYTHON = "tape", "tape_textbook", "adolc", "brentq"

TERMS = {
    "cold": "nothing is known of the root but its bracket (and the author's start where the spec has one)",
    "warm": "from the root at parameters that differ by 1 % of their ranges",
    "textbook loop": "Newton's method kept in its bracket by bisection, until the step is 4 ulp or rounding; no error "
                     "bound, no caveats",
    "implicit rule": "dx/dp = -g_p/g_x at the root that was found",
}

ROWS = (
    Row(LIMIT, "limit", "one evaluation at the root",
        "residual, slope and jacobian once, at the root, in one loop that shares what they have in common; the "
        "module's printer, compiler and flags",
        ("plain", "limit", ROOT)),
    Row("kernels", "limit", "the same by two kernels",
        "the plain module's kernels of the residual and of the jacobian, one after the other, which share nothing",
        ("plain", "kernels", ROOT)),
    Row(SOLVE, "module", "solve", "root, outputs, error bound, as `compile` makes it; cold", ("module", "solve", COLD),
        jacobian=False),
    Row(BASE, "module", "solve with jacobian", "the same and the jacobian; cold: ratios are to this row",
        ("module", "jacobian", COLD)),
    Row("solve_warm", "module", "solve, warm", "root, outputs, error bound; warm", ("module", "solve", WARM),
        jacobian=False),
    Row("warm", "module", "solve with jacobian, warm", "the same and the jacobian; warm", ("module", "jacobian", WARM)),
    Row(PLAIN, "module", "plain solve with jacobian",
        "the module that `compile --plan plain` makes, the safeguarded solver alone; cold", ("plain", "jacobian", COLD)),
    Row(TAPE, "through", "tape, reverse: the plain loop",
        "C++ over the plain module's own loop, operation for operation, on runtime/tape.hpp; bounds of rounding errors "
        "and checks of the range are left off the tape; all results are swept back at once; cold",
        ("tape", "loop", COLD), taped=True),
    Row("tape_forward", "through", "tape, forward: the plain loop",
        "the same tape swept forward, all parameters at once; cold", ("tape", "loop_forward", COLD), taped=True),
    Row(TAPE_LEAN, "through", "tape, reverse: textbook loop", "the leanest loop that is still safe; warm",
        ("tape", "textbook", WARM), taped=True),
    Row("tape_last", "through", "tape, reverse: the last step only",
        "the module solves without a tape, warm; one step of Newton's method at the root is taped. The best that a "
        "tape can do, and no longer through the iterations", ("tape", "last_step", WARM), taped=True),
    Row(ADOLC, "through", "ADOL-C, reverse: the plain loop", "the same loop on the tape of a C++ library; cold",
        ("adolc", "loop", COLD)),
    Row("adolc_textbook", "through", "ADOL-C, reverse: textbook loop", "warm", ("adolc", "textbook", WARM)),
    Row("dual", "through", "dual numbers: the plain loop",
        "forward, all parameters at once, runtime/dual.hpp; cold", ("dual", "loop", COLD)),
    Row("dual_textbook", "through", "dual numbers: textbook loop", "warm", ("dual", "textbook", WARM)),
    Row("autograd", "through", "autograd, reverse: textbook loop",
        "a general-purpose tape in Python, point by point, since the loop branches on values; warm", "autograd"),
    Row("jax_forward", "through", "JAX, forward: textbook loop",
        "jitted, all points at once, double precision (its loops cannot be swept back); warm", "jax_forward"),
    Row("one_sided", "differences", "one-sided differences",
        "of the module: step 2^-26 of each parameter, into its range; every further solve warm from the root",
        ("module", "one_sided", WARM)),
    Row("central", "differences", "central differences",
        "of the module: step 6.1e-6 of each parameter; every further solve warm from the root",
        ("module", "central", WARM)),
    Row("newton_c", "hand", "textbook loop in C", "implicit rule by the module's kernel; cold",
        ("byhand", "newton", COLD)),
    Row("newton_c_warm", "hand", "textbook loop in C, warm", "the same, warm", ("byhand", "newton", WARM)),
    Row("brent_c", "hand", "Brent's method in C", "to 4 ulp; implicit rule by the module's kernel; cold",
        ("byhand", "brent", COLD)),
    Row(BRENT_PYTHON, "hand", "SciPy brentq, from Python",
        "point by point, residual in plain Python, to 4 ulp; implicit rule in plain Python; cold", "brentq"),
    Row("newton_scalar", "hand", "SciPy newton, from Python",
        "the same with the slope given, unsafeguarded, to a step of 1e-10 (the error is its square); warm",
        "newton_scalar"),
    Row("newton_array", "hand", "SciPy newton over arrays",
        "all points at once in NumPy, unsafeguarded; implicit rule in NumPy; warm", "newton_array"),
    Row("find_root", "hand", "SciPy elementwise.find_root",
        "all points at once in NumPy, bracketed, to 4 ulp; implicit rule in NumPy; cold", "find_root"),
    Row("jax_implicit", "hand", "JAX, implicit rule: textbook loop",
        "jitted, all points at once, double precision; warm", "jax_implicit"),
)
BY_KEY = {row.key: row for row in ROWS}


@dataclass(frozen=True)
class Outcome:
    """What a row computed: y (n, M), jac (n, M, N), failed (n,), and count (n,), of evaluations or taped operations."""
    y: np.ndarray
    jac: np.ndarray
    failed: np.ndarray
    count: np.ndarray | None


class Compiled:
    """A row of a built library."""

    whole = False                # it runs over any number of points at the same cost each

    def __init__(self, row, problem, paths):
        library, function, start = row.run
        self.ffi, self.library = open_rows(paths[library], library)
        self.function = getattr(self.library, f"rw_row_{function}")
        n, size = problem.points.shape
        self.points = np.ascontiguousarray(problem.points)
        self.start = {COLD: np.full(n, np.nan), WARM: problem.warm, ROOT: problem.solved}[start]
        m = len(problem.results)
        self.y, self.jac = np.full((n, m), np.nan), np.full((n, m, size), np.nan)
        self.failed, self.count = np.zeros(n, np.intc), np.zeros(n, np.dtype("l"))
        wanted = np.array(problem.wanted, np.intc)
        self.library.rw_prepare(self._of(problem.floors), self._of(problem.middles), self._of(wanted, "int"))
        self.arguments = [self._of(self.points), self._of(self.start)]
        self.buffers = [self._of(self.y), self._of(self.jac), self._of(self.failed, "int"),
                        self._of(self.count, "long")]

    def _of(self, array, kind="double"):
        return self.ffi.cast(f"{kind} *", array.ctypes.data)

    def run(self, n, dependent=False):
        self.function(n, *self.arguments, int(dependent), *self.buffers)

    def outcome(self, n):
        self.run(n)
        return Outcome(self.y[:n].copy(), self.jac[:n].copy(), self.failed[:n] != 0, self.count[:n].copy())

    def bytes(self, operations):
        return int(self.library.rw_tape_bytes(int(operations)))


class Python:
    """A row in Python; it has no dependent solves of its own."""

    def __init__(self, row, problem):
        self.run = getattr(rivals, row.run)(problem)
        self.whole = row.run in rivals.WHOLE

    def outcome(self, n):
        return Outcome(*self.run(n), None)


def make(row, problem, built):
    """Something with run(n) and outcome(n). Raises Absent where the row cannot run here."""
    if isinstance(row.run, str):
        return Python(row, problem)
    if row.run[0] not in built.paths:
        raise Absent(built.missing[row.run[0]])
    return Compiled(row, problem, built.paths)


def solver(built, closure):
    """Function (n, N) -> roots (n,) by the module."""
    ffi, library = open_rows(built.paths["module"], "module")
    m, size = len(closure.model.results), len(closure.model.parameters)

    def solve(points):
        points, n = np.ascontiguousarray(points, float), len(points)
        y, jac, start = np.empty((n, m)), np.empty((n, m, size)), np.full(n, np.nan)
        failed, count = np.empty(n, np.intc), np.empty(n, np.dtype("l"))
        pointers = [ffi.cast("double *", array.ctypes.data) for array in (points, start)]
        pointers += [0] + [ffi.cast(f"{kind} *", array.ctypes.data)
                           for kind, array in (("double", y), ("double", jac), ("int", failed), ("long", count))]
        library.rw_row_solve(n, *pointers)
        return y[:, 0].copy()
    return solve
