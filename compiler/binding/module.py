"""A compiled closure as an object: the functions of the emitted module, whichever target is behind them.

numpy and cffi are imported where they are used: who only runs the Python target does not wait for them.
"""

import math
import types

FIELDS = ("error_bound", "iterations", "status")


class CModule:
    """The emitted C module, called through cffi. Functions and results are those of the emitted Python module."""

    target = "c"

    def __init__(self, name, files, parameters, results):
        from rootwright.binding.build import build

        self.N, self.M = len(parameters), len(results)
        self.parameters, self.results = tuple(parameters), tuple(results)
        self._name = name
        self._ffi, self._library = build(name, files, self.N, self.M)
        self._solve = self._function("solve")
        self._solve_jacobian = self._function("solve_jacobian")

    def _function(self, name):
        return getattr(self._library, f"{self._name}_{name}")

    def _array(self, values, size):
        values = [float(value) for value in values]
        if len(values) != size:
            raise ValueError(f"{size} numbers wanted, {len(values)} given")
        return self._ffi.new(f"double[{size}]", values)

    def _rows(self, jac):
        return [[jac[self.N * i + k] for k in range(self.N)] for i in range(self.M)]

    def solve(self, p, start=math.nan):
        """Root and outputs at the parameters p: a point with the fields of the C struct, y as a list."""
        point = self._ffi.new(f"{self._name}_point *")
        self._solve(self._array(p, self.N), start, point)
        return self._point(point)

    def solve_jacobian(self, p, start=math.nan):
        """The point, and the jacobian as M rows of N."""
        point, jac = self._ffi.new(f"{self._name}_point *"), self._ffi.new(f"double[{self.M * self.N}]")
        self._solve_jacobian(self._array(p, self.N), start, point, jac)
        return self._point(point), self._rows(jac)

    def _point(self, point):
        return types.SimpleNamespace(
            y=list(point.y), residual=point.residual, slope=point.slope, error_bound=point.error_bound, lower=point.lower,
            upper=point.upper, iterations=point.iterations, evaluations=point.evaluations, status=point.status)

    def jacobian(self, p, root):
        jac = self._ffi.new(f"double[{self.M * self.N}]")
        self._function("jacobian")(self._array(p, self.N), root, jac)
        return self._rows(jac)

    def tangent(self, p, root, p_dot):
        y_dot = self._ffi.new(f"double[{self.M}]")
        self._function("tangent")(self._array(p, self.N), root, self._array(p_dot, self.N), y_dot)
        return list(y_dot)

    def adjoint(self, p, root, y_bar, p_bar):
        """Adds into the list p_bar and returns it."""
        added = self._array(p_bar, self.N)
        self._function("adjoint")(self._array(p, self.N), root, self._array(y_bar, self.M), added)
        p_bar[:] = list(added)
        return p_bar

    def solve_batch(self, points, derivatives):
        """Solve many points. points: array (n, N). Returns a dict of arrays: y (n, M), error_bound, iterations, status (n,), and
        jac (n, M, N) where derivatives are wanted."""
        import numpy as np

        points = np.ascontiguousarray(points, dtype=float).reshape(-1, self.N)
        count = len(points)
        dtype = np.dtype([("y", float, (self.M,)), ("residual", float), ("slope", float), ("error_bound", float), ("lower", float),
                          ("upper", float), ("iterations", np.intc), ("evaluations", np.intc), ("status", np.intc)], align=True)
        out = np.empty(count, dtype)
        jac = np.empty((count, self.M, self.N)) if derivatives else None
        self._function("batch")(count, self._ffi.cast("double *", points.ctypes.data),
                                self._ffi.cast(f"{self._name}_point *", out.ctypes.data),
                                self._ffi.NULL if jac is None else self._ffi.cast("double *", jac.ctypes.data))
        return {"y": out["y"], "jac": jac} | {field: out[field] for field in FIELDS}


class PythonModule:
    """The emitted Python module, run from its text."""

    target = "python"

    def __init__(self, name, files, parameters, results):
        self.parameters, self.results = tuple(parameters), tuple(results)
        self.module = types.ModuleType(name)
        exec(compile(files[f"{name}.py"], f"{name}.py", "exec"), self.module.__dict__)  # our own text: no user text reaches it
        for function in ("N", "M", "solve", "solve_jacobian", "jacobian", "tangent", "adjoint"):
            setattr(self, function, getattr(self.module, function))

    def solve_batch(self, points, derivatives):
        """As for C, point by point."""
        import numpy as np

        solved = [self.solve_jacobian(p) if derivatives else (self.solve(p), None) for p in points]
        out = {field: np.array([getattr(r, field) for r, _ in solved]) for field in FIELDS}
        out["y"] = np.array([r.y for r, _ in solved]).reshape(-1, self.M)
        out["jac"] = np.array([jac for _, jac in solved]).reshape(-1, self.M, self.N) if derivatives else None
        return out


def load(closure, files, target):
    """Module object of a Closure whose files were emitted for `target`."""
    model = closure.model
    kind = {"c": CModule, "python": PythonModule}[target]
    return kind(model.name, files, [p.name for p in model.parameters], model.results)
