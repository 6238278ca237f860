"""The plan of the house: rooms import only what lies before them, no two modules import each other, and heavy libraries
wait until they are used."""

import ast
import subprocess
import sys
from pathlib import Path

import pytest

COMPILER = Path(__file__).parent.parent/"compiler"
RUNTIME = COMPILER.parent/"runtime"

ORDER = ("runtime", "version", "files", "operations", "spec", "calculus", "proof", "plan", "emit", "binding", "evidence",
         "pipeline", "demo", "cli", "__main__", "rootwright")
HEAVY = {"numpy", "sympy", "flint", "mpmath", "pint", "cffi", "jinja2", "scipy"}


def modules():
    """{dotted name: path} of every module of the package."""
    found = {}
    for prefix, root in (("rootwright", COMPILER), ("rootwright.runtime", RUNTIME)):
        for path in sorted(root.rglob("*.py")):
            parts = path.relative_to(root).with_suffix("").parts
            found[".".join([prefix, *(part for part in parts if part != "__init__")])] = path
    return found


MODULES = modules()


def imports(name):
    """Dotted names that a module imports, at its top or inside a function."""
    found = set()
    for node in ast.walk(ast.parse(MODULES[name].read_text("utf-8"))):
        if isinstance(node, ast.Import):
            found |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{name} has a relative import"
            inner = [f"{node.module}.{alias.name}" for alias in node.names]
            found |= {full if full in MODULES else node.module for full in inner}
    return found


def room(name):
    parts = name.split(".")
    return parts[1] if len(parts) > 1 else parts[0]


def test_every_room_has_its_place_in_the_order():
    assert {room(name) for name in MODULES} <= set(ORDER)


@pytest.mark.parametrize("name", sorted(MODULES))
def test_no_module_imports_from_a_later_room(name):
    later = ORDER[ORDER.index(room(name)) + 1:]
    assert not [other for other in imports(name) if other in MODULES and room(other) in later]


def test_no_two_modules_import_each_other():
    edges = {name: [other for other in imports(name) if other in MODULES] for name in MODULES}
    settled = set()
    while ready := [name for name in edges if name not in settled and all(other in settled for other in edges[name])]:
        settled |= set(ready)
    assert settled == set(MODULES), f"import cycle among {sorted(set(MODULES) - settled)}"


def test_spec_reader_runtime_and_emitters_use_no_numeric_library():
    for name in MODULES:
        known = {other.split(".")[0] for other in imports(name)}
        if room(name) in ("version", "files", "operations", "spec"):
            assert not known & (HEAVY - {"pint"}), name
        if room(name) in ("runtime", "emit"):
            assert not known & (HEAVY - {"jinja2"}), name


def loaded_by(statement):
    """Names of the packages that a new process has loaded after a statement."""
    script = f"import sys, rootwright.cli; {statement}; print('LOADED', *sys.modules)"
    done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True)
    return {name.partition(".")[0] for name in done.stdout.rpartition("LOADED ")[2].split()}


def test_the_command_line_imports_no_heavy_library_before_a_command_runs():
    loaded = loaded_by("rootwright.cli._parser()")
    assert "rootwright" in loaded
    assert not loaded & HEAVY


def test_checking_a_spec_imports_neither_arrays_nor_an_algebra_system():
    loaded = loaded_by("rootwright.cli.main(['check', 'kepler'])")
    assert "flint" in loaded
    assert not loaded & {"numpy", "sympy", "scipy", "cffi", "pint"}
