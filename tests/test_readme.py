"""The README as a user would follow it: its spec, its programs and its commands give what it shows."""

import re
import shutil
import subprocess
import sys
from pathlib import Path

import pytest
from walkthrough import alike, block, blocks, commands, follow, place, said  # noqa: F401

README = (Path(__file__).parent.parent / "README.md").read_text(encoding="utf-8")
COMPILERS = pytest.mark.skipif(not all(map(shutil.which, ("cc", "c++"))), reason="needs a C and a C++ compiler")
MAIN = block(README, "c", "int main(void)")


@COMPILERS
def test_every_command_shown_prints_what_is_shown(place):  # noqa: F811
    (place[0] / "main.c").write_text(MAIN)
    assert len(blocks(README, "console")) >= 4
    follow(place, blocks(README, "console"))


@COMPILERS
def test_the_spec_shown_makes_the_module_that_is_shown(place):  # noqa: F811
    folder, _ = place
    (folder / "pipe_friction.toml").write_text(block(README, "toml", 'name    = "pipe_friction"'))
    (folder / "main.c").write_text(MAIN)
    assert said("rootwright compile ./pipe_friction.toml --into vendor", place).count("bytes") == 2
    header = " ".join((folder / "vendor" / "pipe_friction.h").read_text().split())
    for line in block(README, "c", "typedef struct").splitlines():
        assert " ".join(line.split()) in header, line
    follow(place, [block(README, "console", "main.c vendor/pipe_friction.c")])


def test_the_python_lines_shown_give_what_is_shown(place):  # noqa: F811
    folder, environment = place
    (command,) = re.findall(r"`(rootwright compile pipe_friction --target python[^`]*)`", README)
    assert "pipe_friction.py" in said(f"{command} && mv vendor/* .", place)
    (folder / "lines.txt").write_text("\n".join(blocks(README, "pycon")))
    done = subprocess.run([sys.executable, "-m", "doctest", "-o", "ELLIPSIS", "-o", "NORMALIZE_WHITESPACE", "lines.txt"],
                          cwd=folder, env=environment, capture_output=True, text=True, check=False)
    assert blocks(README, "pycon") and done.returncode == 0, done.stdout + done.stderr


@pytest.mark.skipif(not all(map(shutil.which, ("cmake", "make", "cc"))), reason="cmake is not installed")
def test_the_cmake_lines_shown_build_the_program_shown(place):  # noqa: F811
    folder, _ = place
    (folder / "main.c").write_text(MAIN)
    (folder / "CMakeLists.txt").write_text(block(README, "cmake", "add_library"))
    (_, shown), = commands(block(README, "console", "main.c vendor/pipe_friction.c"))
    built = said("rootwright compile pipe_friction --into vendor && cmake -S . -B build && cmake --build build", place)
    printed = said("./build/main", place)
    assert alike(shown, printed), built + printed
