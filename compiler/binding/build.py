"""Build emitted C with the machine's compiler and load it: for Python and the commands, not for shipping."""

import functools
import os
import re
import shutil
import subprocess
import tempfile
from importlib import resources
from pathlib import Path

import cffi

FLAGS = ("-std=c99", "-O2", "-ffp-contract=off", "-fPIC", "-shared")
BATCHES = (("solve",), ("jacobian", "tangent", "adjoint"), ("hessian", "tangent_adjoint"))    # by order


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


@functools.cache
def compiler_version(compiler):
    """What the compiler says about itself."""
    done = subprocess.run([compiler, "--version"], capture_output=True, text=True, errors="replace", check=False)
    return done.stdout + done.stderr


def compile_library(name, files, n, m, order):
    """Bytes of a shared library of a module's files {name: text} and the batch driver.

    n, m: numbers of parameters and results; order: of the derivatives in the module. Raises NoCompiler, BuildFailed.
    """
    compiler = find_compiler()
    files = files | {"batch.c": _driver(name, n, m, order)}
    sources = [file for file in sorted(files) if file.endswith(".c")]
    with tempfile.TemporaryDirectory(prefix="rootwright-") as folder:
        for file, text in files.items():
            Path(folder, file).write_text(text, encoding="utf-8")
        command = [compiler, *FLAGS, "-o", "library.so", *sources, "-lm"]
        done = subprocess.run(command, cwd=folder, capture_output=True, text=True, errors="replace", check=False)
        if done.returncode != 0:
            raise BuildFailed(done.stderr.strip() or f"{compiler} ended with status {done.returncode}")
        return Path(folder, "library.so").read_bytes()


def open_library(path, name, n, m, order):
    """(ffi, library) of a library that `compile_library` made. Raises OSError."""
    ffi = cffi.FFI()
    ffi.cdef(_declarations(name, n, m, order))
    return ffi, ffi.dlopen(str(path))


def _driver(name, n, m, order):
    text = resources.files("rootwright.binding").joinpath("batch.c").read_text(encoding="utf-8")
    words = {"RW_N": str(n), "RW_M": str(m), "RW_ORDER": str(order), "rw_name": name, "rw_": f"{name}_"}
    return re.sub(r"\bRW_(?:N|M|ORDER)\b|\brw_name\b|\brw_", lambda found: words[found.group()], text)


def _declarations(name, n, m, order):
    lines = [f"""
        typedef struct {{
            double y[{m}];
            double residual, slope;
            double error_bound;
            double lower, upper;
            int iterations, evaluations, status;
        }} {name}_point;
        int {name}_solve(const double p[{n}], double start, {name}_point *r);
    """]
    if order >= 1:
        lines.append(f"""
        int {name}_solve_jacobian(const double p[{n}], double start, {name}_point *r, double jac[{m * n}]);
        void {name}_tangent(const double p[{n}], double root, const double p_dot[{n}], double y_dot[{m}]);
        void {name}_adjoint(const double p[{n}], double root, const double y_bar[{m}], double p_bar[{n}]);
        void {name}_jacobian(const double p[{n}], double root, double jac[{m * n}]);
        """)
    if order >= 2:
        lines.append(f"""
        void {name}_hessian(const double p[{n}], double root, double hess[{m * n * n}]);
        void {name}_tangent_adjoint(const double p[{n}], double root, const double p_dot[{n}], const double y_bar[{m}],
                                    double p_bar_dot[{n}]);
        """)
    lines += [f"""
        void {name}_batch_{what}(size_t first, size_t last, const double *const *in, const ptrdiff_t *stride,
                                 double *const *out, int *const *codes);
        """ for batches in BATCHES[:order + 1] for what in batches]
    return "".join(lines)
