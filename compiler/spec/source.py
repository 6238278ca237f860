"""The text of a spec file, and where in it every key and value stands.

`tomllib` reads the values; it tells no positions. The scanner here finds them, and bounds the work beforehand: files
whose sheer shape (nesting, number of entries, very long dotted keys) would keep a reader busy are refused.
"""

import bisect
import re
import tomllib
from collections.abc import Sequence
from dataclasses import dataclass, field

from rootwright.spec.diagnostics import ERROR, Diagnostic

MAX_BYTES = 1 << 20
MAX_LINES = 50_000
MAX_ENTRIES = 10_000             # keys, table headers and array elements
MAX_DEPTH = 24                   # nesting of arrays and inline tables, and parts of a dotted key
MAX_SCALAR = 1_000               # characters of a number or date
_SHORTEN = "a spec describes one equation: shorten it"

Path = tuple                     # of keys and of positions in arrays, e.g. ("parameters", "Re", "range", 0)


class DecimalText(str):
    """A TOML float as written (without underscores): its digits are never rounded on the way."""


@dataclass(frozen=True, slots=True)
class Place:
    """Spans [start, end) in the text of a key (or a table's header) and of its value."""
    key: tuple[int, int]
    value: tuple[int, int]


@dataclass(slots=True)
class Source:
    """A file's text with the places of its keys and values; line ends are single newlines."""
    filename: str
    text: str
    places: dict[Path, Place] = field(default_factory=dict)
    repeated: list[tuple[Path, tuple[int, int]]] = field(default_factory=list)     # keys given twice
    _lines: list[str] = field(default_factory=list)
    _starts: list[int] = field(default_factory=list)
    _offsets: dict[Path, Sequence[int]] = field(default_factory=dict)

    def __post_init__(self):
        self._lines = self.text.split("\n")
        start = 0
        for line in self._lines:
            self._starts.append(start)
            start += len(line) + 1

    def diagnostic(self, span: tuple[int, int], message: str, help: str, severity: str = ERROR) -> Diagnostic:
        """A diagnostic for the characters [start, end) of the text; what reaches past the line's end is cut."""
        start, end = span
        index = bisect.bisect_right(self._starts, start) - 1
        line, column = self._lines[index], start - self._starts[index]
        length = max(1, min(end - start, len(line) - column))
        return Diagnostic(self.filename, index + 1, column + 1, length, line, message, help, severity)

    def line_of(self, span: tuple[int, int]) -> int:
        return bisect.bisect_right(self._starts, span[0])

    def key_span(self, path: Path) -> tuple[int, int]:
        """Span of the key at `path`, or of the nearest table around it that is in the file."""
        return self._nearest(path).key

    def value_span(self, path: Path, part: tuple[int, int] | None = None) -> tuple[int, int]:
        """Span of the value at `path`; with `part`, of those characters [start, end) of the string that it is."""
        place = self.places.get(path)
        if place is None:
            return self.key_span(path)
        start, end = place.value
        if part is None or self.text[start] not in "\"'":
            return place.value
        if path not in self._offsets:
            self._offsets[path] = _string_offsets(self.text, start, end)
        offsets = self._offsets[path]
        first = offsets[min(part[0], len(offsets) - 1)]
        return first, max(first + 1, offsets[min(part[1], len(offsets) - 1)]) if part[1] > part[0] else first + 1

    def _nearest(self, path):
        while path and path not in self.places:
            path = path[:-1]
        return self.places[path] if path else Place((0, 1), (0, 1))


def load(data: bytes, filename: str) -> tuple[Source, dict | None, tuple[Diagnostic, ...]]:
    """The source, the tables that tomllib reads from it, and what stops it from being read (then the tables are None).

    Floats come as `DecimalText`. A byte order mark is skipped.
    """
    text, unreadable = _decode(data)
    source = Source(filename, text)
    if unreadable:
        return source, None, (source.diagnostic(*unreadable),)
    try:
        _Scanner(source).run()
    except _Refused as refused:
        return source, None, (source.diagnostic(*refused.args),)
    if source.repeated:
        return source, None, tuple(_repetition(source, path, span) for path, span in source.repeated[:20])
    try:
        return source, tomllib.loads(text, parse_float=_decimal_text), ()
    except tomllib.TOMLDecodeError as error:
        return source, None, (source.diagnostic(*_explain(source, str(error))),)


def _decimal_text(text):
    return DecimalText(text.replace("_", ""))


def _decode(data):
    """The text, and (span, message, help) of what makes it unreadable or None."""
    if len(data) > MAX_BYTES:
        return "", ((0, 1), f"the file is larger than {MAX_BYTES:,} bytes", _SHORTEN)
    try:
        text = data.decode("utf-8")
        fault = None
    except UnicodeDecodeError as error:
        text = data.decode("utf-8", errors="replace")
        at = len(data[:error.start].decode("utf-8"))
        fault = at, f"the byte 0x{data[error.start]:02X} is not UTF-8 text", "save the file as UTF-8"
    nul = text.find("\0")
    if nul >= 0 and (fault is None or nul < fault[0]):
        fault = nul, "the file has a NUL byte", "save the file as plain UTF-8 text"
    if fault:
        # Positions hold for text whose line ends are not yet simplified: cut there, then simplify.
        before, after = text[:fault[0]].replace("\r\n", "\n"), text[fault[0]:].replace("\r\n", "\n")
        return before + after, ((len(before), len(before) + 1), *fault[1:])
    text = text.removeprefix("\ufeff").replace("\r\n", "\n")
    if text.count("\n") > MAX_LINES:
        return "", ((0, 1), f"the file has more than {MAX_LINES:,} lines", _SHORTEN)
    return text, None


