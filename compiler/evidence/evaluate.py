"""A table of points through a module: the table's own columns, then root, outputs, status and derivatives. Streams."""

import csv
import io
import re
from collections import Counter
from itertools import combinations_with_replacement, islice

from rootwright.emit.manual import STATUS
from rootwright.spec.names import nearest

CHUNK = 4096                     # rows solved, and held, at a time

BAD_INPUT = "bad_input"


class TableError(Exception):
    """A table that cannot be used; the message is one line that says what is wrong and how to mend it."""


def word(status):
    """Status as the status column spells it: `solved`, the failure's word, or the caveats joined with `+`."""
    if status <= 0:
        return dict((code, name) for code, name, _ in STATUS)[status]
    return "+".join(name for code, name, _ in STATUS if code > 0 and status & code)


def is_rootless(status_word):
    """True for the status word of a row without a root."""
    return status_word == BAD_INPUT or any(name == status_word and code < 0 for code, name, _ in STATUS)


def columns(model, order):
    """Names of the columns that `evaluate` adds: results, first derivatives, second ones for P at or before Q."""
    names = [parameter.name for parameter in model.parameters if parameter.differentiate]
    first = [f"d{result}/d{name}" for result in model.results for name in names]
    second = [f"d2{result}/d{p}/d{q}" for result in model.results for p, q in combinations_with_replacement(names, 2)]
    return [*model.results, "status", "iterations", "error_bound", *first*(order >= 1), *second*(order == 2)]


def evaluate(model, module, source, sink, order=1, progress=None):
    """Solve at every row of a CSV and write it with the results added; returns {status word: rows}.

    source: binary stream of UTF-8 text with one column for each parameter, named in its first line. sink: text stream
    that does not translate line ends. module: a CModule or PythonModule. progress: called with a line of text now and
    then. Memory does not grow with the number of rows. Raises TableError where the table as a whole cannot be read.
    """
    text = io.TextIOWrapper(source, encoding="utf-8-sig", newline="")
    try:
        return _Evaluation(model, module, _Lines(text), sink, order).run(progress)
    finally:
        text.detach()


class _Lines:
    """The lines of a stream, one at a time; the last one is kept."""

    def __init__(self, stream):
        self.stream = stream
        self.last = ""

    def __iter__(self):
        for self.last in self.stream:
            yield self.last


