"""Diagnostics: every mistake has its place, its words and its cure, and whatever a spec holds prints harmlessly."""

from pathlib import Path

import pytest

from rootwright.spec.diagnostics import LINE_WIDTH, WARNING, Diagnostic, render
from rootwright.spec.names import refusal
from rootwright.spec.reader import read
from rootwright.spec.source import load

BAD = sorted((Path(__file__).parent / "specs_bad").glob("*.toml"))

GOOD = """\
format = 1
name = "level"

[parameters]
a = { range = [0.5, 2.0] }

[unknown]
name = "x"
bracket = ["0", "2"]

[residual]
equation = "x^2 = a"
"""


def diagnostics(text):
    return read(text.encode(), "spec.toml")[1]


@pytest.mark.parametrize("spec", BAD, ids=[path.stem for path in BAD])
def test_a_bad_spec_is_told_what_is_wrong_word_for_word(spec):
    model, found = read(spec.read_bytes(), spec.name)
    assert (model is None) == any(diagnostic.severity == "error" for diagnostic in found)
    assert "\n".join(render(diagnostic) for diagnostic in found) == spec.with_suffix(".txt").read_text("utf-8")


def test_every_bad_spec_has_its_message_beside_it():
    folder = BAD[0].parent
    assert {path.stem for path in folder.glob("*.txt")} == {path.stem for path in BAD}
    assert all(spec.with_suffix(".txt").stat().st_size for spec in BAD)


def test_the_spec_that_the_bad_ones_are_made_from_is_good():
    model, found = read(GOOD.encode(), "spec.toml")
    assert model is not None and not found


def test_all_mistakes_of_a_file_come_in_one_run_and_in_order():
    text = (GOOD.replace("format = 1", "format = 7").replace('"0", "2"', '"0", "x"').replace("= a\"", "= b\"")
            .replace("range = [0.5, 2.0]", "range = [0.5, 2.0], spred = 1")
            + '\n[outputs]\nint = { expression = "1+" }\n')
    assert [(found.line, found.column) for found in diagnostics(text)] == [
        (1, 10), (5, 27), (9, 18), (12, 19), (15, 1), (15, 25)]


def test_a_spec_with_warnings_only_gives_a_model():
    model, found = read(GOOD.replace("[unknown]", "b = { range = [0, 1] }\n[unknown]").encode(), "spec.toml")
    assert model is not None and [diagnostic.severity for diagnostic in found] == [WARNING]
    assert "warning: " in render(found[0])


# Where a caret lands inside a string, whatever way TOML spells the string.
@pytest.mark.parametrize("literal", [
    '"x^2 = @a"', "'x^2 = @a'", '"""x^2 = @a"""', "'''x^2 = @a'''", '"""\nx^2 = @a"""', "'''\nx^2 = @a'''",
    '"""\nx^2\n= @a"""', '"""x^2 \\\n     = @a"""', '"""x^2 = \\   \n\n   @a"""', '"x^2\\t= @a"', '"x\\u005E2 = @a"',
    '"\\U00000078^2 = @a"', '"""x^2 = @a + ""\\"""""',
])
def test_the_caret_finds_its_character_in_every_kind_of_string(literal):
    text = GOOD.replace('"x^2 = a"', literal)
    found = diagnostics(text)
    line = text.split("\n")[found[0].line - 1]
    assert line[found[0].column - 1] == "@"
    assert found[0].source_line == line


@pytest.mark.parametrize("table", [
    'parameters.a.range = [0.5, "@"]',
    '"parameters".a = { range = [0.5, "@"] }',
    '[parameters]\na.range = [0.5, "@"]',
    '[parameters.a]\nrange = [0.5,\n  # a comment, "quoted" ]\n  "@"]',
    "['parameters']\n\"a\" = {range=[0.5,\"@\"]}",
    '[ parameters . "\\u0061" ]\nrange = [ 0.5 , "@" , ]',
])
def test_the_caret_finds_its_value_however_the_tables_are_written(table):
    head, tail = GOOD.split("[parameters]\na = { range = [0.5, 2.0] }\n")
    text = head + table + "\n" + tail
    found = diagnostics(text)
    assert [text.split("\n")[each.line - 1][each.column - 1] for each in found] == ["@"]


