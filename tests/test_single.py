"""Modules in single precision: float throughout, and as accurate as they say."""

import ctypes
import math
import platform
import re
import shutil
from fractions import Fraction

import numpy as np
import pytest
from strategies import spec_text
from test_code_bases import LINES
from test_emission import EVERYTHING, SWITCH, run, together, write

from rootwright import cli, pipeline
from rootwright.binding.module import load
from rootwright.calculus.precision import DOUBLE, SINGLE
from rootwright.emit.c import in_single
from rootwright.evidence.noise import noise
from rootwright.evidence.points import choose, in_range
from rootwright.evidence.reference import NotSettled, Reference
from rootwright.operations import OPERATIONS
from rootwright.pipeline import closure, emit, find
from rootwright.plan.plan import PLAIN

pytestmark = pytest.mark.skipif(shutil.which("gcc") is None, reason="gcc is not installed")

SHIPPED = ("pipe_friction", "kepler", "if97_temperature", "plastic_multiplier", "normal_depth", "overpotential")


def single(spec, order=1):
    """Closure in single precision of a shipped spec's name, or of a spec's text."""
    data = find(spec) if "\n" not in spec else (spec.encode(), "test.toml")
    return closure(*data, order, "single")[0]


# -- the format


def test_numbers_round_to_the_nearest_float_as_the_processor_rounds():
    generator = np.random.default_rng(1)
    values = generator.standard_normal(3000)*10.0**generator.integers(-46, 38, 3000)
    for value in [*values.tolist(), 0.0, 2.0**-149, 2.0**-150, 3*2.0**-150, 2.0**-126*(1 - 2.0**-25), 1 + 2.0**-24,
                  1 + 3*2.0**-24, float(np.finfo(np.float32).max)]:
        assert SINGLE.nearest(Fraction(value)) == float(np.float32(value)), value
    for value in (2.0**128, -2.0**128, 2.0**128 - 2.0**103):
        with pytest.raises(OverflowError):
            SINGLE.nearest(Fraction(value))


def test_decimals_are_the_shortest_that_read_back():
    generator = np.random.default_rng(2)
    for value in (generator.standard_normal(2000)*10.0**generator.integers(-45, 38, 2000)).astype(np.float32):
        text = SINGLE.decimal(float(value))
        assert np.float32(text) == value and np.float32(str(value)) == value
        assert len(re.sub(r"e.*|\D", "", text).strip("0")) <= max(1, len(re.sub(r"e.*|\D", "", str(value)).strip("0")))
    assert [SINGLE.decimal(value) for value in (-0.0, 1e8, float(np.float32(0.1)))] == ["-0.0", "100000000.0", "0.1"]
    assert DOUBLE.decimal(0.1) == "0.1"


def test_the_source_in_single_precision_is_the_source_with_other_types_functions_and_numbers():
    assert in_single("double f(double x) { return fabs(x)*0.5 + 1e-3*x[2]; } /* of doubles: 0.5 */") == \
        "float f(float x) { return fabsf(x)*0.5f + 1e-3f*x[2]; } /* of floats: 0.5 */"
    assert in_single("uint64_t a = INT64_MIN; x = 0x1p-10*DBL_MIN + HUGE_VAL + pow(2.0, k1.y)") == \
        "uint32_t a = INT32_MIN; x = 0x1p-10f*FLT_MIN + HUGE_VALF + powf(2.0f, k1.y)"


# -- the object


@pytest.fixture(scope="module")
def modules():
    """Files of modules in single precision: shipped ones, every operation, switches; of every order."""
    files = {}
    for k, spec in enumerate((*SHIPPED, EVERYTHING, SWITCH)):
        files |= emit(single(spec, k % 3))
    return files


@pytest.mark.parametrize("line", LINES)
def test_single_modules_are_clean_of_warnings(line, modules, tmp_path):
    write(tmp_path, modules | {"all.c": together(modules)})
    run([*line, "-fsyntax-only", "all.c"], tmp_path)


def code(text):
    return re.sub(r"/\*.*?\*/", " ", text, flags=re.S)


