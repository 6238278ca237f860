"""Rootwright: a compiler from one scalar equation to a standalone solver with exact derivatives of its root.

`rootwright.load("spec.toml")` gives a closure for NumPy. Importing the package loads nothing else: what a call needs is
imported by the call.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Literal

from rootwright.version import __version__

if TYPE_CHECKING:
    import os

    from rootwright.binding.arrays import ArrayClosure, Solution, Unsolved
    from rootwright.pipeline import SpecError

__all__ = ["ArrayClosure", "Solution", "SpecError", "Unsolved", "__version__", "load"]


def load(spec: str | os.PathLike[str], *, target: Literal["c", "python"] | None = None,
         order: Literal[0, 1, 2] = 1) -> ArrayClosure:
    """Compile a spec, a file or the name of a shipped one, and return it as a function of NumPy arrays.

    order: highest derivatives wanted. target: "c", "python", or None: C where there is a compiler, else Python, which
    is slower and warns once. What was built is kept in the user's cache folder (ROOTWRIGHT_CACHE names another) and
    built anew when the spec, this compiler, the options or the C compiler change.

    Raises SpecError for a spec that cannot be used; NoCompiler or BuildFailed with target="c"; ValueError for options
    that there are not.
    """
    from rootwright.pipeline import array_closure, find

    return array_closure(*find(str(spec)), target, order)


def __getattr__(name: str):
    if name == "SpecError":
        from rootwright.pipeline import SpecError

        return SpecError
    if name in ("ArrayClosure", "Solution", "Unsolved"):
        from rootwright.binding import arrays

        return getattr(arrays, name)
    raise AttributeError(f"module 'rootwright' has no attribute {name!r}")
