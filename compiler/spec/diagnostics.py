"""Diagnostics are data: where, what is wrong, how to mend it. One function prints them for people."""

import unicodedata
from dataclasses import dataclass

ERROR, WARNING = "error", "warning"

LINE_WIDTH = 100                 # longer source lines are shown as a window round the caret
_TEXT_WIDTH = 400                # a message that quotes much is cut there


@dataclass(frozen=True, slots=True)
class Diagnostic:
    file: str
    line: int                    # counts from 1
    column: int                  # counts characters from 1
    length: int                  # characters the carets cover, at least 1, all on this line
    source_line: str             # the whole line as written, without its end
    message: str                 # what is wrong, one line
    help: str                    # what would be right, one line
    severity: str = ERROR


def render(diagnostic: Diagnostic) -> str:
    """`FILE:LINE:COLUMN: what is wrong`, the line, carets under the place, one line of help.

    Whatever the spec holds, the text has printable characters only: others appear as <U+XXXX>, tabs as one space.
    """
    label = "" if diagnostic.severity == ERROR else diagnostic.severity + ": "
    shown, offset, length = _shown_line(diagnostic)
    head = f"{harmless(diagnostic.file)}:{diagnostic.line}:{diagnostic.column}: {label}{_cut(diagnostic.message)}"
    lines = head, f"  {shown}".rstrip(), f"  {' ' * offset}{'^' * length}", f"  {_cut(diagnostic.help)}"
    return "".join(line + "\n" for line in lines)


def harmless(text: str) -> str:
    """`text` with control characters, bidirectional marks and all else that does not print written as <U+XXXX>."""
    return "".join(_harmless_character(character) for character in text)


def _harmless_character(character):
    if character == "\t":
        return " "
    if character.isprintable() and not unicodedata.combining(character):
        return character
    return f"<U+{ord(character):04X}>"


def _cut(text):
    return harmless(text if len(text) <= _TEXT_WIDTH else text[:_TEXT_WIDTH] + "...")


def _shown_line(diagnostic):
    """The line to print, the columns before the carets, and how many carets; long lines are cut on both sides."""
    line, start = diagnostic.source_line, diagnostic.column - 1
    end = start + diagnostic.length
    first, last = 0, len(line)
    if last > LINE_WIDTH:
        first = max(0, min(start - LINE_WIDTH // 3, last - LINE_WIDTH))
        last = first + LINE_WIDTH
    before = ("..." if first else "") + harmless(line[first:start])
    marked = harmless(line[start:min(end, last)])
    after = harmless(line[min(end, last):last]) + ("..." if last < len(line) else "")
    return (before + marked + after).rstrip(), _columns(before), max(1, _columns(marked))


def _columns(text):
    """Columns of a terminal that `text` takes: East Asian wide characters take two."""
    return sum(2 if unicodedata.east_asian_width(character) in "WF" else 1 for character in text)
