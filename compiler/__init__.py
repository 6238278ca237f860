"""Rootwright: a compiler from one scalar equation to a standalone solver with exact derivatives of its root."""

from rootwright.version import __version__

__all__ = ["__version__"]