class _Evaluation:
    def __init__(self, model, module, lines, sink, order):
        self.model, self.module, self.lines, self.order = model, module, lines, order
        self.reader = csv.reader(lines)
        self.added = columns(model, order)
        self.header = self._header()
        self.places = self._places()
        self.sink = sink
        self.end = "\r\n" if lines.last.endswith("\r\n") else "\n"
        differentiated = [k for k, parameter in enumerate(model.parameters) if parameter.differentiate]
        self.first = differentiated
        self.second = tuple(zip(*combinations_with_replacement(differentiated, 2)))
        self.words = {}

    def run(self, progress):
        counts, done = Counter(), 0
        self._write([",".join([*map(_cell, self.header), *self.added])])
        while rows := list(self._rows(CHUNK)):
            self._write(self._solved(rows, counts))
            done += len(rows)
            if progress is not None:
                progress(f"{done:,} rows")
        codes = sorted(self.words, key=lambda code: (code < 0, abs(code)))
        return {name: counts[name] for name in [*map(self._word, codes), BAD_INPUT] if counts[name]}

    # -- reading

    def _rows(self, count):
        """Up to `count` rows that hold anything."""
        try:
            for row in islice(filter(None, self.reader), count):
                yield row
                last = row[-1]
                if ("\n" in last or "\r" in last) and not self.lines.last.rstrip().endswith('"'):
                    self._refuse("a quotation mark is never closed; close it, or double it inside a quoted cell")
        except csv.Error as error:
            too_long = "a cell is longer than 131,072 characters; is a quotation mark never closed?"
            self._refuse(too_long if "limit" in str(error) else f"{error}; quote cells that hold line breaks")
        except UnicodeDecodeError:
            self._refuse("the text is not UTF-8; save the table as UTF-8")

    def _refuse(self, message):
        line = self.reader.line_num + 1
        raise TableError(f"near line {line}: {message}")

    def _header(self):
        header = next(self._rows(1), None)
        if header is None:
            raise TableError("the table is empty; its first line names the columns, one for each of "
                             + ", ".join(parameter.name for parameter in self.model.parameters))
        return header

    def _places(self):
        """Index of each parameter's column."""
        names = [cell.strip() for cell in self.header]
        wanted = [parameter.name for parameter in self.model.parameters]
        for name in wanted:
            if name not in names:
                near = nearest(name, [other for other in names if other not in wanted])
                hint = f"the first line must name {', '.join(wanted)}" + (f"; it has `{near}`" if near else "")
                if len(names) == 1 and any(mark in names[0] for mark in ";\t"):
                    hint = "columns are separated by commas"
                raise TableError(f"no column is called `{name}`; {hint}")
            if names.count(name) > 1:
                raise TableError(f"{names.count(name)} columns are called `{name}`; rename all but one")
        for name in names:
            if name in self.added:
                raise TableError(f"a column is called `{name}`, as is one of the results; rename or remove it")
        return [names.index(name) for name in wanted]

    # -- solving

    def _solved(self, rows, counts):
        """Lines of the output for the rows. A row that is no point is solved as NaN, and says `bad_input`."""
        bad = set()
        for k, row in enumerate(rows):
            if len(row) != len(self.header):
                rows[k] = self._squared(row)
                bad.add(k)
        points = self._points(rows, bad)
        out = self.module.solve_batch(points, self.order > 0)
        codes = out["status"].tolist()
        words = [self._word(code) for code in codes]
        for k in bad:
            words[k] = BAD_INPUT
        counts.update(words)
        derivatives = self._derivatives(points, out)
        plain = not _SPECIAL.search("\t".join(map("\t".join, rows)))
        before, after = ","*len(self.model.results), ","*(len(self.added) - len(self.model.results) - 1)
        numbers = (out[field].tolist() for field in ("y", "iterations", "error_bound"))
        for row, code, name, y, iterations, bound, slopes in zip(rows, codes, words, *numbers, derivatives):
            cells = ",".join(row if plain else map(_cell, row))
            if code < 0:
                yield f"{cells}{before},{name}{after}"
            else:
                yield ",".join([cells, *map(repr, y), name, str(iterations), repr(bound), *map(repr, slopes)])

    def _derivatives(self, points, out):
        """The derivatives of every row in the order of their columns."""
        import numpy as np

        parts = []
        if self.order >= 1:
            parts.append(out["jac"][:, :, self.first])
        if self.order == 2 and self.second:
            hess = np.array([self.module.hessian(p, root) for p, root in zip(points, out["y"][:, 0].tolist())])
            parts.append(hess[:, :, self.second[0], self.second[1]])
        flat = [part.reshape(len(points), -1) for part in parts]
        return np.concatenate(flat, axis=1).tolist() if flat else [()]*len(points)

    def _write(self, lines):
        """Write and pass on, so that who reads from a pipe sees every chunk when it is done."""
        self.sink.write(self.end.join(lines) + self.end)
        self.sink.flush()

    def _word(self, code):
        if code not in self.words:
            self.words[code] = word(code)
        return self.words[code]

    def _squared(self, row):
        """A ragged row made as long as the header: empty cells added, or the surplus kept in the last one."""
        missing = len(self.header) - len(row)
        return row + [""]*missing if missing > 0 else row[:missing - 1] + [",".join(row[missing - 1:])]

    def _points(self, rows, bad):
        """Parameters of every row as floats; where one is no number all are NaN, and the row is added to `bad`."""
        values = []
        for place in self.places:
            cells = [row[place] for row in rows]
            try:
                if not _plain("".join(cells)):
                    raise ValueError
                values.append(list(map(float, cells)))
            except ValueError:
                values.append([_number(cell) for cell in cells])
        points = list(zip(*values))
        bad.update(k for k, point in enumerate(points) if None in point)
        for k in bad:
            points[k] = (float("nan"),)*len(self.places)
        return points


_SPECIAL = re.compile('[",\r\n]')


def _cell(text):
    """A cell as CSV writes it: in quotation marks where it needs them."""
    return '"' + text.replace('"', '""') + '"' if _SPECIAL.search(text) else text


def _plain(text):
    """What `float` reads beyond plain numbers, digit groups and digits of other scripts, is left out."""
    return text.isascii() and "_" not in text


def _number(cell):
    try:
        return float(cell) if _plain(cell) else None
    except ValueError:
        return None
