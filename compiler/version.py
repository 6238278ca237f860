"""The compiler's version, which every emitted file carries."""

__version__ = "0.1.0"
