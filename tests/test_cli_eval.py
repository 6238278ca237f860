"""`rootwright eval`: every row of the input comes out, with a status; what passes through is untouched."""

import csv
import io
import math
import subprocess
import sys
import tracemalloc

import pytest

from rootwright import cli, pipeline
from rootwright.binding.module import load
from rootwright.evidence.evaluate import CHUNK, columns, evaluate, word


@pytest.fixture
def run(tmp_path, capsys):
    """Run eval on a CSV text: (exit status, lines of the output or None where no file appeared, stderr)."""
    def run(text, spec="pipe_friction", *options, target="python"):
        source, sink = tmp_path/"in.csv", tmp_path/"out.csv"
        source.write_bytes(text if isinstance(text, bytes) else text.encode())
        sink.unlink(missing_ok=True)
        files = ["--points", str(source), "--out", str(sink)]
        status = cli.main(["eval", spec, *files, "--target", target, *options])
        captured = capsys.readouterr()
        assert captured.out == "" and "Traceback" not in captured.err
        assert sorted(path.name for path in tmp_path.glob("*") if path.name.startswith(".rootwright")) == []
        return status, sink.read_bytes().decode() if sink.exists() else None, captured.err
    return run


def table(text):
    return list(csv.DictReader(io.StringIO(text, newline="")))


# Friction factor at Re = 1e5, rel = 1e-4: fluids (Python library), documented example of Colebrook(1E5, 1E-4).
FACTOR = 0.018513866077471648
HEADER = "Re,rel,y,f,status,iterations,error_bound,dy/dRe,dy/drel,df/dRe,df/drel"


@pytest.mark.parametrize("target", ["c", "python"])
def test_a_published_point_comes_out_with_root_output_and_derivatives(run, target):
    status, text, error = run("Re,rel\n1e5,1e-4\n", target=target)
    assert status == 0 and error == "1 row: 1 solved\n"
    (row,) = table(text)
    assert ",".join(row) == HEADER
    assert abs(float(row["f"]) - FACTOR) < 4e-17 and row["status"] == "solved"
    assert float(row["y"]) == pytest.approx(FACTOR**-0.5, rel=1e-15)
    assert int(row["iterations"]) > 0 and 0 < float(row["error_bound"]) < 1e-13


def test_order_0_leaves_the_derivatives_out(run):
    _, text, _ = run("Re,rel\n1e5,1e-4\n", "pipe_friction", "--order", "0")
    assert text.splitlines()[0] == "Re,rel,y,f,status,iterations,error_bound"


@pytest.mark.parametrize("target", ["c", "python"])
def test_order_2_adds_the_columns_of_second_derivatives(target, run):
    _, text, _ = run("Re,rel\n1e5,1e-4\nx,0\n", "pipe_friction", "--order", "2", target=target)
    row, bad = table(text)
    assert list(row)[9:] == ["df/dRe", "df/drel", "d2y/dRe/dRe", "d2y/dRe/drel", "d2y/drel/drel", "d2f/dRe/dRe",
                             "d2f/dRe/drel", "d2f/drel/drel"]
    steps = {"Re": (1e2, 0.0), "rel": (0.0, 1e-7)}
    for p, q in (("Re", "Re"), ("Re", "rel"), ("rel", "rel")):      # against differences of the first derivatives
        points = "".join(f"{1e5 + side*steps[q][0]!r},{1e-4 + side*steps[q][1]!r}\n" for side in (1, -1))
        _, near, _ = run(f"Re,rel\n{points}", "pipe_friction", target=target)
        above, below = table(near)
        difference = (float(above[f"df/d{p}"]) - float(below[f"df/d{p}"]))/(2*sum(steps[q]))
        assert float(row[f"d2f/d{p}/d{q}"]) == pytest.approx(difference, rel=1e-4)
    assert bad["status"] == "bad_input" and not any(bad[name] for name in row if name.startswith("d"))


def test_second_derivatives_come_for_pairs_of_differentiated_parameters_in_their_order():
    model, _ = pipeline.model(*pipeline.find("orifice_flow"))
    first, second = columns(model, 1), columns(model, 2)
    assert second[:len(first)] == first and len(second) == len(first) + 3*28
    assert second[len(first):][:3] == ["d2C/dD/dD", "d2C/dD/dd", "d2C/dD/dp1"] and second[-1] == "d2Re_D/dkappa/dkappa"