def _repetition(source, path, span):
    name = path[-1]
    return source.diagnostic(span, f"'{name[:40]}' is given twice",
                             f"the first is on line {source.line_of(source.key_span(path))}: keep one")


class _Refused(Exception):
    """(span, message, help) of a shape that is refused."""


class _Confused(Exception):
    """The text is no TOML here; tomllib will say why."""


_BLANK = re.compile(r"(?:[ \t\n]+|#[^\n]*)*+")
_SPACE = re.compile(r"[ \t]*+")
_BARE_KEY = re.compile(r"[A-Za-z0-9_-]+")
_SCALAR = re.compile(r"[^\s,\]}#\[{\"'=](?:[^\n,\]}#\[{\"'=]*[^\s,\]}#\[{\"'=])?")
_STRINGS = {
    '"""': re.compile(r'"""(?:[^"\\]++|\\.|"{1,2}(?!"))*+"{3,5}', re.DOTALL),
    "'''": re.compile(r"'''(?:[^']++|'{1,2}(?!'))*+'{3,5}"),
    '"': re.compile(r'"(?:[^"\\\n]++|\\.)*+"'),
    "'": re.compile(r"'[^'\n]*+'"),
}


class _Scanner:
    """Walks the text once and records the place of every key and value, as far as the text is TOML."""

    def __init__(self, source):
        self.source = source
        self.text = source.text
        self.at = 0
        self.entries = 0
        self.arrays = {}         # path of an array of tables -> number of its tables so far
        self.headers = set()     # paths that a [header] opened

    def run(self):
        table = ()
        try:
            while self._skip(_BLANK) < len(self.text):
                if self.text[self.at] == "[":
                    table = self._header()
                else:
                    self._pair(table)
        except _Confused:
            pass

    def _skip(self, pattern):
        self.at = pattern.match(self.text, self.at).end()
        return self.at

    def _expect(self, symbol):
        if not self.text.startswith(symbol, self.at):
            raise _Confused
        self.at += len(symbol)

    def _count(self, span):
        self.entries += 1
        if self.entries > MAX_ENTRIES:
            raise _Refused(span, f"the file has more than {MAX_ENTRIES:,} entries", _SHORTEN)

    def _header(self):
        is_array = self.text.startswith("[[", self.at)
        self._expect("[[" if is_array else "[")
        parts, span = self._key()
        self._expect("]]" if is_array else "]")
        self._count(span)
        path = ()
        for part in parts[:-1]:
            path += (part,)
            self.source.places.setdefault(path, Place(span, span))
            if path in self.arrays:
                path += (self.arrays[path] - 1,)
        path += (parts[-1],)
        if is_array:
            self.source.places.setdefault(path, Place(span, span))
            self.arrays[path] = self.arrays.get(path, 0) + 1
            path += (self.arrays[path] - 1,)
        elif path in self.headers:
            self.source.repeated.append((path, span))
        self.headers.add(path)
        self.source.places.setdefault(path, Place(span, span))
        return path

    def _key(self):
        """A key's parts, and the span from the first to the last of them."""
        parts, start = [], self._skip(_SPACE)
        while True:
            if bare := _BARE_KEY.match(self.text, self.at):
                parts.append(bare.group())
                self.at = bare.end()
            else:
                quote = self.text[self.at:self.at + 1]
                match = quote in ('"', "'") and _STRINGS[quote].match(self.text, self.at)
                if not match:
                    raise _Confused
                parts.append(_decode_string(self.text, self.at, match.end())[0])
                self.at = match.end()
            end = self.at
            if len(parts) > MAX_DEPTH:
                raise _Refused((start, end), f"a key has more than {MAX_DEPTH} parts",
                               "no key of a spec has more than three")
            self._skip(_SPACE)
            if not self.text.startswith(".", self.at):
                return parts, (start, end)
            self.at += 1
            self._skip(_SPACE)

    def _pair(self, table, depth=0):
        parts, key = self._key()
        self._expect("=")
        self._skip(_SPACE)
        for index in range(1, len(parts)):
            self.source.places.setdefault((*table, *parts[:index]), Place(key, key))
        path = (*table, *parts)
        if path in self.source.places:
            self.source.repeated.append((path, key))
        self._value(path, key, depth)

    def _value(self, path, key, depth):
        start = self.at
        self._count((start, start + 1))
        if depth > MAX_DEPTH:
            raise _Refused((start, start + 1), f"values nest deeper than {MAX_DEPTH} levels",
                           "no value of a spec nests deeper than two")
        first = self.text[start:start + 1]
        # Known before its parts, so that a key of an inline table is not taken for a repetition of the table.
        self.source.places.setdefault(path, Place(key or (start, start + 1), (start, start + 1)))
        if first == "[":
            self._array(path, depth)
        elif first == "{":
            self._inline_table(path, depth)
        else:
            kind = self.text[start:start + 3] if self.text[start:start + 3] in _STRINGS else first
            match = _STRINGS.get(kind, _SCALAR).match(self.text, start)
            if not match:
                raise _Confused
            self.at = match.end()
            if kind not in _STRINGS and self.at - start > MAX_SCALAR:
                raise _Refused((start, self.at), f"the value has more than {MAX_SCALAR:,} characters", "round it")
        span = start, self.at
        if self.source.places[path].value == (start, start + 1):
            self.source.places[path] = Place(key or span, span)

    def _array(self, path, depth):
        self._expect("[")
        index = 0
        while self._skip(_BLANK) < len(self.text) and self.text[self.at] != "]":
            self._value((*path, index), None, depth + 1)
            index += 1
            self._skip(_BLANK)
            if not self.text.startswith(",", self.at):
                break
            self.at += 1
        self._expect("]")

    def _inline_table(self, path, depth):
        self._expect("{")
        self._skip(_SPACE)
        while not self.text.startswith("}", self.at):
            self._pair(path, depth + 1)
            self._skip(_SPACE)
            if not self.text.startswith(",", self.at):
                break
            self.at += 1
        self._expect("}")


