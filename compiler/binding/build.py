"""Build emitted C with the machine's compiler and load it: for `eval`, `verify` and the tests, not for shipping."""

import atexit
import hashlib
import os
import shutil
import subprocess
import tempfile
from importlib import resources
from pathlib import Path

import cffi

FLAGS = ("-std=c99", "-O2", "-ffp-contract=off", "-fPIC", "-shared")


class NoCompiler(RuntimeError):
    """No C compiler on this machine."""


class BuildFailed(RuntimeError):
    """The C compiler refused the source; the message is what it said."""


def find_compiler():
    """Path of the C compiler: the environment's CC, else cc, gcc or clang. Raises NoCompiler."""
    for name in (os.environ.get("CC"), "cc", "gcc", "clang"):
        path = shutil.which(name) if name else None
        if path:
            return path
    raise NoCompiler("no C compiler found: install gcc or clang, or set CC")


def build(name, files, n, m):
    """Compile the files of a module, with the batch driver, into a shared library; returns (ffi, library).

    `files` maps file names to texts, `n` and `m` are the numbers of parameters and results.
    """
    compiler = find_compiler()
    folder = Path(tempfile.mkdtemp(prefix="rootwright-"))
    atexit.register(shutil.rmtree, folder, ignore_errors=True)
    files = files | {"batch.c": _driver(name, n, m)}
    for file, text in files.items():
        (folder / file).write_text(text, encoding="utf-8")
    library = folder / f"{name}-{hashlib.sha256(repr(sorted(files.items())).encode()).hexdigest()[:16]}.so"
    sources = [file for file in sorted(files) if file.endswith(".c")]
    done = subprocess.run([compiler, *FLAGS, "-o", library.name, *sources, "-lm"], cwd=folder, capture_output=True, text=True, check=False)
    if done.returncode != 0:
        raise BuildFailed(done.stderr.strip())
    ffi = cffi.FFI()
    ffi.cdef(_declarations(name, n, m))
    return ffi, ffi.dlopen(str(library))


def _driver(name, n, m):
    text = resources.files("rootwright.binding").joinpath("batch.c").read_text(encoding="utf-8")
    return text.replace("RW_M*RW_N", str(m * n)).replace("RW_N", str(n)).replace("rw_name", name).replace("rw_", f"{name}_")


def _declarations(name, n, m):
    return f"""
        typedef struct {{
            double y[{m}];
            double residual, slope;
            double error_bound;
            double lower, upper;
            int iterations, evaluations, status;
        }} {name}_point;
        int {name}_solve(const double p[{n}], double start, {name}_point *r);
        int {name}_solve_jacobian(const double p[{n}], double start, {name}_point *r, double jac[{m * n}]);
        void {name}_tangent(const double p[{n}], double root, const double p_dot[{n}], double y_dot[{m}]);
        void {name}_adjoint(const double p[{n}], double root, const double y_bar[{m}], double p_bar[{n}]);
        void {name}_jacobian(const double p[{n}], double root, double jac[{m * n}]);
        void {name}_batch(size_t count, const double *p, {name}_point *r, double *jac);
    """
