"""`rootwright verify` and `rootwright demo`: what they found becomes the exit status."""

import json

import pytest

from rootwright import cli

SQUARE = """
format = 1
name = "level"
[parameters]
a = { range = [0.5, 2.0] }
[unknown]
name = "x"
bracket = ["0", "2"]
[residual]
equation = "x^2 = a"
[[published]]
given = { a = 2 }
expect = { x = %s }
tolerance = 1e-4
source = "exact: the square root of 2"
"""


def test_a_module_that_agrees_exits_0_and_prints_its_table(capsys):
    assert cli.main(["verify", "kepler", "--points", "5", "--seed", "3"]) == 0
    captured = capsys.readouterr()
    assert captured.err == "" and "everything holds" in captured.out


@pytest.mark.parametrize("value, status", [("1.4142", 0), ("1.4152", 1)])
def test_a_published_value_that_is_missed_exits_1(value, status, tmp_path, capsys):
    spec = tmp_path/"level.toml"
    spec.write_text(SQUARE % value)
    assert cli.main(["verify", str(spec), "--points", "3"]) == status
    assert "1.415" in capsys.readouterr().out or status == 0


def test_json_of_several_specs_is_a_list_that_keeps_the_bad_one(capsys):
    assert cli.main(["verify", "kepler", "no_such_spec", "--points", "2", "--json"]) == 2
    good, bad = json.loads(capsys.readouterr().out)["specs"]
    assert (good["spec"], good["valid"], bad["spec"], bad["valid"]) == ("kepler", True, "no_such_spec", False)


@pytest.mark.parametrize("status", [0, 1])
def test_the_demo_prints_its_page_and_passes_its_status_on(status, monkeypatch, capsys):
    from rootwright.demo import story

    def told(stream, progress=None):
        stream.write("a page\n")
        return status
    monkeypatch.setattr(story, "run", told)
    assert cli.main(["demo"]) == status
    assert capsys.readouterr().out == "a page\n"