def test_no_double_is_left_in_the_source_and_none_in_the_object(modules, tmp_path):
    """Neither a type, a constant, a function of double nor, on x86-64, an instruction that computes or converts one."""
    for name, text in modules.items():
        assert not re.search(r"\bdouble\b|DBL_|64_t", code(text)), name
        assert not re.search(r"(?<![\w.])(\d+\.\d*|\d+e[-+]?\d+)(e[-+]?\d+)?(?![\w.])", code(text)), name
    few = {name: text for name, text in modules.items() if name.startswith(("every", "switch", "kepler", "plastic"))}
    write(tmp_path, few | {"all.c": together(few)})
    for flags in (["-O0"], ["-O2", "-ffp-contract=off"]):
        run(["gcc", "-std=c99", *flags, "-c", "all.c"], tmp_path)
        imported = {line.split()[-1] for line in run(["nm", "-u", "all.o"], tmp_path).splitlines()}
        assert all(name.endswith("f") for name in imported - {"memcpy", "_GLOBAL_OFFSET_TABLE_"}), imported
        if platform.machine() in ("x86_64", "AMD64"):
            listing = run(["objdump", "-d", "--no-show-raw-insn", "all.o"], tmp_path)
            assert "mulss" in listing
            assert not re.findall(r"\bv?(?:add|sub|mul|div|sqrt|min|max|cmp\w*|u?comi)[sp]d\b|\bv?cvt\w*[sp]d\w*\b|\bf\w*ld\b",
                                  re.sub(r"<[^>]*>", "", listing))


# -- the numbers


class Library:
    """Modules of closures in single precision, built together."""

    def __init__(self, closures, folder):
        files = {}
        for closed in closures:
            files |= emit(closed)
        write(folder, files | {"all.c": together(files)})
        run(["gcc", "-std=c99", "-ffp-contract=off", "-shared", "-fPIC", "all.c", "-o", "all.so", "-lm"], folder)
        self.library = ctypes.CDLL(str(folder / "all.so"))

    def solve(self, closed, p, start=math.nan):
        """(point, jacobian as rows) at parameters; order 1."""
        n, m = len(closed.model.parameters), len(closed.model.results)

        class Point(ctypes.Structure):
            _fields_ = [("y", ctypes.c_float*m), *((name, ctypes.c_float) for name in (
                "residual", "slope", "error_bound", "lower", "upper")), ("iterations", ctypes.c_int),
                ("evaluations", ctypes.c_int), ("status", ctypes.c_int)]

        point, jac = Point(), (ctypes.c_float*(m*n))()
        ctypes.memset(ctypes.byref(point), 0xA5, ctypes.sizeof(point))
        function = getattr(self.library, f"{closed.model.name}_solve_jacobian")
        function.argtypes = [ctypes.c_float*n, ctypes.c_float, ctypes.POINTER(Point), ctypes.c_float*(m*n)]
        assert function((ctypes.c_float*n)(*p), start, ctypes.byref(point), jac) == point.status
        return point, np.array(jac).reshape(m, n)


@pytest.fixture(scope="module")
def library(tmp_path_factory):
    closures = [single(name) for name in SHIPPED]
    return Library(closures, tmp_path_factory.mktemp("single")), closures


def in_floats(point):
    return {name: float(np.float32(value)) for name, value in point.items()}


@pytest.mark.parametrize("k", range(len(SHIPPED)), ids=SHIPPED)
def test_roots_are_as_near_to_certified_ones_as_promised(k, library):
    """Within error_bound, and within 4 ulp plus 4 noise, of the exact root at the given floats."""
    built, closures = library
    closed = closures[k]
    reference, solved = Reference(closed.model), 0
    for drawn in sum(choose(closed, 20, 3), []):
        point = in_floats(drawn)
        if not in_range(closed, point):
            continue
        r, _ = built.solve(closed, point.values())
        if r.status < 0:
            with pytest.raises(NotSettled):
                reference.root(point)
            continue
        root = reference.root(point, r.y[0], r.error_bound)
        spread, _ = noise(reference.place(point), root.mid)
        distance = root.distance(r.y[0])
        assert distance <= r.error_bound, (point, r.y[0], distance)
        assert distance <= 4*float(np.spacing(np.float32(r.y[0]))) + 4*spread*2.0**29, (point, r.y[0], distance)
        assert r.lower <= r.y[0] <= r.upper and r.evaluations <= closed.limit
        solved += 1
    assert solved >= 16


