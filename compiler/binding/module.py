"""A compiled closure as an object: the functions of the emitted module, whichever target is behind them.

numpy and cffi are imported where they are used: who only runs the Python target does not wait for them.
"""

import math
import types

from rootwright.binding.cache import temporary


class _Module:
    """What both targets have: names, sizes and many points at once."""

    def __init__(self, name, parameters, results, order):
        self.name, self.order = name, order
        self.parameters, self.results = tuple(parameters), tuple(results)
        self.N, self.M = len(self.parameters), len(self.results)

    def solve_batch(self, points, derivatives):
        """Solve many points. points: array (n, N). Returns a dict of arrays: y (n, M), error_bound, iterations, status
        (n,), and jac (n, M, N) where derivatives are wanted."""
        import numpy as np

        points = np.ascontiguousarray(points, dtype=float).reshape(-1, self.N)
        count = len(points)
        y, error_bound = np.empty((self.M, count)), np.empty(count)
        jac = np.empty((count, self.M, self.N)) if derivatives else None
        status, iterations = np.empty(count, np.intc), np.empty(count, np.intc)
        columns = [*((values, self.N) for values in points.T), (np.array([math.nan]), 0)]
        self.batch("solve", 0, count, columns, [*y, error_bound, jac], [status, iterations])
        return {"y": y.T, "jac": jac, "error_bound": error_bound, "iterations": iterations, "status": status}


class CModule(_Module):
    """The emitted C module in a built library, called through cffi, with the functions of the emitted Python module."""

    target = "c"

    def __init__(self, path, name, parameters, results, order):
        from rootwright.binding.build import open_library

        super().__init__(name, parameters, results, order)
        self._ffi, self._library = open_library(path, name, self.N, self.M, order)
        self._solve = self._function("solve")
        self._point_type = f"{name}_point *"

    def _function(self, name):
        return getattr(self._library, f"{self.name}_{name}")

    def _array(self, values, size):
        values = [float(value) for value in values]
        if len(values) != size:
            raise ValueError(f"{size} numbers wanted, {len(values)} given")
        return self._ffi.new(f"double[{size}]", values)

    def _rows(self, flat, rows):
        return [[flat[self.N * i + k] for k in range(self.N)] for i in range(rows)]

    def solve(self, p, start=math.nan):
        """Root and outputs at the parameters p: a point with the fields of the C struct, y as a list."""
        point = self._ffi.new(self._point_type)
        self._solve(self._array(p, self.N), start, point)
        return self._point(point)

    def solve_jacobian(self, p, start=math.nan):
        """The point, and the jacobian as M rows of N."""
        point, jac = self._ffi.new(self._point_type), self._ffi.new(f"double[{self.M * self.N}]")
        self._function("solve_jacobian")(self._array(p, self.N), start, point, jac)
        return self._point(point), self._rows(jac, self.M)

    def _point(self, point):
        return types.SimpleNamespace(
            y=list(point.y), residual=point.residual, slope=point.slope, error_bound=point.error_bound,
            lower=point.lower, upper=point.upper, iterations=point.iterations, evaluations=point.evaluations,
            status=point.status)

    def jacobian(self, p, root):
        jac = self._ffi.new(f"double[{self.M * self.N}]")
        self._function("jacobian")(self._array(p, self.N), root, jac)
        return self._rows(jac, self.M)

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

    def hessian(self, p, root):
        """M matrices of N rows of N; in a module of order 2."""
        hess = self._ffi.new(f"double[{self.M * self.N * self.N}]")
        self._function("hessian")(self._array(p, self.N), root, hess)
        rows = self._rows(hess, self.M * self.N)
        return [rows[self.N * k:self.N * (k + 1)] for k in range(self.M)]

    def tangent_adjoint(self, p, root, p_dot, y_bar, p_bar_dot):
        """Adds into the list p_bar_dot and returns it; in a module of order 2."""
        added = self._array(p_bar_dot, self.N)
        self._function("tangent_adjoint")(self._array(p, self.N), root, self._array(p_dot, self.N),
                                          self._array(y_bar, self.M), added)
        p_bar_dot[:] = list(added)
        return p_bar_dot

    def batch(self, what, first, last, columns, out, codes=()):
        """Run a function over the points first to last (exclusive); the interpreter's lock is released meanwhile.

        columns: (float array, stride): the parameters, then what the function takes besides (batch.c says what); point
        i has the number at i strides from the array's first.
        out, codes: contiguous float and int arrays for the results of all n points, None where not wanted.
        """
        ffi = self._ffi
        arrays, strides = zip(*columns)
        self._function(f"batch_{what}")(first, last, self._pointers("double", arrays), ffi.new("ptrdiff_t[]", strides),
                                        self._pointers("double", out), self._pointers("int", codes))

    def _pointers(self, kind, arrays):
        ffi = self._ffi
        return ffi.new(f"{kind} *[]", [ffi.NULL if array is None else
                                       ffi.cast(f"{kind} *", array.__array_interface__["data"][0]) for array in arrays])


class PythonModule(_Module):
    """The emitted Python module, run from its text."""

    target = "python"

    def __init__(self, text, name, parameters, results, order):
        super().__init__(name, parameters, results, order)
        self.module = types.ModuleType(name)
        exec(compile(text, f"{name}.py", "exec"), self.module.__dict__)  # our own text: no user text reaches it
        functions = [("solve",), ("solve_jacobian", "jacobian", "tangent", "adjoint"), ("hessian", "tangent_adjoint")]
        for function in (name for names in functions[:order + 1] for name in names):
            setattr(self, function, getattr(self.module, function))

    def batch(self, what, first, last, columns, out, codes=()):
        """As for C, point by point."""
        for i in range(first, last):
            values = [float(array[i if stride else 0]) for array, stride in columns]
            p, given, more = values[:self.N], values[self.N], values[self.N + 1:]
            if what == "solve":
                self._solve_into(i, p, given, out, codes)
            elif what == "adjoint":
                out[0][i] = self.adjoint(p, given, more, [0.0] * self.N)
            elif what == "tangent_adjoint":
                out[0][i] = self.tangent_adjoint(p, given, more[:self.N], more[self.N:], [0.0] * self.N)
            else:
                out[0][i] = getattr(self, what)(p, given, *([more] if more else []))

    def _solve_into(self, i, p, start, out, codes):
        if out[self.M + 1] is None:
            r = self.solve(p, start)
        else:
            r, out[self.M + 1][i] = self.solve_jacobian(p, start)
        for k, value in enumerate((*r.y, r.error_bound)):
            out[k][i] = value
        codes[0][i], codes[1][i] = r.status, r.iterations


def make(model, files, target, order):
    """Content of the file that a module is loaded from: a shared library for C, the source for Python.

    Raises NoCompiler, BuildFailed."""
    if target == "python":
        return files[f"{model.name}.py"].encode("utf-8")
    from rootwright.binding.build import compile_library

    return compile_library(model.name, files, len(model.parameters), len(model.results), order)


def open_module(path, model, target, order):
    """Module object from a file with that content. Raises OSError."""
    names = model.name, [p.name for p in model.parameters], model.results, order
    return PythonModule(path.read_text(encoding="utf-8"), *names) if target == "python" else CModule(path, *names)


def load(closure, files, target):
    """Module object of a Closure whose files were emitted for `target`."""
    content = make(closure.model, files, target, closure.order)
    return open_module(temporary(content, ".so" if target == "c" else ".py"), closure.model, target, closure.order)
