"""A compiled closure for NumPy: calls that take scalars or arrays, broadcast them, and return named results.

B is the shape to which the parameters (and a start, roots, and directions and weights without their last axis)
broadcast; there are N parameters and M results, the unknown first.
"""

import functools
import math
import types
from collections.abc import Mapping
from concurrent.futures import ThreadPoolExecutor
from typing import TYPE_CHECKING, Any

import numpy as np

from rootwright.binding.columns import as_floats, as_vectors, column, common_shape, target
from rootwright.binding.describe import (
    BY_ORDER, METHODS, OPTIONS, REQUIRED, docstring, representation, signature, spelled,
)
from rootwright.emit.manual import STATUS

if TYPE_CHECKING:
    from numpy.typing import NDArray

_CHUNK = 1024                    # points; fewer are not worth a thread's while
_CODES = ("status", "iterations")


class Unsolved(ArithmeticError):
    """Points have no root, and errors="raise" was asked for. `status` has the status of every point, of shape B."""

    def __init__(self, message: str, status: "int | NDArray[np.intc]"):
        super().__init__(message)
        self.status = status


class Solution(types.SimpleNamespace):
    """Named results of a call: the unknown, every output, error_bound, status, iterations; vars() gives them as a dict."""

    error_bound: "float | NDArray[np.float64]"
    status: "int | NDArray[np.intc]"
    iterations: "int | NDArray[np.intc]"

    if TYPE_CHECKING:
        def __getattr__(self, name: str) -> "float | NDArray[np.float64]": ...


