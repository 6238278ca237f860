"""`rootwright new` and `rootwright schema`: a spec to start from, and its form for editors."""

import json
import re
import tomllib
from pathlib import Path

import jsonschema
import pytest
from nasty_specs import nasty
from problem_specs import alefeld_potra_shi
from rootwright import cli, pipeline
from rootwright.evidence.verify import verify
from rootwright.spec.reader import read
from rootwright.spec.starter import starter

BAD = sorted((Path(__file__).parent/"specs_bad").glob("*.toml"))
SCHEMA = json.loads(pipeline.schema())
VALIDATOR = jsonschema.Draft202012Validator(SCHEMA)

# Bad in shape: keys, types and words. The others are bad in what they mean, which no schema sees.
BAD_IN_SHAPE = """
    constant_without_value dimensions_misspelt empty_file ends_misspelt equation_as_number equation_missing
    expression_empty foreign_minus format_as_text format_missing format_of_the_future name_of_wrong_letters
    name_too_long output_as_text output_without_expression parameter_not_a_table parameter_without_range
    parameters_empty parameters_missing published_expects_nothing published_incomplete published_not_an_array
    published_parameter_left_out range_of_three range_of_wrong_kinds residual_missing spread_misspelt
    toml_key_with_many_parts unknown_key_at_top unknown_key_near_miss unknown_missing
    unknown_without_name_or_bracket wrong_types""".split()


# -- new


def test_a_new_spec_passes_check_without_a_warning(tmp_path, capsys):
    assert cli.main(["new", "my_closure", "--into", str(tmp_path/"specs")]) == 0
    path = tmp_path/"specs"/"my_closure.toml"
    assert f"rootwright check {path}" in capsys.readouterr().out
    assert cli.main(["check", str(path)]) == 0
    told = capsys.readouterr()
    assert told.out.startswith("my_closure\n") and not told.err


def test_a_new_spec_holds_its_published_value():
    closure, warnings = pipeline.closure(starter("ball").encode(), "ball.toml")
    assert not warnings and not verify(closure, points=10, seed=1).failed


@pytest.mark.parametrize("name", ["R", "h", "rho", "area", "displaced", "rho_water", "a"*200])
def test_any_name_that_a_spec_may_have_will_do(name):
    model, found = read(starter(name).encode(), "spec.toml")
    assert model.name == name and not found


def test_a_new_spec_shows_every_key_of_the_language():
    text = starter("ball")
    for key in _keys(SCHEMA):
        assert re.search(rf"\b{key}\b", text), key


def test_no_file_is_overwritten(tmp_path, capsys, monkeypatch):
    monkeypatch.chdir(tmp_path)
    (tmp_path/"ball.toml").write_text("mine")
    assert cli.main(["new", "ball"]) == 2
    assert "ball.toml is there already" in capsys.readouterr().err and (tmp_path/"ball.toml").read_text() == "mine"


@pytest.mark.parametrize("name", ["two words", "2x", "int", "math", "a__b", "", "../up", "pi"])
def test_a_name_that_no_spec_may_have_is_refused_with_another(name, tmp_path, capsys, monkeypatch):
    monkeypatch.chdir(tmp_path)
    assert cli.main(["new", name]) == 2
    assert capsys.readouterr().err.count("\n") == 1 and not list(tmp_path.iterdir())


# -- schema


def _keys(schema):
    """Every key that the schema's tables name."""
    inner = list(schema.get("properties", {}).values())
    for word in ("additionalProperties", "items"):
        if isinstance(schema.get(word), dict):
            inner.append(schema[word])
    inner += schema.get("anyOf", [])
    return set(schema.get("properties", {})).union(*map(_keys, inner)) if inner else set()


def form_errors(data):
    """What the schema finds wrong; None where the file is no TOML."""
    try:
        return list(VALIDATOR.iter_errors(tomllib.loads(data.decode("utf-8"))))
    except (tomllib.TOMLDecodeError, UnicodeDecodeError):
        return None


def test_the_command_prints_the_shipped_schema_and_it_is_one(capsys):
    assert cli.main(["schema"]) == 0
    printed = json.loads(capsys.readouterr().out)
    assert printed == SCHEMA and printed["$schema"] == "https://json-schema.org/draft/2020-12/schema"
    jsonschema.Draft202012Validator.check_schema(printed)