def test_the_caret_finds_the_right_entry_of_an_array_of_tables():
    entry = '\n[[published]]\ngiven = { a = 1 }\nexpect.x = %s\ntolerance = 1\nsource = "invented"\n'
    found = diagnostics(GOOD + entry % '"1"' + entry % '"1 +"' + entry % '"@"')
    assert [each.line for each in found] == [GOOD.count("\n") + 10, GOOD.count("\n") + 16]


def test_the_caret_finds_a_table_inside_an_array_of_tables():
    entry = '\n[[published]]\nexpect.x = 1\ntolerance = 1\nsource = "invented"\n[published.given]\na = %s\n'
    found = diagnostics(GOOD + entry % "1" + entry % '"@"')
    assert [each.line for each in found] == [GOOD.count("\n") + 14]


def test_windows_line_ends_and_a_byte_order_mark_are_fine():
    data = b"\xef\xbb\xbf" + GOOD.replace("\n", "\r\n").encode()
    assert read(data, "spec.toml")[0] is not None
    found = read(data.replace(b"= a", b"= b"), "spec.toml")[1]
    assert [(each.line, each.column) for each in found] == [(12, 19)]


# Rendering.
def rendered(line, column, length=1, message="wrong", file="spec.toml"):
    return render(Diagnostic(file, 1, column, length, line, message, "right"))


def test_a_diagnostic_reads_place_line_caret_help():
    assert rendered("abc def", 5, 3) == "spec.toml:1:5: wrong\n  abc def\n      ^^^\n  right\n"


@pytest.mark.parametrize("character", [
    "\x1b", "\x07", "\r", "\x7f", "\x9b", "\u200b", "\u202e", "\u2066", "\ufeff", "\u2028",
    "\u0301", "\U000e0041"])
def test_characters_that_do_not_print_are_escaped_everywhere(character):
    text = rendered(f"a{character}b@", 4, message=f"m{character}", file=f"f{character}")
    assert character not in text
    assert text.count(f"<U+{ord(character):04X}>") == 3
    line, caret = text.split("\n")[1:3]
    assert line[caret.index("^")] == "@"


def test_a_tab_takes_one_column():
    assert rendered("\t\tx", 3).split("\n")[1:3] == ["    x", "    ^"]


def test_wide_characters_move_the_caret_by_two_columns():
    assert rendered("\u4e2d\u6587x", 3).split("\n")[2] == "      ^"


@pytest.mark.parametrize("column", [1, 50, 5_000, 9_950, 10_000])
def test_a_long_line_is_shown_as_a_window_round_the_caret(column):
    line = "." * (column - 1) + "@" + "." * (10_000 - column)
    shown, caret = rendered(line, column).split("\n")[1:3]
    assert len(shown) <= LINE_WIDTH + 8 and shown[caret.index("^")] == "@"


def test_a_caret_may_stand_behind_the_end_of_its_line():
    assert rendered("ab", 3).split("\n")[2] == "    ^"


def test_carets_stay_on_their_line():
    source, _, _ = load(b'a = """x\ny"""\n', "spec.toml")
    found = source.diagnostic((4, 11), "wrong", "right")
    assert (found.line, found.column, found.length) == (1, 5, 4)


# Names. C: ISO/IEC 9899 keywords; C++: ISO/IEC 14882 keywords; Python: The Python Language Reference, section 2.3.1.
@pytest.mark.parametrize("name", """
    int double float if else while register restrict inline signed typeof constexpr nullptr alignof
    class template new delete namespace operator and_eq xor bitand co_await concept requires wchar_t char8_t
    lambda None True def is in pass yield async nonlocal with global
    sin exp where hypot min sign cbrt pow fabs fma copysign isnan
    solve solve_jacobian tangent adjoint jacobian hessian tangent_adjoint solve_many status iterations error_bound pi
    """.split() + ["_x", "2x", "x__y", "", " ", "x y", "x-y", "\u03b1", "\u0131", "x\u0301", "x" * 201, "x\n"])
def test_taken_and_malformed_names_are_refused(name):
    wrong, help = refusal(name)
    assert wrong and help


@pytest.mark.parametrize("name", """
    e E I root slope p g gamma y0 j1 x_ Re residual point lower upper type match print
    """.split())
def test_other_names_are_the_authors(name):
    assert refusal(name) is None


def test_a_suggested_name_is_itself_allowed():
    for name in ["int", "2x", "x__y", "_", "\u03b1\u03b2", "a b", "class", "pi", "__"]:
        suggestion = refusal(name)[1].split()[-1]
        assert refusal(suggestion) is None