def test_derivatives_are_named_by_result_then_differentiated_parameter():
    model, _ = pipeline.model(*pipeline.find("orifice_flow"))
    named = columns(model, 1)
    assert named[:6] == ["C", "m", "Re_D", "status", "iterations", "error_bound"]
    assert named[6] == "dC/dD" and "dRe_D/dkappa" in named
    assert not any(name.endswith(("/dL1", "/dL2")) for name in named)       # parameters with differentiate = false


def test_columns_may_stand_in_any_order_and_others_pass_through_untouched(run):
    status, text, _ = run('note,rel, Re \n"a, ""b""",1.0E-04,+1e5\n  x ,0.0001, 100000. \n')
    assert status == 0
    header, first, second = text.splitlines()
    assert header.startswith("note,rel, Re ,y,f,")
    assert first.startswith('"a, ""b""",1.0E-04,+1e5,') and second.startswith("  x ,0.0001, 100000. ,")
    assert first.split(",")[5:] == second.split(",")[4:]


def test_numbers_round_trip(run):
    closure, _ = pipeline.closure(*pipeline.find("kepler"))
    module = load(closure, pipeline.emit(closure, "python"), "python")
    _, text, _ = run("e,M\n0.1,0.3\n0.99,1e-9\n", "kepler")
    for row in table(text):
        point, jacobian = module.solve_jacobian([float(row["e"]), float(row["M"])])
        assert [float(row[name]) for name in module.results] == point.y
        assert float(row["error_bound"]) == point.error_bound
        assert [float(row[f"dE/d{name}"]) for name in module.parameters] == jacobian[0]


def test_an_unsolved_row_keeps_its_inputs_and_has_empty_numbers_and_a_status(run):
    status, text, error = run("id,Re,rel\na,1,0.0\nb,1e5,0\n")      # at Re = 1 the root lies above the bracket
    assert status == 1 and error == "2 rows: 1 solved, 1 no_sign_change\n"
    assert text.splitlines()[1] == "a,1,0.0,,,no_sign_change,,,,,,"


def test_caveats_are_joined_and_leave_the_exit_status_at_0(run):
    status, text, _ = run("R0,Rt\n100,100\n1e4,1e4\n", "platinum_thermometer")
    assert status == 0
    assert [row["status"] for row in table(text)] == ["kink", "outside_range+kink"]
    assert word(7) == "outside_range+flat+kink" and word(0) == "solved" and word(-5) == "jump"


@pytest.mark.parametrize("cell", [
    "", "abc", "1_000", "1,5", "0x10", "1e", "--1", "1 2", "\u0661", "\uff11", "1e5\0", "1d5", "='1'"])
def test_a_cell_that_is_no_number_gives_bad_input(run, cell):
    quoted = '"' + cell + '"'
    status, text, error = run(f"Re,rel\n{quoted},1e-4\n1e5,1e-4\n")
    assert status == 1 and error == "2 rows: 1 solved, 1 bad_input\n"
    bad, good = table(text)
    assert bad["Re"] == cell and bad["status"] == "bad_input" and bad["y"] == bad["iterations"] == bad["dy/dRe"] == ""
    assert good["status"] == "solved"


@pytest.mark.parametrize("cell", ["nan", "inf", "-Infinity", " NaN ", "1e999"])
def test_a_number_that_is_not_finite_is_solved_as_not_finite(run, cell):
    status, text, _ = run(f"Re,rel\n{cell},1e-4\n")
    (row,) = table(text)
    assert status == 1 and row["Re"] == cell and row["status"] == "not_finite"


@pytest.mark.parametrize("cell", ["1e5", "100000", " 1.0e+5\t", "+100000.", "1E5", "000100000.000"])
def test_the_spellings_of_a_number_mean_the_same(run, cell):
    _, text, _ = run(f"Re,rel\n{cell},1e-4\n")
    (row,) = table(text)
    assert abs(float(row["f"]) - FACTOR) < 4e-17 and row["Re"] == cell