@pytest.mark.parametrize("name", pipeline.shipped())
def test_every_shipped_spec_has_the_form(name):
    assert form_errors(pipeline.shipped_spec(name)) == []


def test_the_starter_has_the_form():
    assert form_errors(starter("ball").encode()) == []


@pytest.mark.parametrize("spec", BAD, ids=[path.stem for path in BAD])
def test_what_is_bad_in_shape_is_bad_in_form_and_nothing_else_is(spec):
    found = form_errors(spec.read_bytes())
    if found is not None and not spec.stem == "toml_nested_too_deep":
        assert bool(found) == (spec.stem in BAD_IN_SHAPE)


def test_the_list_of_what_is_bad_in_shape_names_files():
    assert set(BAD_IN_SHAPE) <= {path.stem for path in BAD}


def test_the_form_is_no_stricter_than_the_reader():
    for problem in (*alefeld_potra_shi(), *nasty()):
        data = problem.text.encode()
        if read(data, "spec.toml")[0] is not None:
            assert form_errors(data) == [], problem.id


FULL = """\
format = 1
name = "full"
title = "t"
source = "s"
caution = "c"
dimensions = "label"
[constants]
k = { value = 1, unit = "1", about = "a" }
[parameters]
a = { range = [1, "2*k"], unit = "1", spread = "log", differentiate = true, about = "a" }
[definitions]
d = "a*x"
[unknown]
name = "x"
bracket = [0, "9"]
unit = "1"
about = "a"
root = "only"
ends = "closed"
start = "1"
[domain]
require = ["a < 2"]
[residual]
equation = "x = a"
[outputs]
o = { expression = "x^2", unit = "1", about = "a" }
[[published]]
given = { a = 1 }
expect = { x = 1 }
tolerance = { x = 0.1 }
source = "s"
"""

TABLES = [(), ("constants", "k"), ("parameters", "a"), ("unknown",), ("domain",), ("residual",), ("outputs", "o"),
          ("published", 0)]


def table_of(path):
    """The schema of the table at a path of FULL."""
    schema = SCHEMA
    for step in path:
        known = schema.get("properties", {})
        schema = known[step] if step in known else schema["items"] if step == 0 else schema["additionalProperties"]
    return next(each for each in schema.get("anyOf", [schema]) if each.get("type") == "object")


def written(value):
    """TOML of a value, on one line."""
    if isinstance(value, dict):
        return "{ " + ", ".join(f"{key} = {written(inner)}" for key, inner in value.items()) + " }"
    return "[" + ", ".join(map(written, value)) + "]" if isinstance(value, list) else json.dumps(value)


def as_spec(tables):
    """Bytes of a spec with the tables, and whether the reader takes it."""
    data = "".join(f"{key} = {written(value)}\n" for key, value in tables.items()).encode()
    return data, read(data, "spec.toml")[0] is not None


def at(tables, path):
    for step in path:
        tables = tables[step]
    return tables


def test_a_spec_with_every_key_has_the_form_and_is_read():
    assert _keys(SCHEMA) <= {*re.findall(r"\w+", FULL)}
    data, is_read = as_spec(tomllib.loads(FULL))
    assert is_read and form_errors(data) == []


@pytest.mark.parametrize("path", TABLES, ids=str)
def test_form_and_reader_know_and_require_the_same_keys(path):
    known = at(tomllib.loads(FULL), path)
    assert set(known) == set(table_of(path)["properties"])
    for key in [*known, "zzz"]:
        tables = tomllib.loads(FULL)
        table = at(tables, path)
        if key == "zzz":
            table["zzz"] = 1
        else:
            del table[key]
        data, _ = as_spec(tables)
        told = [found.message for found in read(data, "spec.toml")[1]]
        missing = any("has no" in message or "is not known" in message for message in told)
        assert missing == bool(form_errors(data)), (path, key, told)


@pytest.mark.parametrize("path", [(*path, key) for path in TABLES for key in table_of(path)["properties"]], ids=str)
def test_what_the_reader_takes_has_the_form_whatever_stands_at_a_key(path):
    for value in (True, 3, 0.5, "", "y+", "word", [], [1], [1, "2", 3], {}, {"q": 1}, [["a"]]):
        tables = tomllib.loads(FULL)
        at(tables, path[:-1])[path[-1]] = value
        data, is_read = as_spec(tables)
        assert not is_read or form_errors(data) == [], value
