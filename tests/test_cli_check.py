"""`rootwright` and `rootwright check`: what is printed, where it goes, and the exit status."""

import json
import math
import os
import subprocess
import sys
from pathlib import Path

import pytest

from rootwright import cli, pipeline
from rootwright.binding.module import load
from rootwright.calculus.balls import Balls, ball, precision
from rootwright.calculus.lower import Lowering
from rootwright.calculus.program import Graph, evaluate, interpret
from rootwright.evidence import tidy
from rootwright.evidence.formula import derivative_lines
from rootwright.evidence.page import sample_points
from rootwright.spec.expression import parse

SQUARE = """
format = 1
name = "{name}"
[parameters]
a = {{ range = [0.5, 2.0] }}
[unknown]
name = "x"
bracket = ["0", "2"]
[residual]
equation = "{equation}"
"""


def write(folder, name="level", equation="x^2 = a"):
    path = folder/f"{name}.toml"
    path.write_text(SQUARE.format(name=name, equation=equation), encoding="utf-8")
    return str(path)


COMMAND = [sys.executable, "-m", "rootwright"]


def run(*arguments, **options):
    return subprocess.run([*COMMAND, *arguments], capture_output=True, text=True, check=False, **options)


# -- the command itself


def test_help_lists_the_commands_that_exist_and_no_other(capsys):
    assert cli.main(["--help"]) == 0
    text = capsys.readouterr().out
    for command in ("check", "prove", "compile", "eval", "verify", "bench", "fresh", "new", "schema", "demo"):
        assert f"\n    {command} " in text
    assert "report" not in text


@pytest.mark.parametrize("command", ["check", "prove", "compile", "eval", "verify", "bench", "fresh", "new", "schema", "demo"])
def test_every_command_explains_itself(command, capsys):
    assert cli.main([command, "--help"]) == 0
    assert "exit status" in capsys.readouterr().out


@pytest.mark.parametrize("arguments", [
    [], ["nonsense"], ["check"], ["check", "kepler", "--nonsense"], ["verify", "kepler", "--points", "0"],
    ["eval", "kepler"], ["compile", "kepler", "--target", "ada"]])
def test_wrong_usage_exits_2_and_says_so_on_stderr(arguments, capsys):
    assert cli.main(arguments) == 2
    captured = capsys.readouterr()
    assert captured.out == "" and "error:" in captured.err


def test_python_m_runs_the_same_command():
    done = run("--version")
    assert (done.returncode, done.stdout) == (0, "rootwright 0.1.0\n")


def test_a_defect_is_told_in_one_line_without_a_traceback(monkeypatch, capsys):
    def broken(spec):
        raise ZeroDivisionError("first line\nsecond line")
    monkeypatch.setattr(pipeline, "find", broken)
    assert cli.main(["check", "kepler"]) == 2
    error = capsys.readouterr().err
    assert error.count("\n") == 1 and "ZeroDivisionError: first line" in error


def test_an_interrupt_exits_130_in_one_line(monkeypatch, capsys):
    def interrupted(spec):
        raise KeyboardInterrupt
    monkeypatch.setattr(pipeline, "find", interrupted)
    assert cli.main(["check", "kepler"]) == 130
    assert capsys.readouterr().err == "rootwright: interrupted\n"


def test_a_reader_that_goes_away_ends_the_command_quietly():
    process = subprocess.Popen([*COMMAND, "check", "kepler"], stdout=subprocess.PIPE, stderr=subprocess.PIPE)
    process.stdout.close()
    error = process.stderr.read()
    process.stderr.close()
    assert process.wait() == 1 and error == b""


@pytest.mark.skipif(not os.path.exists("/dev/full"), reason="needs a device that is always full")
def test_a_full_disk_is_told_in_one_line():
    with open("/dev/full", "w") as full:
        done = subprocess.run([*COMMAND, "check", "kepler"], stdout=full, stderr=subprocess.PIPE, text=True,
                              check=False)
    assert done.returncode == 2
    assert done.stderr.count("\n") == 1 and "is the disk full" in done.stderr


def test_an_encoding_without_a_letter_of_the_spec_escapes_it(tmp_path):
    path = Path(write(tmp_path))
    path.write_text(path.read_text().replace("[parameters]", 'title = "Füllstand"\n[parameters]'), encoding="utf-8")
    done = run("check", str(path), env=os.environ | {"PYTHONIOENCODING": "ascii"})
    assert done.returncode == 0 and "F\\xfcllstand" in done.stdout


# -- check


@pytest.fixture(scope="module", params=pipeline.shipped())
def shipped(request):
    closure = pipeline.promising(request.param)
    return closure, load(closure, pipeline.emit(closure, "python"), "python")


def test_the_formulas_on_the_page_are_the_derivatives_that_the_module_returns(shipped, monkeypatch):
    """Read back as expressions of a spec and evaluated with 300 bits, they give what the module's instructions give."""
    closure, module = shipped
    monkeypatch.setattr(tidy, "LONGEST", 10**6)
    model, sheet = closure.model, derivative_lines(closure.model)
    graph = Graph()
    lowering = Lowering(graph)
    for constant in model.constants:
        lowering.declare(constant.name, graph.named(constant.name, lowering.lower(constant.expression)))
    inputs = [*(parameter.name for parameter in model.parameters), model.unknown.name]
    for name in inputs:
        lowering.declare(name, graph.input(name))
    for item in (*model.definitions, *model.outputs):
        lowering.declare(item.name, lowering.lower(item.expression))
    for _, lines in sheet.items():
        for label, text in lines:
            lowering.declare(label, lowering.lower(parse(text)))
    g, *outputs = sheet
    for point in sample_points(closure):
        root = module.solve(list(point.values())).y[0]
        inputs = {name: ball(value) for name, value in (*point.items(), (model.unknown.name, root))}
        with precision(300):
            emitted = interpret(closure.program, Balls(), inputs, closure.kernels["jacobian"])
            values = evaluate(graph.instructions, lowering.names.values(), Balls(), inputs)

            def partial(result, name):
                labels = [label for label, _ in sheet[result] if label in (f"{result}_{name}", f"{result}__{name}")]
                return values[lowering.names[labels[0]]] if labels else ball(0.0)

            for parameter in model.parameters:
                if parameter.differentiate:
                    along = -partial(g, parameter.name)/partial(g, model.unknown.name)
                    assert_same(emitted[f"d{model.unknown.name}/d{parameter.name}"], along)
                    for output in outputs:
                        assert_same(emitted[f"d{output}/d{parameter.name}"],
                                    partial(output, parameter.name) + partial(output, model.unknown.name)*along)


