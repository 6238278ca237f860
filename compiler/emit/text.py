"""Text for comments: wrapped, and harmless whatever the spec's author wrote."""

import textwrap
import unicodedata


def harmless(text):
    """Printable ASCII that can neither end a comment or a string nor start anything.

    Other letters are kept where they are printable and directionless; control characters, direction marks and the
    like become \\u escapes; the marks that C reads inside comments (the end mark, trigraphs) are broken up.
    """
    plain = "".join(ch if ch.isprintable() and unicodedata.bidirectional(ch) not in _DIRECTIONAL else
                    " " if ch in "\r\n\t" else f"<U+{ord(ch):04X}>" for ch in text)
    for mark, broken in (("*/", "* /"), ("/*", "/ *"), ("??", "? ?"), ("\\", "/"), ('"""', "'''")):
        while mark in plain:
            plain = plain.replace(mark, broken)
    return " ".join(plain.split())


_DIRECTIONAL = {"R", "AL", "RLE", "RLO", "LRE", "LRO", "PDF", "LRI", "RLI", "FSI", "PDI", "BN"}


def paragraph(text, width=94, indent="", hang=None):
    """Lines of a wrapped paragraph."""
    return textwrap.wrap(harmless(text), width, initial_indent=indent, subsequent_indent=indent if hang is None else hang,
                         break_long_words=False, break_on_hyphens=False) or [indent.rstrip()]


def statement(text, indent, width=110, continuation="    "):
    """One statement of code, continued on further lines where it is long."""
    return textwrap.wrap(text, width, initial_indent=indent, subsequent_indent=indent + continuation,
                         break_long_words=False, break_on_hyphens=False)