class ArrayClosure:
    """A closure as a function of its parameters. Its own docstring, signature and representation tell of its spec."""

    name: str
    title: str
    parameters: tuple[str, ...]
    results: tuple[str, ...]
    target: str                  # "c" or "python"
    order: int                   # of the derivatives it has

    def __init__(self, module, model, origin):
        """module: a loaded module; origin: (function, arguments) that make this closure again, for pickling."""
        self.name, self.title = model.name, model.title
        self.parameters, self.results = module.parameters, module.results
        self.target, self.order = module.target, module.order
        self._module, self._model, self._origin = module, model, origin
        self.__doc__ = docstring(model, module.order)
        self.__signature__ = signature(self.parameters, "__call__")
        for method in BY_ORDER[self.order][1:]:
            setattr(self, method, _signed(getattr(self, method), signature(self.parameters, method)))

    def __repr__(self) -> str:
        return representation(self._model, self.target)

    def __reduce__(self):
        return self._origin

    def __call__(self, *parameters: Any, **named: Any) -> Solution:
        """Solve: a Solution with numbers or arrays of shape B."""
        values, options = self._bound("__call__", parameters, named)
        if options["out"] is None and all(isinstance(value, (float, int)) for value in values) and \
                isinstance(options["start"], (float, int, types.NoneType)):
            return self._solve_one(values, options)
        inputs = {name: as_floats(value, name) for name, value in zip(self.parameters, values)}
        solution = self._solve(inputs, options, options["start"], options["out"])
        if options["out"] is None and np.ndim(solution.status) == 0:
            return Solution(**{name: value.item() for name, value in vars(solution).items()})
        return solution

    def jacobian(self, *parameters: Any, **named: Any) -> "NDArray[np.float64]":
        """Derivatives of the results with respect to the parameters, of shape B + (M, N); NaN where there is none."""
        return self._derivatives("jacobian", parameters, named)

    def tangent(self, *parameters: Any, **named: Any) -> "NDArray[np.float64]":
        """y_dot of the results for the direction p_dot of the parameters, of shape B + (M,)."""
        return self._derivatives("tangent", parameters, named)

    def adjoint(self, *parameters: Any, **named: Any) -> "NDArray[np.float64]":
        """p_bar of the parameters for the weights y_bar of the results, of shape B + (N,): the gradient of the weighted
        sum of the results."""
        return self._derivatives("adjoint", parameters, named)

    def hessian(self, *parameters: Any, **named: Any) -> "NDArray[np.float64]":
        """Second derivatives of the results, of shape B + (M, N, N)."""
        return self._derivatives("hessian", parameters, named)

    def tangent_adjoint(self, *parameters: Any, **named: Any) -> "NDArray[np.float64]":
        """How the adjoint of y_bar changes along p_dot, of shape B + (N,): the weighted hessian times p_dot."""
        return self._derivatives("tangent_adjoint", parameters, named)

    # -- arguments

    def _bound(self, method, given, named):
        """Values of the parameters in order, and the options, of a call. Raises TypeError, ValueError."""
        names = self.parameters
        if len(given) > len(names):
            raise TypeError(f"{self.name} takes {', '.join(names)}: {len(names)} numbers or arrays, {len(given)} given")
        values = dict(zip(names, given))
        options = {option: OPTIONS[option][0] for option in METHODS[method][0]}
        keywords = {spelled(option, names): option for option in options}
        for keyword, value in named.items():
            if keyword in values:
                raise TypeError(f"{self.name}: {keyword} is given twice")
            if keyword in names:
                values[keyword] = value
            elif keyword in keywords:
                options[keywords[keyword]] = value
            else:
                raise TypeError(f"{self.name} has no argument {keyword!r}; it takes {', '.join((*names, *keywords))}")
        missing = [name for name in (*names, *keywords)
                   if name not in values and (name in names or options[keywords[name]] is REQUIRED)]
        if missing:
            raise TypeError(f"{self.name}: {missing[0]} is missing; it takes {', '.join(names)}")
        if options["errors"] not in ("nan", "raise"):
            raise ValueError(f'errors is {options["errors"]!r}; it can be "nan" or "raise"')
        threads = options["threads"]
        if isinstance(threads, bool) or not isinstance(threads, int) or threads < 1:
            raise ValueError(f"threads is {threads!r}; a whole number from 1 is wanted")
        return [values[name] for name in names], options

    def _roots(self, given, option):
        """Start or roots as an array: given as such, or as a solution of this closure."""
        return as_floats(getattr(given, self.results[0]) if isinstance(given, Solution) else given, option)

    # -- solving

    def _solve_one(self, values, options):
        start = options["start"]
        r = self._module.solve(values, math.nan if start is None else start)
        if r.status < 0 and options["errors"] == "raise":
            raise self._unsolved(np.array(r.status), dict(zip(self.parameters, map(np.array, values))))
        return Solution(**dict(zip(self.results, r.y)), error_bound=r.error_bound, status=r.status,
                        iterations=r.iterations)

    def _solve(self, inputs, options, start=None, out=None, jac=None):
        """Solution with arrays of the shape to which inputs and start broadcast; jac: an array for the jacobian."""
        start = self._roots(math.nan if start is None else start, "start")
        shape = common_shape([*((name, array.shape) for name, array in inputs.items()), ("start", start.shape)])
        arrays = [*inputs.values(), start]
        names = (*self.results, "error_bound", *_CODES)
        given = {} if out is None else vars(out) if isinstance(out, Solution) else out
        if not isinstance(given, Mapping) or any(name not in names for name in given):
            raise ValueError(f"out takes a solution or a dict of arrays for some of {', '.join(names)}")
        filled = {name: target(given.get(name), f"out[{name!r}]", shape, np.intc if name in _CODES else float, arrays)
                  for name in names}
        floats = [filled[name][0] for name in names if name not in _CODES]
        self._run("solve", shape, arrays, [*floats, jac], [filled[name][0] for name in _CODES], options["threads"])
        status = filled["status"][0]
        if options["errors"] == "raise" and (status < 0).any():
            raise self._unsolved(status, inputs)
        return Solution(**{name: _delivered(*pair) for name, pair in filled.items()})

    def _unsolved(self, status, inputs):
        words = {code: word for code, word, _ in STATUS}
        counts = {code: int((status == code).sum()) for code in np.unique(status).tolist() if code < 0}
        told = ", ".join(f"{count:,} {words[code]}" for code, count in counts.items())
        place = tuple(int(k) for k in np.argwhere(status < 0)[0])
        point = ", ".join(f"{name} = {np.broadcast_to(array, status.shape)[place]!s}" for name, array in inputs.items())
        where = f", the first at {list(place)}" if place else ""
        message = f"{sum(counts.values()):,} of {status.size:,} points have no root ({told}){where}: {point}"
        return Unsolved(f"{self.name}: {message}", status if place else status.item())

    # -- derivatives

    def _derivatives(self, what, given, named):
        if what not in BY_ORDER[self.order]:
            order = next(order for order, methods in enumerate(BY_ORDER) if what in methods)
            raise TypeError(f"{self.name} was loaded without {what}: load it with order={order}")
        values, options = self._bound(what, given, named)
        inputs = {name: as_floats(value, name) for name, value in zip(self.parameters, values)}
        vectors = {option: as_vectors(options[option], names, option)
                   for option, names in (("p_dot", self.parameters), ("y_bar", self.results)) if option in options}
        n, m = len(self.parameters), len(self.results)
        tail = {"jacobian": (m, n), "tangent": (m,), "hessian": (m, n, n)}.get(what, (n,))
        if options["root"] is None and what != "jacobian":
            roots = self._roots(self._solve(inputs, options), "root")
        elif options["root"] is not None:
            roots = self._roots(options["root"], "root")
            if options["errors"] == "raise" and not np.isfinite(roots).all():
                raise Unsolved(f"{self.name}: of the roots given, {np.sum(~np.isfinite(roots)):,} are not finite",
                               np.where(np.isfinite(roots), 0, -1))
        else:
            roots = None
        shape = common_shape([*((name, array.shape) for name, array in inputs.items()),
                              ("root", () if roots is None else roots.shape),
                              *((option, array.shape[:-1]) for option, array in vectors.items())])
        arrays = [*inputs.values(), *([] if roots is None else [roots])]
        filled, returned = target(options["out"], "out", shape + tail, float, [*arrays, *vectors.values()])
        if roots is None:
            self._solve(inputs, options, jac=filled)
        else:
            arrays += [array[..., k] for array in vectors.values() for k in range(array.shape[-1])]
            self._run(what, shape, arrays, [filled], [], options["threads"])
        return _delivered(filled, returned)

    def _run(self, what, shape, arrays, out, codes, threads):
        """Run the batch driver over all points, in chunks where there are threads to share them."""
        count = math.prod(shape)
        out, codes = ([array if array is None else array.reshape((count, *array.shape[len(shape):])) for array in group]
                      for group in (out, codes))
        columns = [column(array, shape) for array in arrays]
        run = functools.partial(self._module.batch, what, columns=columns, out=out, codes=codes)
        chunks = min(4*threads, count//_CHUNK)
        if threads == 1 or chunks < 2 or self.target == "python":
            run(0, count)
            return
        edges = [count*k//chunks for k in range(chunks + 1)]
        with ThreadPoolExecutor(threads) as pool:
            list(pool.map(run, edges[:-1], edges[1:]))


def _delivered(filled, returned):
    if filled is not returned:
        np.copyto(returned, filled, casting="same_kind")
    return returned


def _signed(method, shown):
    """The method, with the signature to show."""
    @functools.wraps(method)
    def call(*given, **named):
        return method(*given, **named)

    call.__signature__ = shown
    return call