def test_derivatives_agree_with_those_in_double_precision(library):
    """The double module's are held against differences elsewhere; single keeps some six digits where the slope is steep."""
    built, closures = library
    for closed in closures:
        double = pipeline.load(closed.model.name, "python")
        for point in map(in_floats, choose(closed, 10, 4)[1]):
            r, jac = built.solve(closed, point.values())
            wanted = np.array(double.solve_jacobian(point.values())[1])
            if r.status == 0 and np.isfinite(wanted).all():
                assert np.allclose(jac, wanted, rtol=1e-3, atol=1e-4*abs(wanted).max()), (closed.model.name, point)


STEEP = spec_text("steep", "x^3 = a", {"a": (-1e30, 1e30)}, ("-1e13", "1e13"))
STEP = spec_text("step", "sign(x - a) + 1e-30*x = 0.5*b", {"a": (-1.0, 1.0), "b": (-0.5, 0.5)}, ("-3e38", "3e38"))
WIDE = spec_text("wide", "atan((x - a)*1e30) = b", {"a": (-1.0, 1.0), "b": (-0.5, 0.5)}, ("-3e38", "3e38"))
BARE = spec_text("bare", "x*x = a", {"a": (0.0, 4.0)}, ("b", "2"), constants={"b": "0.5"})


def test_every_solve_ends_within_the_limit_and_failures_leave_nothing(tmp_path):
    closures = [single(text) for text in (STEEP, STEP, WIDE, BARE)]
    built, seen = Library(closures, tmp_path), {}
    for closed, points in zip(closures, ([[27.0], [-1e30], [1e-45], [0.0], [math.nan], [math.inf]],
                                         [[0.3, 0.25], [0.0, -0.3], [1e-40, 0.1]],
                                         [[0.3, 0.25], [0.0, 0.0], [-1.0, 0.5]], [[1.0], [0.01], [9.0]])):
        for p in points:
            r, jac = built.solve(closed, p)
            assert r.evaluations <= closed.limit <= 104
            seen.setdefault(closed.model.name, []).append(r.status)
            if r.status < 0:
                assert all(map(math.isnan, [*r.y, r.error_bound, r.residual, r.slope, *jac.flat]))
            else:
                assert math.isfinite(r.y[0]) and math.isfinite(r.error_bound)
    assert seen["steep"][0] == 0 and seen["steep"][4:] == [-1, -1]
    assert seen["step"] == [-5, -5, -5] and seen["bare"] == [0, -2, -2]
    closed, _ = pipeline.closure(WIDE.encode(), "wide.toml")
    double = load(closed, pipeline.emit(closed, "python", PLAIN), "python")
    assert seen["wide"] == [double.solve(p).status for p in ([0.3, 0.25], [0.0, 0.0], [-1.0, 0.5])]


def test_floats_are_numbered_as_doubles_are(library):
    """The limit of a fixed bracket counts the floats in it: three evaluations a halving, both ends, and the last ones."""
    _, closures = library
    limits = {closed.model.name: closed.limit for closed in closures}
    between = int(np.float32(20).view(np.int32)) - int(np.float32(1).view(np.int32))
    assert limits["pipe_friction"] == 3*between.bit_length() + 5 and limits["kepler"] == 104


MEASURE = r"""
#include <math.h>
#include <stdio.h>
static unsigned state = 1u;
static double uniform(void) { state = state*1664525u + 1013904223u; return state/4294967296.0; }
static double ulps(float got, double wanted)
{
    const float near = fabsf((float)wanted);
    const double spacing = near > 1e-37f ? (double)(nextafterf(near, INFINITY) - near) : 0x1p-149;
    return fabs((double)got - wanted)/spacing;
}
#define MEASURED(name, call, exact) \
    { \
        double worst = 0.0; \
        int i; \
        for (i = 0; i < 40000; i++) { \
            const float x = (float)(low + (high - low)*uniform()), y = (float)(4.0*uniform()); \
            const double e = ulps(call, exact); \
            (void)y; \
            worst = e > worst ? e : worst; \
        } \
        printf("%s %.3f\n", name, worst); \
    }
int main(void)
{
    double low, high;
"""


