"""Rootwright: a compiler from one scalar equation to a standalone solver with exact derivatives of its root."""

__version__ = "0.1.0"
