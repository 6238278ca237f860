"""Following a page like a user: its fenced blocks taken out, its commands run in a folder of their own, what they print
compared with what the page shows."""

import os
import re
import shlex
import subprocess
import sys

import pytest


def blocks(page, language):
    """The fenced blocks of a language, in order."""
    return re.findall(rf"^```{re.escape(language)}\n(.*?)^```$", page, flags=re.M | re.S)


def block(page, language, mark):
    """The one block of a language that holds a mark."""
    (found,) = [text for text in blocks(page, language) if mark in text]
    return found


@pytest.fixture
def place(tmp_path):
    """(folder, environment) of a user: an empty folder, and the command and Python on the path."""
    tools = tmp_path / "tools"
    tools.mkdir()
    for name, words in (("rootwright", "-m rootwright "), ("python", "")):
        (tools / name).write_text(f'#!/bin/sh\nexec {shlex.quote(sys.executable)} {words}"$@"\n')
        (tools / name).chmod(0o755)
    folder = tmp_path / "place"
    folder.mkdir()
    return folder, os.environ | {"PATH": f"{tools}{os.pathsep}{os.environ['PATH']}",
                                 "ROOTWRIGHT_CACHE": str(tmp_path / "cache")}


def said(command, place):
    """What a command prints on a terminal, standard output and error together."""
    return ran(command, place).stdout


def ran(command, place):
    folder, environment = place
    return subprocess.run(["bash", "-c", command], cwd=folder, env=environment, stdout=subprocess.PIPE,
                          stderr=subprocess.STDOUT, text=True, check=False, timeout=60)


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
    """Run the commands of console blocks: each prints what is shown; where nothing is shown it succeeds."""
    for command, shown in (pair for text in texts for pair in commands(text)):
        done = ran(command, place)
        assert alike(shown, done.stdout) if shown else done.returncode == 0, f"$ {command}\n{done.stdout}"
