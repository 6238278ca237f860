"""A spec is data from strangers: whatever the bytes are, the answer is a model or diagnostics, and nothing runs."""

import builtins
import random
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import rootwright.specs
from rootwright.spec import source, tables
from rootwright.spec.diagnostics import render
from rootwright.spec.reader import read

MEGABYTE = 1 << 20
SHIPPED = sorted(Path(rootwright.specs.__file__).parent.glob("*.toml"))

GOOD = """\
format  = 1
name    = "pipe_friction"
title   = "TITLE"
source  = "SOURCE"
caution = "CAUTION"

[constants]
c_rough = { value = 3.7, unit = "1", about = "ABOUT" }
c_visc  = { value = "2.51", unit = "1" }

[parameters]
Re  = { range = [4.0e3, 1.0e8], unit = "1", spread = "log", about = "Reynolds number" }
rel = { range = [0.0, 0.05], unit = "1", about = "relative roughness k/D" }

[definitions]
inner = "rel/c_rough + c_visc*y/Re"

[unknown]
name    = "y"
bracket = ["1", "20"]
unit    = "1"
ends    = "closed"
start   = "8"

[domain]
require = ["Re*rel <= 1.0e7"]

[residual]
equation = "y = -2*log10(inner)"

[outputs]
f = { expression = "1/y^2", unit = "1", about = "friction factor" }

[[published]]
given     = { Re = 1.0e5, rel = 1.0e-4 }
expect    = { f = 0.0185 }
tolerance = 5.0e-5
source    = "ORIGIN"
"""
FIELDS = ("TITLE", "SOURCE", "CAUTION", "ABOUT", "ORIGIN")

NASTY = [
    "__import__('os').system('true')", "`id`", "$(id)", "*/ int main(void) { } /*", "// */",
    "\n#define double float\n", "??/", "??/\n",
    "'\"\\", '"""', "'''", "{{ 7*7 }}", "{% for x in y %}", "%s %n %(x)s", "${x}", "#{x}", "\u202etxet\u202c",
    "\u2066\u2069", "\u200b",
    "\ufeff", "\x1b[31m", "\x07", "\r\n", "\u2028", "\u2029", "\x85", "<script>", "\\", "\\n", "\\u0041",
    "\U0001f600", "\U0010ffff",
    "\u0301" * 50, "a" * 10_000, "#include <x>", "\x7f",
]


def told(data):
    """Reads and renders; what must hold for every input."""
    model, found = read(data, "spec.toml")
    assert (model is None) == any(diagnostic.severity == "error" for diagnostic in found)
    assert len(found) <= tables.MAX_FINDINGS
    for diagnostic in found:
        text = render(diagnostic)
        assert all(character.isprintable() or character == "\n" for character in text)
        assert text.count("\n") == 4 and len(text) < 4_000
        assert 1 <= diagnostic.column <= len(diagnostic.source_line) + 1
    return model, found


def toml_string(text):
    return "".join(character if character.isprintable() and character.isascii() and character not in '"\\'
                   else f"\\U{ord(character):08X}" for character in text)


def test_the_spec_that_the_others_are_made_from_is_good():
    model, found = told(GOOD.encode())
    assert model is not None and not found and model.dimensions == "checked"


@pytest.mark.parametrize("path", SHIPPED, ids=[path.stem for path in SHIPPED])
def test_shipped_specs_read_without_a_word(path):
    model, found = read(path.read_bytes(), path.name)
    assert model is not None and not found


@pytest.mark.parametrize("nasty", NASTY)
def test_text_fields_hold_anything_and_keep_it(nasty):
    text = GOOD
    for word in FIELDS:
        text = text.replace(word, toml_string(nasty))
    model, found = told(text.encode())
    assert not found
    assert [model.title, model.source, model.caution] == [nasty] * 3
    assert [model.constants[0].about, model.published[0].source] == [nasty] * 2


@pytest.mark.parametrize("nasty", NASTY)
@pytest.mark.parametrize("field", [
    '"y = -2*log10(inner)"', '"rel/c_rough', '"pipe_friction"', '"1", "20"', 'unit    = "1"', '"log"',
    '"closed"', '"1/y^2"', "[definitions]\n", 'Re  ='])