def test_ragged_rows_come_out_rectangular_with_all_their_cells(run):
    status, text, error = run("Re,rel\n1e5\n1e5,1e-4,surplus,more\n1e5,1e-4\n")
    assert status == 1 and error == "3 rows: 1 solved, 2 bad_input\n"
    rows = list(csv.reader(io.StringIO(text)))
    assert {len(row) for row in rows} == {len(rows[0])}
    assert rows[1][:2] == ["1e5", ""] and rows[2][:2] == ["1e5", "1e-4,surplus,more"]


def test_empty_lines_are_no_rows_and_a_line_of_blanks_is_bad_input(run):
    status, text, error = run("\n\nRe,rel\n\n1e5,1e-4\n\n   \n\n")
    assert status == 1 and error == "2 rows: 1 solved, 1 bad_input\n"


def test_header_only_gives_a_header_and_exit_status_0(run):
    for text in ("Re,rel", "Re,rel\n"):
        status, out, error = run(text)
        assert status == 0 and error == "0 rows\n" and out == HEADER + "\n"


def test_a_byte_order_mark_is_taken_off_and_line_ends_stay_as_they_were(run):
    status, text, _ = run(b"\xef\xbb\xbfRe,rel\r\n1e5,1e-4\r\n")
    assert status == 0 and text.startswith("Re,rel,y,")
    assert text.count("\r\n") == text.count("\n") == 2


def test_old_line_ends_and_quoted_line_breaks_are_read(run):
    status, text, _ = run('note,Re,rel\r"two\nlines",1e5,1e-4\r')
    assert status == 0 and table(text)[0]["note"] == "two\nlines"


@pytest.mark.parametrize("text, words", [
    ("", "the table is empty"),
    ("\n\n", "the table is empty"),
    ("Re\n1e5\n", "no column is called `rel`"),
    ("Re,Rel\n1e5,1e-4\n", "it has `Rel`"),
    ("Re;rel\n1e5;1e-4\n", "separated by commas"),
    ("Re,rel,Re\n1,2,3\n", "2 columns are called `Re`"),
    ("Re,rel,y\n1,2,3\n", "a column is called `y`"),
    ("Re,rel, status\n1,2,3\n", "a column is called `status`"),
    ("Re,rel,dy/dRe\n1,2,3\n", "a column is called `dy/dRe`"),
    (b"Re,rel\n1e5,\xff\n", "not UTF-8"),
    ("Re,rel\n1e5,1e-4\n".encode("utf-16"), "not UTF-8"),
    ('Re,rel\n1e5,"1e-4\n1e5,1e-4\n', "never closed"),
    ("Re,rel\n1e5," + "1"*200_000 + "\n", "longer than 131,072 characters"),
])
def test_a_table_that_cannot_be_read_is_refused_in_one_line_and_writes_no_file(run, text, words):
    status, out, error = run(text)
    assert status == 2 and out is None
    assert error.count("\n") == 1 and words in error and "in.csv" in error


def test_a_column_named_like_a_derivative_passes_through_where_none_are_asked_for(run):
    status, text, _ = run("Re,rel,dy/dRe\n1e5,1e-4,x\n", "pipe_friction", "--order", "0")
    assert status == 0 and table(text)[0]["dy/dRe"] == "x"


def test_input_and_output_may_be_the_same_file(tmp_path):
    path = tmp_path/"points.csv"
    path.write_text("Re,rel\n1e5,1e-4\n")
    assert cli.main(["eval", "pipe_friction", "--points", str(path), "--out", str(path), "--target", "python"]) == 0
    assert table(path.read_text())[0]["status"] == "solved"


def test_a_dash_means_the_standard_streams():
    command = [sys.executable, "-m", "rootwright", "eval", "pipe_friction", "--points", "-", "--out", "-"]
    done = subprocess.run([*command, "--target", "python"], input=b"Re,rel\r\n1e5,1e-4\r\n", capture_output=True,
                          check=False)
    assert done.returncode == 0 and done.stderr == b"1 row: 1 solved\n"
    assert done.stdout.startswith(b"Re,rel,y,f,") and done.stdout.count(b"\r\n") == 2