def assert_same(one, other):
    """Two balls hold the same number, to some sixty digits."""
    assert one.overlaps(other)
    assert float((one - other).abs_upper()) <= 1e-60*float(one.abs_upper()) + 1e-80


def test_the_page_of_every_shipped_spec_has_all_its_parts_within_100_columns(shipped, capsys):
    model = shipped[0].model
    assert cli.main(["check", model.name]) == 0
    captured = capsys.readouterr()
    assert captured.err == ""
    assert max(map(len, captured.out.splitlines())) <= 100
    words = " ".join(captured.out.replace("\n", " ").split())
    for text in (model.title, model.source, model.caution, model.unknown.about,
                 *(parameter.about for parameter in model.parameters), *(value.source for value in model.published)):
        assert " ".join(text.split()) in words
    for heading in ("Source", "Equation", "Unknown", "Parameters", "Derivatives", "Solved points", "Published values",
                    "Dimensions"):
        assert f"\n{heading}" in captured.out


def test_keplers_equation_has_the_derivatives_of_the_textbooks(capsys):
    """dE/dM = 1/(1 - e*cos E), dE/de = sin E/(1 - e*cos E): common practice; the divisor is also that of
    Newton's step in Meeus, Astronomical Algorithms, chapter 30 (from memory)."""
    assert cli.main(["check", "kepler", "--json"]) == 0
    facts = json.loads(capsys.readouterr().out)
    assert facts["derivatives"]["g"] == {"g_E": "1 - e*cos(E)", "g_e": "-sin(E)", "g_M": "-1"}


def test_json_of_one_spec_is_its_page_and_of_several_a_list(tmp_path, capsys):
    assert cli.main(["check", "kepler", "--json"]) == 0
    alone = json.loads(capsys.readouterr().out)
    assert alone["name"] == "kepler" and alone["valid"] and alone["diagnostics"] == []
    assert [point["status"] for point in alone["points"]] == ["solved"]*5
    assert cli.main(["check", "kepler", write(tmp_path, equation="x^2 = b"), "--json"]) == 2
    both = json.loads(capsys.readouterr().out)["specs"]
    assert both[0] == alone
    assert not both[1]["valid"] and both[1]["diagnostics"][0]["line"] == 10


def test_an_error_names_its_place_on_stderr_and_the_other_specs_are_still_checked(tmp_path, capsys):
    bad = write(tmp_path, equation="x^2 = b")
    assert cli.main(["check", bad, "kepler"]) == 2
    captured = capsys.readouterr()
    assert captured.err.startswith(f"{bad}:10:") and "^" in captured.err
    assert "kepler\n" in captured.out


def test_a_warning_goes_to_stderr_and_leaves_the_status_at_0(tmp_path, capsys):
    path = Path(write(tmp_path))
    path.write_text(path.read_text().replace("[unknown]", "unused = { range = [0, 1] }\n[unknown]"))
    assert cli.main(["check", str(path)]) == 0
    captured = capsys.readouterr()
    assert "warning" in captured.err and "unused" in captured.err and captured.out.startswith("level\n")


@pytest.mark.parametrize("spec", ["no_such_spec", ".", "no/such/file.toml"])
def test_a_spec_that_is_not_there_exits_2_and_lists_the_shipped_ones(spec, capsys):
    assert cli.main(["check", spec]) == 2
    captured = capsys.readouterr()
    assert captured.out == "" and "kepler" in captured.err and "Traceback" not in captured.err


def test_the_page_finds_names_of_its_own_whatever_names_the_author_took(tmp_path, capsys):
    taken = ["g", "G", "residual", "P", "theta", "parameter", "g_x", "x_g"]
    path = Path(write(tmp_path, equation="x^2 = " + " + ".join(taken)))
    ranges = "".join(f"{name} = {{ range = [0.1, 0.2] }}\n" for name in taken)
    path.write_text(path.read_text().replace("a = { range = [0.5, 2.0] }\n", ranges))
    assert cli.main(["check", str(path)]) == 0
    page = capsys.readouterr().out
    assert "dx/dP__ = -g___P__/g___x for every parameter P__" in page and "g___x = 2*x" in page


def test_the_sample_of_points_reads_well_and_lies_in_the_operating_range(shipped):
    closure, module = shipped
    points = sample_points(closure)
    assert len(points) == 5
    for point in points:
        for value, (low, high) in zip(point.values(), closure.ranges):
            assert low <= value <= high
        assert not module.solve(list(point.values())).status & 1


def test_a_range_that_a_few_digits_cannot_resolve_is_sampled_inside():
    from rootwright.evidence.page import _rounded

    low, high = 1.0, math.nextafter(1.0, 2.0)
    assert _rounded(low, high, low) == low and _rounded(low, high, high) == high
    assert _rounded(5.0, 5.0, 5.0) == 5.0
    assert _rounded(-1.7e308, 1.7e308, 1.234567e308) == 1.23e308