def _string_offsets(text, start, end):
    """For each character of the string literal text[start:end], and for its end, the offset in `text`."""
    if text.find("\\", start, end) >= 0:
        return _decode_string(text, start, end)[1]
    width = _quotes(text, start, end)
    return range(start + width + text.startswith("\n", start + width), end - width + 1)


def _quotes(text, start, end):
    return 3 if text.startswith(text[start] * 3, start) and end - start >= 6 else 1


_ESCAPES = {"b": "\b", "t": "\t", "n": "\n", "f": "\f", "r": "\r", '"': '"', "\\": "\\"}
_LINE_CONTINUATION = re.compile(r"\\[ \t]*\n[ \t\n]*")


def _decode_string(text, start, end):
    """What the string literal text[start:end] says, with the offset of each of its characters and of its end."""
    quote = text[start]
    width = _quotes(text, start, end)
    at, stop = start + width, end - width
    if width == 3 and text.startswith("\n", at):
        at += 1
    characters, offsets = [], []
    while at < stop:
        step, character = 1, text[at]
        if character == "\\" and quote == '"':
            letter = text[at + 1]
            if width == 3 and (continued := _LINE_CONTINUATION.match(text, at)):
                at = continued.end()
                continue
            if letter in "uU":
                digits = 4 if letter == "u" else 8
                code = text[at + 2:at + 2 + digits]
                if not re.fullmatch(f"[0-9A-Fa-f]{{{digits}}}", code) or int(code, 16) > 0x10FFFF:
                    raise _Confused
                step, character = 2 + digits, chr(int(code, 16))
            elif letter in _ESCAPES:
                step, character = 2, _ESCAPES[letter]
            else:
                raise _Confused
        characters.append(character)
        offsets.append(at)
        at += step
    offsets.append(stop)
    return "".join(characters), offsets


_POSITION = re.compile(r" \(at (?:line (\d+), column (\d+)|end of document)\)\Z")

# Beginnings of tomllib's messages, with what would be right. What it says itself is kept, in its own words.
_CURES = (
    ("Illegal character", "close the string with the quote that opened it; special characters need a backslash escape"),
    ("Unterminated string", "close the string with the quotes that opened it"),
    ("Expected \"'", "close the string with the quotes that opened it"),
    ("Unescaped '\\'", r"a backslash in double quotes is written \\, or use single quotes"),
    ("Invalid value", 'values are numbers, true, false, "text", [arrays] or { tables }; expressions stand in quotes'),
    ("Invalid statement", 'a line is key = value, [table] or # comment'),
    ("Invalid initial character", "a key has letters, digits, _ and -; other characters need quotes"),
    ("Expected '='", "write key = value"),
    ("Expected newline", "one key = value stands on each line; decimals have a point, text stands in quotes"),
    ("Unclosed array", "close the array with ], and put a comma between its elements"),
    ("Unclosed inline table", "close the table with } on the same line, and put a comma between its keys"),
    ("Expected ']'", "a table header is [name], alone on its line"),
    ("Cannot", "each key and each table is given once"),
    ("Duplicate", "each key is given once"),
)


def _explain(source, error):
    """Span, message and help for a message of tomllib."""
    match = _POSITION.search(error)
    said = error[:match.start()] if match else error
    if match and match.group(1):
        start = source._starts[int(match.group(1)) - 1] + int(match.group(2)) - 1
    else:
        start = len(source.text.rstrip())
    cure = next((cure for beginning, cure in _CURES if said.startswith(beginning)), "see https://toml.io")
    if said.startswith(("Cannot", "Duplicate")):
        said = "a key or table is given twice"
    return (start, start + 1), f"this is not TOML: {said[:1].lower()}{said[1:]}", cure