@pytest.mark.parametrize("points, out, named", [("missing.csv", "out.csv", "missing.csv"), (".", "out.csv", "."),
                                                ("in.csv", "no/such/folder/out.csv", "out.csv"), ("in.csv", ".", "")])
def test_files_that_cannot_be_opened_are_told_in_one_line(points, out, named, tmp_path, monkeypatch, capsys):
    monkeypatch.chdir(tmp_path)
    (tmp_path/"in.csv").write_text("Re,rel\n1e5,1e-4\n")
    assert cli.main(["eval", "pipe_friction", "--points", points, "--out", out, "--target", "python"]) == 2
    error = capsys.readouterr().err
    assert error.count("\n") == 1 and named in error
    assert [path.name for path in tmp_path.iterdir()] == ["in.csv"]


def test_without_a_c_compiler_the_python_target_takes_over_and_says_so(run, monkeypatch):
    monkeypatch.setenv("PATH", "")
    monkeypatch.delenv("CC", raising=False)
    status, text, error = run("Re,rel\n1e5,1e-4\n", target="c")
    assert status == 0 and "no C compiler" in error and "Python" in error
    assert abs(float(table(text)[0]["f"]) - FACTOR) < 4e-17


def test_a_c_compiler_that_fails_is_told_in_one_line(run, monkeypatch):
    monkeypatch.setenv("CC", "false")
    status, text, error = run("Re,rel\n1e5,1e-4\n", target="c")
    assert status == 2 and text is None and error.count("\n") == 1 and "C compiler refused" in error


# -- many rows

ROWS = 3*CHUNK + 7


@pytest.fixture(scope="module")
def kepler():
    closure, _ = pipeline.closure(*pipeline.find("kepler"))
    try:
        return closure.model, load(closure, pipeline.emit(closure, "c"), "c")
    except RuntimeError:
        pytest.skip("needs a C compiler")


def many(rows):
    """A CSV of so many anomalies, one byte stream."""
    yield b"k,e,M\n"
    for k in range(rows):
        yield b"%d,%.17g,%.17g\n" % (k, 0.9*k/rows, 3.0*math.sin(k)**2)


class Trickle(io.RawIOBase):
    """A stream that makes its bytes as they are read."""

    def __init__(self, pieces):
        self.pieces, self.rest, self.made = pieces, b"", 0

    def readable(self):
        return True

    def readinto(self, buffer):
        while len(self.rest) < len(buffer) and (piece := next(self.pieces, None)) is not None:
            self.rest += piece
            self.made += 1
        taken = self.rest[:len(buffer)]
        buffer[:len(taken)] = taken
        self.rest = self.rest[len(taken):]
        return len(taken)


def test_every_row_comes_out_once_and_in_order_whatever_the_chunks(kepler):
    sink = io.StringIO()
    counts = evaluate(*kepler, io.BufferedReader(Trickle(many(ROWS))), sink)
    rows = table(sink.getvalue())
    assert sum(counts.values()) == ROWS and [int(row["k"]) for row in rows] == list(range(ROWS))
    for k in (0, CHUNK - 1, CHUNK, ROWS - 1):
        alone = kepler[1].solve([float(rows[k]["e"]), float(rows[k]["M"])])
        assert float(rows[k]["E"]) == alone.y[0]


def test_rows_are_passed_on_while_the_input_is_still_being_read(kepler):
    source = Trickle(many(ROWS))
    made = []

    class Sink(io.StringIO):
        def flush(self):
            made.append(source.made)

    evaluate(*kepler, io.BufferedReader(source), Sink())
    assert len(made) == 5 and made[1] < 2*CHUNK < ROWS


def test_memory_does_not_grow_with_the_number_of_rows(kepler, monkeypatch):
    monkeypatch.setattr("rootwright.evidence.evaluate.CHUNK", 300)

    class Nowhere(io.StringIO):
        def write(self, text):
            return len(text)

    def peak(rows):
        tracemalloc.start()
        evaluate(*kepler, io.BufferedReader(Trickle(many(rows))), Nowhere(), order=0)
        _, most = tracemalloc.get_traced_memory()
        tracemalloc.stop()
        return most

    peak(10)
    assert peak(6*300) < 1.5*peak(2*300)
