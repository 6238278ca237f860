"""`rootwright compile`: the files it writes, whole or not at all, and the same bytes wherever they are written."""

import getpass
import hashlib
import os
import re
import shutil
import socket
import subprocess
import sys
from pathlib import Path

import pytest

from rootwright import cli, pipeline
from rootwright.files import replacing


def test_the_c_target_writes_header_and_source_and_says_how_large_they_are(tmp_path, capsys):
    assert cli.main(["compile", "kepler", "--into", str(tmp_path/"new"/"folder")]) == 0
    files = {path.name: path.read_bytes() for path in (tmp_path/"new"/"folder").iterdir()}
    assert set(files) == {"kepler.h", "kepler.c"}
    said = capsys.readouterr().out.splitlines()
    assert said[:2] == [f"{tmp_path/'new'/'folder'/name}  {len(files[name]):,} bytes" for name in ("kepler.h", "kepler.c")]


def test_the_python_target_writes_one_file(tmp_path):
    assert cli.main(["compile", "kepler", "--into", str(tmp_path), "--target", "python"]) == 0
    assert [path.name for path in tmp_path.iterdir()] == ["kepler.py"]


def test_without_a_folder_the_current_one_is_written_to(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    assert cli.main(["compile", "kepler"]) == 0
    assert sorted(path.name for path in tmp_path.iterdir()) == ["kepler.c", "kepler.h"]


def test_several_specs_are_compiled_at_once_and_a_bad_one_does_not_stop_the_others(tmp_path, capsys):
    assert cli.main(["compile", "no_such_spec", "kepler", "wien_peak", "--into", str(tmp_path)]) == 2
    assert sorted(path.name for path in tmp_path.iterdir()) == ["kepler.c", "kepler.h", "wien_peak.c", "wien_peak.h"]
    assert "no_such_spec" in capsys.readouterr().err


def test_two_specs_of_one_name_do_not_overwrite_each_other(tmp_path, capsys):
    assert cli.main(["compile", "kepler", "kepler", "--into", str(tmp_path)]) == 2
    assert "kepler.h" in capsys.readouterr().err


@pytest.mark.parametrize("option, value, word", [("--precision", "half", "invalid choice: 'half'"),
                                                 ("--order", "3", "'3' is not 0, 1 or 2")])
def test_what_is_not_there_is_refused_in_words(option, value, word, tmp_path, capsys):
    assert cli.main(["compile", "kepler", option, value, "--into", str(tmp_path)]) == 2
    assert word in capsys.readouterr().err and not list(tmp_path.iterdir())


@pytest.mark.parametrize("target, file", [("c", "kepler.h"), ("python", "kepler.py")])
def test_a_module_has_the_derivatives_up_to_its_order_and_no_others(target, file, tmp_path):
    for order, first, second in (("0", False, False), ("1", True, False), ("2", True, True)):
        into = tmp_path/order
        assert cli.main(["compile", "kepler", "--order", order, "--target", target, "--into", str(into)]) == 0
        text = (into/file).read_text()
        for function in ("solve_jacobian", "jacobian", "tangent", "adjoint"):
            assert (re.search(rf"\b(kepler_)?{function}\(", text) is not None) == first, (order, function)
        for function in ("hessian", "tangent_adjoint"):
            assert (re.search(rf"\b(kepler_)?{function}\(", text) is not None) == second, (order, function)
        assert re.search(r"\b(kepler_)?solve\(", text) and f"--order {order}" in text


def test_a_folder_that_cannot_be_made_is_told_in_one_line(tmp_path, capsys):
    (tmp_path/"file").write_text("in the way")
    for folder in (tmp_path/"file", tmp_path/"file"/"below"):
        assert cli.main(["compile", "kepler", "--into", str(folder)]) == 2
        error = capsys.readouterr().err
        assert error.count("\n") == 1 and str(folder) in error and "--into" in error


def test_a_file_that_cannot_be_replaced_is_told_in_one_line_and_leaves_no_scraps(tmp_path, capsys):
    (tmp_path/"kepler.h").mkdir()
    assert cli.main(["compile", "kepler", "--into", str(tmp_path)]) == 2
    error = capsys.readouterr().err
    assert error.count("\n") == 1 and "kepler.h" in error
    assert [path.name for path in tmp_path.iterdir()] == ["kepler.h"]


def test_a_file_is_replaced_whole_or_not_at_all(tmp_path):
    path = tmp_path/"file"
    path.write_bytes(b"old")
    path.chmod(0o600)
    with pytest.raises(ZeroDivisionError), replacing(path) as stream:
        stream.write(b"half")
        1/0
    assert path.read_bytes() == b"old"
    with replacing(path) as stream:
        stream.write(b"new")
        assert path.read_bytes() == b"old"
    assert path.read_bytes() == b"new" and path.stat().st_mode & 0o777 == 0o600
    assert list(tmp_path.iterdir()) == [path]


def test_a_link_stays_a_link_when_its_file_is_replaced(tmp_path):
    (tmp_path/"file").write_bytes(b"old")
    (tmp_path/"link").symlink_to("file")
    with replacing(tmp_path/"link") as stream:
        stream.write(b"new")
    assert (tmp_path/"link").is_symlink() and (tmp_path/"file").read_bytes() == b"new"


# -- determinism

SAMPLE = ("pipe_friction", "if97_temperature", "platinum_thermometer", "normal_depth", "rachford_rice")


def compiled(folder, names, environment):
    """{file: SHA-256} of the specs compiled by a new process in `folder`."""
    folder.mkdir(parents=True)
    for target in ("c", "python"):
        subprocess.run([sys.executable, "-m", "rootwright", "compile", *names, "--target", target], cwd=folder,
                       check=True, capture_output=True, env=os.environ | environment)
    return {path.name: hashlib.sha256(path.read_bytes()).hexdigest() for path in folder.iterdir()}


def test_the_bytes_depend_neither_on_the_hash_seed_nor_on_folder_time_zone_or_language(tmp_path):
    first = compiled(tmp_path/"one", SAMPLE, {"PYTHONHASHSEED": "0"})
    assert len(first) == 3*len(SAMPLE)
    assert compiled(tmp_path/"another place"/"two", SAMPLE[::-1], {"PYTHONHASHSEED": "1", "TZ": "Asia/Tokyo"}) == first
    spoken = {"PYTHONHASHSEED": "4242", "LC_ALL": "C", "PYTHONIOENCODING": "ascii"}
    assert compiled(tmp_path/"three", SAMPLE, spoken) == first


def test_a_copy_of_a_spec_under_another_file_name_gives_the_same_bytes(tmp_path):
    data, _ = pipeline.find("kepler")
    (tmp_path/"renamed.toml").write_bytes(data)
    (tmp_path/"renamed.proof").write_text(pipeline.certificate("kepler"))
    for spec, folder in (("kepler", "a"), (str(tmp_path/"renamed.toml"), "b")):
        assert cli.main(["compile", spec, "--into", str(tmp_path/folder)]) == 0
    for name in ("kepler.h", "kepler.c"):
        assert (tmp_path/"a"/name).read_bytes() == (tmp_path/"b"/name).read_bytes()


@pytest.mark.parametrize("target", ["c", "python"])
@pytest.mark.parametrize("name", pipeline.shipped())
def test_emitted_text_holds_no_path_host_user_or_build_date(name, target):
    closure = pipeline.promising(name)
    for text in pipeline.emit(closure, target).values():
        assert not re.search(r"(?<![\w.*+)])/(home|root|tmp|usr|var|opt|work|Users)\b", text)
        assert not re.search(r"\b20\d\d-\d\d-\d\d\b|\b\d\d:\d\d:\d\d\b|__DATE__|__TIME__", text)
        for word in (socket.gethostname(), os.getcwd(), str(Path.home())):
            assert len(word) < 6 or word not in text
        assert not re.search(rf"\b{re.escape(getpass.getuser())}\b", text) or getpass.getuser() in ("root", "user")


@pytest.mark.parametrize("target", ["c", "python"])
def test_compiling_twice_in_one_process_gives_the_same_bytes(target):
    texts = [pipeline.emit(pipeline.promising("oblique_shock"), target) for _ in range(2)]
    assert texts[0] == texts[1]


# -- standing alone


def test_emitted_python_runs_isolated_from_every_package(tmp_path):
    """Friction factor at Re = 1e5, rel = 1e-4: fluids (Python library), documented example of Colebrook(1E5, 1E-4)."""
    assert cli.main(["compile", "pipe_friction", "--target", "python", "--into", str(tmp_path)]) == 0
    script = (f"import sys; sys.path.insert(0, {str(tmp_path)!r}); import pipe_friction as m; "
              "r, jac = m.solve_jacobian([1e5, 1e-4]); print(r.status, repr(r.y[1]), len(jac), 'numpy' in sys.modules)")
    isolated = [sys.executable, "-I", "-S", "-W", "error", "-c", script]
    done = subprocess.run(isolated, capture_output=True, text=True, check=True)
    status, factor, rows, numpy = done.stdout.split()
    assert (status, rows, numpy) == ("0", "2", "False")
    assert abs(float(factor) - 0.018513866077471648) < 4e-17


MAIN = r"""
#include <math.h>
#include <stdio.h>
#include "pipe_friction.h"

int main(void)
{
    const double p[2] = { 1e5, 1e-4 };
    pipe_friction_point r;
    pipe_friction_solve(p, NAN, &r);
    printf("%d %.17g\n", r.status, r.y[1]);
    return 0;
}
"""


@pytest.mark.skipif(shutil.which("cc") is None, reason="needs a C compiler")
def test_emitted_c_compiles_by_the_command_in_a_folder_of_its_own(tmp_path):
    assert cli.main(["compile", "pipe_friction", "--into", str(tmp_path)]) == 0
    (tmp_path/"main.c").write_text(MAIN)
    subprocess.run(["cc", "-std=c99", "-Wall", "-Werror", "-o", "main", "main.c", "pipe_friction.c", "-lm"],
                   cwd=tmp_path, check=True)
    status, factor = subprocess.run([str(tmp_path/"main")], capture_output=True, text=True, check=True).stdout.split()
    assert status == "0" and abs(float(factor) - 0.018513866077471648) < 4e-17