def test_nasty_text_elsewhere_is_an_error_or_harmless(nasty, field):
    told(GOOD.replace(field, field + toml_string(nasty)).encode())
    told(GOOD.replace(field, f'"{toml_string(nasty)}"').encode())
    told(GOOD.replace(field, nasty).encode())


def test_nothing_in_a_spec_is_evaluated(monkeypatch):
    def refuse(*args, **kwargs):
        raise AssertionError("spec text reached an evaluator")
    for name in ("eval", "exec", "compile"):
        monkeypatch.setattr(builtins, name, refuse)
    for text in ("__import__('os').system('true')", "().__class__", "lambda: 0", "[x for x in (1,)]",
    "sin.__call__(1)"):
        for field in ('"y = -2*log10(inner)"', '"1/y^2"', '"20"', '"8"'):
            model, found = told(GOOD.replace(field, f'"{text}"').encode())
            assert model is None and found


def with_equation(text):
    return GOOD.replace('"y = -2*log10(inner)"', f'"""{text}"""')


def many(count, line):
    return "".join(line.format(i) for i in range(count))


HUGE = {
    "parentheses": (with_equation("(" * 10_000 + "y" + ")" * 10_000), "nests deeper"),
    "open parentheses": (with_equation("(" * (MEGABYTE - 2_000)), "nests deeper"),
    "signs": (with_equation("-" * (MEGABYTE - 2_000)), "nests deeper"),
    "plus signs": (with_equation("+" * (MEGABYTE - 2_000)), "20,000 operations"),
    "a sum": (with_equation("y" + "+y" * 500_000), "20,000 operations"),
    "arguments": (with_equation("max(" + "y," * 500_000 + "y)"), "20,000 operations"),
    "powers": (with_equation("y" + "^y" * 500_000), "nests deeper"),
    "spaces": (with_equation("y" + " " * (MEGABYTE - 2_000)), None),
    "a title": (GOOD.replace("TITLE", "x" * (MEGABYTE - 2_000)), None),
    "a title of escapes": (GOOD.replace("TITLE", "\\n" * (MEGABYTE // 2 - 2_000)), None),
    "a title of line ends": (GOOD.replace('"TITLE"', '"""' + "\n" * 40_000 + '"""'), None),
    "a long name": (with_equation("y + " + "z" * (MEGABYTE - 2_000)), "not declared"),
    "a long number": (with_equation("y + " + "1" * (MEGABYTE - 2_000)), "out of reach"),
    "a long exponent": (with_equation("y + 1e" + "9" * (MEGABYTE - 2_000)), "out of reach"),
    "an exponent": (with_equation("y + 1e-999999999"), "out of reach"),
    "a long integer": (GOOD.replace("4.0e3", "1" * 5_000), "1,000 characters"),
    "a long hexadecimal": (GOOD.replace("4.0e3", "0x" + "f" * (MEGABYTE - 2_000)), "1,000 characters"),
    "names": (with_equation("y" + many(9_000, "+z{}")), "not declared"),
    "wrong calls": (with_equation("y" + "+sin()" * 10_000), "sin takes"),
    "definitions": (GOOD.replace("inner =", 'd0 = "y"\n' + many(9_000, 'd{0}_ = "d0 + {0}"\n') + "inner ="), None),
    "a chain": (GOOD.replace("inner =", 'd0 = "rel"\n' + "".join(f'd{i} = "d{i - 1}*d{i - 1}"\n'
    for i in range(1, 9_000)) + "inner =")
                .replace('"20"', '"d8999"'), None),
    "a chain upwards": (GOOD.replace("inner =", "".join(f'd{i} = "d{i + 1}"\n'
    for i in range(9_000)) + 'd9000 = "y"\ninner ='),
                        "used before"),
    "outputs": (GOOD.replace("[[published]]", many(2_000, 'o{} = {{ expression = "' + "+".join(["y"] * 100) + '" }}\n')
                             + "[[published]]"), "50,000 operations"),
    "keys": (GOOD + many(40_000, "k{} = 1\n"), "10,000 entries"),
    "tables": (GOOD + many(40_000, "[t{}]\n"), "10,000 entries"),
    "published values": (GOOD + "[[published]]\n" * 40_000, "10,000 entries"),
    "array elements": (GOOD.replace("4.0e3", "1," * 500_000 + "1"), "10,000 entries"),
    "line ends": (GOOD + "\n" * MEGABYTE, "larger than"),
    "lines": (GOOD + "\n" * 60_000, "50,000 lines"),
    "comments": (GOOD + "#\n" * 60_000, "50,000 lines"),
    "a comment": (GOOD + "#" * (MEGABYTE - 2_000), None),
    "brackets": ("a = " + "[" * (MEGABYTE - 10), "nest deeper"),
    "braces": ("a={" * (MEGABYTE // 3), "nest deeper"),
    "a dotted key": ("a." * (MEGABYTE // 2 - 10) + "a = 1", "parts"),
    "a dotted header": ("[" + "a." * (MEGABYTE // 2 - 10) + "a]", "parts"),
    "a quoted key": ('"' + "\\u0041" * 100_000 + '" = 1', "not known"),
    "quotes": ('"' * MEGABYTE, "TOML"),
    "backslashes": ('a = "' + "\\" * (MEGABYTE - 10), "TOML"),
    "quotes in a string": ('a = """' + '""x' * 300_000 + '"""', "not known"),
    "the same key": ("a = 1\n" * 9_000, "given twice"),
    "units": (GOOD.replace("rel = {", many(1_500, 'p{0} = {{ range = [0, 1], unit = "m^{0}/s" }}\n') + "rel = {"),
              "exponent"),
    "an oversized file": ("x" * (MEGABYTE + 1), "larger than"),
}


@pytest.mark.parametrize("name", HUGE)
def test_a_huge_spec_is_read_or_refused(name):
    text, words = HUGE[name]
    model, found = told(text.encode())
    if words is None:
        assert model is not None
    else:
        assert any(words in diagnostic.message for diagnostic in found), [diagnostic.message
        for diagnostic in found][:3]


def test_a_file_of_exactly_the_limit_is_read():
    assert told((GOOD + "#" * (source.MAX_BYTES - len(GOOD))).encode())[0] is not None


def test_a_truncated_file_is_told_wherever_it_ends():
    data = GOOD.encode()
    for length in range(len(data)):
        told(data[:length])


@pytest.mark.parametrize("data", [
    b"", b"\n", b"\xff", b"\0", b"\xef\xbb\xbf", b"\xff\xfeA\0", b"\xc0\x80", b"\xed\xa0\x80", b"=", b"[", b"]",
    b"a", b"a=", b"[]", b"[[]]", b"''=1", b'""=""', b"a.b", b"\r", b"\r\r\n", b"parameters=1", b"unknown=[]",
    b"[[unknown]]", b"[[parameters]]", b"[[published]]", b"published=[1]", b"residual=''",
    b"[unknown]\nname=''", b"[unknown]\nbracket=[[],{}]", b"[parameters]\n''={}", b"[constants.a.b]\nc=1"])
def test_a_scrap_of_a_file_is_told(data):
    model, found = told(data)
    assert model is None and found


@settings(max_examples=200, deadline=None)
@given(st.binary(max_size=200))
def test_any_bytes_are_told(data):
    told(data)


PIECES = [piece.encode() for piece in (
    '"', "'", '"""', "[", "]", "[[", "{", "}", "=", "\n", "#", "\\", "(", ")", "^", "*", ",", ".", "-", "+", "0", "9",
    "1e999", "<", " ",
    "true", "inf", "nan", "y", "unknown", "where(", "min(", "and", "not", "==", "\u202e", "\u00e9", "degC", "%",
    "/")] + [b"\0", b"\xff"]


@pytest.mark.parametrize("seed", range(8))
def test_a_mutated_spec_is_told(seed):
    chance = random.Random(seed)
    specs = [GOOD.encode(), *(path.read_bytes() for path in SHIPPED)]
    for _ in range(150):
        data = bytearray(chance.choice(specs))
        for _ in range(chance.choice([1, 1, 2, 5, 20])):
            start = chance.randrange(len(data) + 1)
            end = min(len(data), start + chance.choice([0, 0, 1, 3, 30]))
            data[start:end] = chance.choice(
                [b"", chance.choice(PIECES), bytes([chance.randrange(256)]), bytes(data[end:end + 20])])
        told(bytes(data))
