"""The README as a user would follow it: its spec, its programs and its commands give what it shows."""

import os
import re
import shlex
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

README = (Path(__file__).parent.parent / "README.md").read_text(encoding="utf-8")
COMPILERS = pytest.mark.skipif(not all(map(shutil.which, ("cc", "c++"))), reason="needs a C and a C++ compiler")


def blocks(language):
    """The fenced blocks of a language, in order."""
    return re.findall(rf"^```{re.escape(language)}\n(.*?)^```$", README, flags=re.M | re.S)


def block(language, mark):
    """The one block of a language that holds a mark."""
    (found,) = [text for text in blocks(language) if mark in text]
    return found


@pytest.fixture
def place(tmp_path):
    """(folder, environment) of a user: an empty folder, and the command on the path."""
    tools = tmp_path / "tools"
    tools.mkdir()
    (tools / "rootwright").write_text(f'#!/bin/sh\nexec {shlex.quote(sys.executable)} -m rootwright "$@"\n')
    (tools / "rootwright").chmod(0o755)
    folder = tmp_path / "place"
    folder.mkdir()
    return folder, os.environ | {"PATH": f"{tools}{os.pathsep}{os.environ['PATH']}",
                                 "ROOTWRIGHT_CACHE": str(tmp_path / "cache")}


def said(command, place):
    """What a command prints on a terminal, standard output and error together."""
    folder, environment = place
    done = subprocess.run(["bash", "-c", command], cwd=folder, env=environment, stdout=subprocess.PIPE,
                          stderr=subprocess.STDOUT, text=True, check=False, timeout=60)
    return done.stdout


def alike(shown, printed):
    """Whether a text was printed as shown: `...` stands for anything, and the size of a file is not compared."""
    shown, printed = (re.sub(r"[\d,]+ bytes", "N bytes", "\n".join(map(str.rstrip, text.strip("\n").split("\n"))))
                      for text in (shown, printed))
    return re.fullmatch(".*".join(map(re.escape, re.split(r"\s*\.\.\.\s*", shown))), printed, flags=re.S)


def commands(text):
    """(command, output shown below it) of the lines of a console block; a remark after a command is cut off."""
    for entry in re.split(r"^\$ ", text, flags=re.M)[1:]:
        line, _, shown = entry.partition("\n")
        yield line.split("  #")[0].strip(), shown


def follow(place, texts):
    for command, shown in (pair for text in texts for pair in commands(text)):
        printed = said(command, place)
        assert not shown or alike(shown, printed), f"$ {command}\n{printed}"


@COMPILERS
def test_every_command_shown_prints_what_is_shown(place):
    (place[0] / "main.c").write_text(block("c", "int main(void)"))
    assert len(blocks("console")) >= 4
    follow(place, blocks("console"))


@COMPILERS
def test_the_spec_shown_makes_the_module_that_is_shown(place):
    folder, _ = place
    (folder / "pipe_friction.toml").write_text(block("toml", 'name    = "pipe_friction"'))
    (folder / "main.c").write_text(block("c", "int main(void)"))
    assert said("rootwright compile ./pipe_friction.toml --into vendor", place).count("bytes") == 2
    header = " ".join((folder / "vendor" / "pipe_friction.h").read_text().split())
    for line in block("c", "typedef struct").splitlines():
        assert " ".join(line.split()) in header, line
    follow(place, [block("console", "main.c vendor/pipe_friction.c")])


def test_the_python_lines_shown_give_what_is_shown(place):
    folder, environment = place
    (command,) = re.findall(r"`(rootwright compile pipe_friction --target python[^`]*)`", README)
    assert "pipe_friction.py" in said(f"{command} && mv vendor/* .", place)
    (folder / "lines.txt").write_text("\n".join(blocks("pycon")))
    done = subprocess.run([sys.executable, "-m", "doctest", "-o", "ELLIPSIS", "-o", "NORMALIZE_WHITESPACE", "lines.txt"],
                          cwd=folder, env=environment, capture_output=True, text=True, check=False)
    assert blocks("pycon") and done.returncode == 0, done.stdout + done.stderr


@pytest.mark.skipif(not all(map(shutil.which, ("cmake", "make", "cc"))), reason="cmake is not installed")
def test_the_cmake_lines_shown_build_the_program_shown(place):
    folder, _ = place
    (folder / "main.c").write_text(block("c", "int main(void)"))
    (folder / "CMakeLists.txt").write_text(block("cmake", "add_library"))
    (_, shown), = commands(block("console", "main.c vendor/pipe_friction.c"))
    built = said("rootwright compile pipe_friction --into vendor && cmake -S . -B build && cmake --build build", place)
    printed = said("./build/main", place)
    assert alike(shown, printed), built + printed