def test_the_library_is_as_accurate_as_the_header_says(tmp_path):
    """The C library's functions of float against those of double, at random arguments: an ulp of float is 2^29 of double."""
    ranges = {"sqrt": (0, 100), "log": (1e-6, 9), "log10": (1e-6, 9), "log2": (1e-6, 9), "log1p": (-0.99, 9),
              "asin": (-1, 1), "acos": (-1, 1), "acosh": (1, 99), "atanh": (-0.999, 0.999), "pow": (1e-3, 20),
              "exp": (-80, 80), "sinh": (-80, 80), "cosh": (-80, 80), "erfc": (-3, 9), "hypot": (-9, 9)}
    lines, limits = [], {}
    for op, row in OPERATIONS.items():
        if not re.match(r"[a-z]\w*\(", row.c) or row.c.startswith(("rw_", "fabs")):
            continue
        name, two = row.c.split("(")[0], "{1}" in row.c
        low, high = ranges.get(op, (-9, 9))
        rest = ", y" if two else ""
        lines.append(f'    low = {float(low)}; high = {float(high)}; MEASURED("{op}", {name}f(x{rest}), {name}((double)x'
                     f'{", (double)y" if two else ""}))')
        limits[op] = SINGLE.ulps(op)
    (tmp_path / "measure.c").write_text(MEASURE + "\n".join(lines) + "\n    return 0;\n}\n")
    run(["gcc", "-std=c99", "-O1", "measure.c", "-o", "measure", "-lm"], tmp_path)
    measured = {op: float(worst) for op, worst in map(str.split, run([tmp_path / "measure"], tmp_path).splitlines())}
    assert set(measured) == set(limits) and len(limits) > 20
    assert all(measured[op] <= limits[op] + 1e-6 for op in limits), measured


# -- the command


def test_the_precision_option_writes_files_that_are_told_fresh(tmp_path):
    assert cli.main(["compile", "kepler", "--precision", "single", "--single-header", "--fortran", "--into",
                     str(tmp_path)]) == 0
    header = (tmp_path / "kepler.h").read_text()
    assert "rootwright compile kepler --target c --order 1 --precision single --single-header\n" in header
    assert "Single precision: float throughout" in header and "float y[4];" in header and "at the given floats" in header
    assert "At most 104 evaluations" in header and "const float p[2] = { 0.1f, 0.08726646f };" in header
    assert "c_float" in (tmp_path / "kepler_module.f90").read_text()
    assert cli.main(["fresh", str(tmp_path)]) == 0


@pytest.mark.skipif(shutil.which("gfortran") is None, reason="gfortran is not installed")
def test_the_fortran_interface_is_that_of_floats(tmp_path):
    write(tmp_path, emit(single("kepler", 2), fortran=True) | {"main.f90": """
program main
    use, intrinsic :: iso_c_binding
    use kepler_module
    implicit none
    type(kepler_point) :: r
    if (kepler_solve([ 0.1e0, 0.08726646e0 ], 0e0, r) >= 0) print *, r%y(1)
end program main
"""})
    run(["gcc", "-std=c99", "-c", "kepler.c"], tmp_path)
    run(["gfortran", "-std=f2008", "-Wall", "-Werror", "kepler_module.f90", "main.f90", "kepler.o", "-o", "main", "-lm"],
        tmp_path)
    # Meeus, J. (1998), Astronomical Algorithms, example 30.a: 5.554589 degrees
    assert abs(math.degrees(float(run([tmp_path / "main"], tmp_path))) - 5.554589) < 3e-5


def test_single_precision_is_refused_for_python_and_for_constants_beyond_it(tmp_path, capsys):
    assert cli.main(["compile", "kepler", "--precision", "single", "--target", "python", "--into", str(tmp_path)]) == 2
    assert "--precision single is for the C target" in capsys.readouterr().err
    spec = tmp_path / "large.toml"
    spec.write_text(spec_text("large", "x*c = a*1e40", {"a": (1.0, 2.0)}, ("0", "9"), constants={"c": "1e39"}))
    assert cli.main(["compile", str(spec), "--into", str(tmp_path)]) == 0
    assert cli.main(["compile", str(spec), "--precision", "single", "--into", str(tmp_path)]) == 2
    assert "below 3.4e38" in capsys.readouterr().err
