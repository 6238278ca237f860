"""Text for comments: wrapped, and harmless whatever the spec's author wrote."""

import textwrap

from rootwright.spec.diagnostics import harmless as printable

_MARKS = (("\\", "/"), ("*/", "* /"), ("/*", "/ *"), ("??", "? ?"), ('"""', "'''"))      # in this order: the first makes new ones


def harmless(text):
    """One line of printable characters that can neither end a comment or a docstring nor start anything.

    Control characters and direction marks become <U+XXXX>; the marks that C and Python read inside comments and
    docstrings (ends, trigraphs, backslashes) are broken up.
    """
    plain = printable(text)
    for mark, broken in _MARKS:
        while mark in plain:
            plain = plain.replace(mark, broken)
    return plain


def folded(text):
    """Harmless text with every run of white space, line breaks included, as one space."""
    return harmless(" ".join(text.split()))


def paragraph(text, width=94, indent="", hang=None):
    """Lines of a wrapped paragraph."""
    return textwrap.wrap(folded(text), width, initial_indent=indent, subsequent_indent=indent if hang is None else hang,
                         break_long_words=False, break_on_hyphens=False) or [indent.rstrip()]


def statement(text, indent, width=110, continuation="    "):
    """One statement of code, continued on further lines where it is long."""
    return textwrap.wrap(text, width, initial_indent=indent, subsequent_indent=indent + continuation,
                         break_long_words=False, break_on_hyphens=False)
