"""The command `prove`, and what travels from a certificate into a module."""

import csv
import io
import json

import pytest
from rootwright.cli import main

TRUE = """format = 1
name = "straight"
[parameters]
a = { range = [1, 2] }
[unknown]
name = "x"
bracket = ["0", "5"]
[residual]
equation = "x + x^3 = a"
"""
FALSE = TRUE.replace('"0", "5"', '"0", "1/2"')      # at a = 2 the root is 1


@pytest.fixture
def spec(tmp_path):
    def write(text, name="straight"):
        path = tmp_path/f"{name}.toml"
        path.write_text(text)
        return path
    return write


def test_a_true_spec_is_proved_and_its_promise_stands_in_the_header(spec, tmp_path, capsys):
    path = spec(TRUE)
    assert main(["prove", str(path), "--save", "--strict"]) == 0
    assert main(["compile", str(path), "--require-proof", "--into", str(tmp_path)]) == 0
    header = (tmp_path/"straight.h").read_text()
    assert "Proved over the whole operating range" in header and "there is a root in the bracket" in header
    assert main(["fresh", str(tmp_path)]) == 0


def test_a_refuted_claim_exits_1_and_its_witness_is_a_point_that_eval_takes(spec, tmp_path, capsys):
    path, points = spec(FALSE), tmp_path/"points.csv"
    assert main(["prove", str(path), "--replay", str(points)]) == 1
    assert "refuted" in capsys.readouterr().out
    rows = list(csv.DictReader(io.StringIO(points.read_text())))
    assert any(row["claim"] == "exists" for row in rows)
    assert main(["eval", str(path), "--points", str(points), "--order", "0"]) == 1
    assert "no_sign_change" in capsys.readouterr().out


def test_nothing_is_emitted_without_the_proof_that_was_required(spec, tmp_path, capsys):
    path = spec(FALSE)
    assert main(["prove", str(path), "--save"]) == 1
    assert main(["compile", str(path), "--require-proof", "--into", str(tmp_path/"out")]) == 1
    assert not (tmp_path/"out").exists()
    assert main(["compile", str(path), "--into", str(tmp_path)]) == 0
    assert "REFUTED" in (tmp_path/"straight.h").read_text()


def test_a_certificate_of_another_content_of_the_spec_counts_for_nothing(spec, tmp_path, capsys):
    path = spec(TRUE)
    assert main(["prove", str(path), "--save"]) == 0
    path.write_text(TRUE + "# changed\n")
    assert main(["compile", str(path), "--into", str(tmp_path)]) == 0
    assert "counts for nothing" in capsys.readouterr().err
    assert "nothing yet" in (tmp_path/"straight.h").read_text()
    assert main(["compile", str(path), "--require-proof", "--into", str(tmp_path)]) == 1


@pytest.mark.parametrize("text", ["", "not = [a certificate", "format = 2\n", "format = 1\nname = 3\n"])
def test_a_damaged_certificate_counts_for_nothing(spec, tmp_path, capsys, text):
    path = spec(TRUE)
    (tmp_path/"straight.proof").write_text(text)
    assert main(["compile", str(path), "--into", str(tmp_path)]) == 0
    assert "counts for nothing" in capsys.readouterr().err


def test_several_specs_make_a_table_whatever_the_number_of_workers(spec, capsys):
    paths = [str(spec(TRUE)), str(spec(FALSE, "narrow"))]
    pages = []
    for workers in ("1", "2"):
        assert main(["prove", *paths, "--workers", workers, "--boxes", "2000"]) == 1
        pages.append(capsys.readouterr().out)
    assert pages[0] == pages[1] and "1 of 2 specs fully settled" not in pages[0].splitlines()[0]
    assert main(["prove", *paths, "--json", "--boxes", "2000"]) == 1
    data = json.loads(capsys.readouterr().out)
    assert [entry["claims"]["exists"]["verdict"] for entry in data["specs"]] == ["proved", "refuted"]
    assert [entry["spec"] for entry in data["specs"]] == paths and all(len(entry["digest"]) == 64 for entry in data["specs"])
