"""Build the compiled rows: shared libraries around the very source that a module ships."""

import re
import shutil
import subprocess
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, replace
from importlib import resources
from pathlib import Path

import cffi

from rootwright.binding.build import FLAGS, BuildFailed, find_compiler
from rootwright.emit.assemble import assemble
from rootwright.emit.c import kernel
from rootwright.plan.plan import PLAIN

CXX_FLAGS = ("-std=c++17", *(flag for flag in FLAGS if not flag.startswith("-std=")), "-w")
PASSIVE = "rounding|outside|kink"        # kernels that only decide: no derivative passes through them
ROWS = {                                 # library: (source, header of its number, rows)
    "module": ("rows.c", None, ("solve", "jacobian", "one_sided", "central")),
    "plain": ("limit.c", None, ("solve", "jacobian", "limit", "kernels")),
    "byhand": ("byhand.c", None, ("brent", "newton")),
    "tape": ("through.cpp", "tape_number.hpp", ("loop", "loop_forward", "textbook", "last_step")),
    "dual": ("through.cpp", "dual_number.hpp", ("loop", "textbook")),
    "adolc": ("through.cpp", "adolc_number.hpp", ("loop", "textbook")),
}
_SHAPE = """(size_t n, const double *p, const double *start, int dependent,
             double *y, double *jac, int *failed, long *count);"""


@dataclass(frozen=True)
class Built:
    """Paths of the libraries, {library: path}, and why others are missing, {library: reason}."""
    paths: dict[str, str]
    missing: dict[str, str]


def build(closure, plan, folder):
    """Built libraries of a Closure in a folder. `plan` is that of the module; the loops that are differentiated are the
    plain solver's. Raises NoCompiler, and BuildFailed where the module itself fails."""
    folder = Path(folder)
    name = closure.model.name
    for file, way in (("planned", plan), ("passive", PLAIN)):
        whole = _whole(assemble(closure, "c", way), name)
        (folder/f"{file}.c").write_text(whole, "utf-8")
        whole = whole.replace('extern "C" {', 'extern "C++" {')
        (folder/f"{file}.inc").write_text(re.sub(rf"\b{name.upper()}_H\b", f"{file.upper()}_H", whole), "utf-8")
    (folder/"recorded.inc").write_text(_recorded(whole, name), "utf-8")
    (folder/"limit.inc").write_text(_limit(closure), "utf-8")
    compilers = {"c": find_compiler(), "cpp": shutil.which("c++") or shutil.which("g++") or shutil.which("clang++")}

    def make(library):
        source, number, _ = ROWS[library]
        return library, *_compile(closure, folder, library, source, number, compilers[source.rpartition(".")[2]])

    with ThreadPoolExecutor(2) as pool:
        made = list(pool.map(make, ROWS))
    built = Built({library: path for library, path, _ in made if path},
                  {library: why for library, path, why in made if not path})
    for library in ("module", "plain", "byhand"):
        if library in built.missing:
            raise BuildFailed(built.missing[library])
    return built


def _whole(files, name):
    """Header and source of a module in one."""
    return files[f"{name}.c"].replace(f'#include "{name}.h"', files[f"{name}.h"])


def _limit(closure):
    """The residual, its slope and the jacobian in one function, which shares what they have in common, as the printer of
    the module spells it: NAME_limit(p, x, results)."""
    together = replace(closure, kernels=closure.kernels | {"jacobian": ("g", "slope", *closure.kernels["jacobian"])})
    text = kernel(together, "jacobian", ["Residual, slope, jacobian."])
    return text.replace(f"{closure.model.name}_partials", f"{closure.model.name}_limit")


def _recorded(whole, name):
    """The module's text for a number that carries derivatives: under its own include guard, without the kernels that
    are left to the doubles."""
    text = re.sub(rf"\b{name.upper()}_H\b", f"{name.upper()}_RECORDED_H", whole)
    return re.sub(rf"^(static \w+ {name}_(?:{PASSIVE}))\(", r"\1_recorded(", text, flags=re.M)


def _compile(closure, folder, library, source, number, compiler):
    """(path, "") or (None, why not)."""
    if compiler is None:
        return None, "no C++ compiler installed"
    model = closure.model
    if library == "adolc" and not _has_header(compiler, "adolc/adolc.h"):
        return None, "not installed"
    here, runtime = (str(resources.files(package)) for package in ("rootwright.evidence.bench", "rootwright.runtime"))
    words = {
        "NAME": model.name, "N": len(model.parameters), "M": len(model.results), "SOURCE": '"planned.c"' if library == "module" else '"passive.c"', "PLANNED": '"planned.inc"',
        "PASSIVE": '"passive.inc"', "RECORDED": '"recorded.inc"', "OPEN_LOWER": int(model.unknown.open_lower),
        "OPEN_UPPER": int(model.unknown.open_upper), "START": int("start" in closure.kernels),
        "SWITCHES": int("kink" in closure.kernels), "NUMBER": f'"{number}"'}
    output = folder/f"{library}.so"
    command = [compiler, *(FLAGS if number is None else CXX_FLAGS), f"-I{folder}", f"-I{here}", f"-I{runtime}",
               *(f"-DRW_{word}={value}" for word, value in words.items()), f"{here}/{source}", "-o", str(output),
               *(["-ladolc"] if library == "adolc" else []), "-lm"]
    done = subprocess.run(command, cwd=folder, capture_output=True, text=True, errors="replace", check=False)
    if done.returncode:
        first = next((line for line in done.stderr.splitlines() if "error" in line), done.stderr.strip()[:200])
        return None, f"does not build: {first.rpartition('error: ')[2] or first}"
    return str(output), ""


def _has_header(compiler, header):
    done = subprocess.run([compiler, "-E", "-x", "c++", "-"], input=f"#include <{header}>\n", capture_output=True,
                          text=True, errors="replace", check=False)
    return done.returncode == 0


def open_rows(path, library):
    """(ffi, library object) of a built library."""
    ffi = cffi.FFI()
    ffi.cdef("void rw_prepare(const double *floor, const double *middle, const int *wanted);")
    for row in ROWS[library][2]:
        ffi.cdef(f"void rw_row_{row}{_SHAPE}")
    if library == "tape":
        ffi.cdef("long rw_tape_bytes(long operations);")
        ffi.cdef("""void rw_pitfall(int what, int steps, size_t n, const double *p,
                                    double *y, double *jac, double *implicit);""")
    return ffi, ffi.dlopen(path)
