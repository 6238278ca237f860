"""Emitted modules in the hands of others: strict compilers, sanitizers, the linker, a bare
Python; both targets against each other."""

import math
import re
import shutil
import struct
import subprocess
import sys

import pytest
from hypothesis import HealthCheck, Phase, given, settings
from hypothesis import strategies as st
from nasty_specs import HOSTILE
from strategies import EXACT, points, solvable_specs, spec_text

from rootwright.emit.text import harmless
from rootwright.operations import OPERATIONS
from rootwright.pipeline import SpecError, closure, emit

GCC = shutil.which("gcc") or "gcc"
GXX = shutil.which("g++") or "g++"
WARNINGS = ["-pedantic", "-Wall", "-Wextra", "-Wconversion", "-Wfloat-conversion", "-Wdouble-promotion", "-Wshadow",
            "-Wfloat-equal", "-Wcast-qual",
            "-Wvla", "-Wduplicated-branches", "-Werror"]
STRICT_C = ["-std=c99", *WARNINGS, "-Wmissing-prototypes"]
STRICT_CXX = ["-x", "c++", "-std=c++17", *WARNINGS]
SANITIZED = ["-std=c99", "-ffp-contract=off", "-fsanitize=address,undefined", "-fno-sanitize-recover=all",
             "-fno-sanitize=float-divide-by-zero"]
FIELDS = ("residual", "slope", "error_bound", "lower", "upper", "iterations", "evaluations", "status")

# Names that C, its headers, compilers, Python, or the emitted code itself might use.
AWKWARD = ("e", "I", "p", "r", "x", "t1", "jac", "root", "slope", "lower", "upper", "start", "y", "theta", "NAN",
           "NULL", "linux", "unix", "errno", "M_PI", "M_E",
           "HUGE_VAL", "INFINITY", "DBL_MIN", "DBL_EPSILON", "DOMAIN", "end", "rounding", "k", "status_", "int8_t",
           "size_t", "uint64_t", "EOF", "offsetof",
           "N", "M", "p_dot", "g", "g_x", "g_slope", "curvature", "n", "i", "main", "printf", "j0", "y1", "gamma",
           "index", "stdin", "self", "None_", "list",
           "print", "range", "len", "object", "lambda_", "inf", "nan", "isfinite_", "SOLVED", "FLAT", "Point", "LIMIT",
           "memcpy")


def sources(texts, target="c", order=1):
    """Files of the modules of some spec texts."""
    files = {}
    for text in texts:
        files |= emit(closure(text.encode(), "test.toml", order)[0], target)
    return files


def write(folder, files):
    for name, text in files.items():
        (folder / name).write_text(text, encoding="utf-8")


def together(files):
    """One translation unit of all C sources: modules do not get in each other's way."""
    return "".join(f'#include "{name}"\n' for name in files if name.endswith(".c"))


def run(command, folder, **more):
    done = subprocess.run([str(word) for word in command], cwd=folder, capture_output=True, text=True, check=False,
                          **more)
    assert done.returncode == 0, done.stdout[-2000:] + done.stderr[:4000]
    return done.stdout


def gathered(strategy, count):
    """The first examples of a strategy, the same in every run."""
    collected = []

    @settings(max_examples=count, database=None, derandomize=True, deadline=None, phases=[Phase.generate],
              suppress_health_check=list(HealthCheck))
    @given(strategy)
    def take(example):
        collected.append(example)

    take()
    return collected


def named(text, name):
    return re.sub(r'^name = "[^"]*"', f'name = "{name}"', text, count=1, flags=re.M)


@st.composite
def problems(draw, functions):
    """(spec text, points inside and outside its range)."""
    text, box = draw(solvable_specs("random", functions))
    return text, [list(draw(points(box)).values()) for _ in range(3)] + [[box["a"][1]*1.5 + 1.0, box["b"][0]]]


@pytest.fixture(scope="module")
def random_problems():
    """{name: (spec text, points)}: those named e_ have only operations that are the same to the bit everywhere."""
    found = {}
    for prefix, functions, count in (("e", EXACT, 10), ("f", None, 18)):
        for k, (text, where) in enumerate(gathered(problems(functions), count)):
            name = f"{prefix}_{k}"
            try:
                closure(named(text, name).encode(), "test.toml")
            except SpecError:               # a constant that is not real, a parameter that nothing uses
                continue
            found[name] = named(text, name), where
    assert len(found) > 16
    return found


def c_runner(problems):
    """A C program that solves every problem at its points with outputs full of a pattern, and prints all results."""
    lines = ["#include <stdio.h>", "#include <stdlib.h>", "#include <string.h>"]
    calls = []
    for name, (_, where, m) in problems.items():
        n = len(where[0])
        rows = ", ".join("{" + ", ".join(literal(value) for value in point) + "}" for point in where)
        lines += [f'#include "{name}.c"', f"static void run_{name}(void)", "{",
                  f"    static const double p[][{n}] = {{{rows}}};",
                  f"    {name}_point r; double jac[{m*n}], again[{m*n}], y_dot[{m}], p_bar[{n}];",
                  "    size_t k; int i, status;",
                  f"    for (k = 0; k < {len(where)}; k++) {{",
                  "        memset(&r, 0xA5, sizeof r); memset(jac, 0xA5, sizeof jac);",
                  "        memset(again, 0xA5, sizeof again); memset(y_dot, 0xA5, sizeof y_dot);",
                  f"        status = {name}_solve_jacobian(p[k], (double)NAN, &r, jac);",
                  "        if (status != r.status) { puts(\"status differs\"); exit(1); }",
                  f'        printf("{name}");',
                  f'        for (i = 0; i < {m}; i++) {{ printf(" %a", r.y[i]); }}',
                  '        printf(" %a %a %a %a %a", r.residual, r.slope, r.error_bound, r.lower, r.upper);',
                  '        printf(" %d %d %d", r.iterations, r.evaluations, r.status);',
                  f'        for (i = 0; i < {m*n}; i++) {{ printf(" %a", jac[i]); }}',
                  f"        for (i = 0; i < {n}; i++) {{ p_bar[i] = 0.0; }}",
                  "        if (status >= 0) {",
                  f"            {name}_jacobian(p[k], r.y[0], again); {name}_tangent(p[k], r.y[0], p[k], y_dot);",
                  f"            {name}_adjoint(p[k], r.y[0], r.y, p_bar);",
                  "            if ((status & 2) == 0 && memcmp(again, jac, sizeof jac) != 0) { exit(2); }",
                  f'            for (i = 0; i < {m}; i++) {{ printf(" %a", y_dot[i]); }}',
                  f'            for (i = 0; i < {n}; i++) {{ printf(" %a", p_bar[i]); }}',
                  "        }", '        printf("\\n");', "    }", "}"]
        calls.append(f"    run_{name}();")
    return "\n".join([*lines, "int main(void)", "{", *calls, "    return 0;", "}", ""])


def literal(value):
    if math.isfinite(value):
        return value.hex()
    return "NAN" if math.isnan(value) else "INFINITY" if value > 0.0 else "-INFINITY"


def by_python(name, text, where):
    """The same lines as the C program prints, as lists of numbers."""
    module = {}
    exec(compile(sources([text], "python")[f"{name}.py"], f"{name}.py", "exec"), module)  # our own emitted text
    rows = []
    for p in where:
        r, jac = module["solve_jacobian"](p)
        row = [*r.y, *(getattr(r, field) for field in FIELDS), *(d for line in jac for d in line)]
        if r.status >= 0:
            row += module["tangent"](p, r.y[0], p) + module["adjoint"](p, r.y[0], r.y, [0.0]*len(p))
        rows.append([float(value) for value in row])
    return rows


def numbers(words):
    return [float.fromhex(word) if "x" in word else float(word) for word in words]


def bits(values):
    return [struct.pack("<d", value) if value == value else "nan" for value in values]


SENTINEL = struct.unpack("<d", b"\xA5"*8)[0]


def test_random_modules_run_clean_under_sanitizers_and_agree_with_python(random_problems, tmp_path):
    """Every output is set on every status; statuses are the same in C and in Python, bits where operations are exact."""
    problems = {}
    for name, (text, where) in random_problems.items():
        results = len(closure(text.encode(), "test.toml")[0].model.results)
        problems[name] = text, [*where, [math.nan, 0.5], [0.5, math.inf], [-1e308, 1e308]], results
    write(tmp_path, sources(text for text, _, _ in problems.values()))
    (tmp_path / "main.c").write_text(c_runner(problems))
    run([GCC, *SANITIZED, "main.c", "-o", "main", "-lm"], tmp_path)
    printed = [line.split() for line in run([tmp_path / "main"], tmp_path, timeout=60).splitlines()]
    statuses = set()
    for name, (text, where, results) in problems.items():
        from_c = [numbers(words[1:]) for words in printed if words[0] == name]
        from_python = by_python(name, text, where)
        assert len(from_c) == len(from_python) == len(where)
        for p, one, other in zip(where, from_c, from_python):
            assert SENTINEL not in one, (text, p)
            status = one[results + len(FIELDS) - 1]
            statuses.add(status)
            assert status == other[results + len(FIELDS) - 1], (text, p)
            if status < 0:
                assert all(math.isnan(value) for value in one[:results + 3]) and all(math.isnan(value)
                    for value in one[results + len(FIELDS):])
            if name.startswith("e_"):
                assert bits(one) == bits(other), (text, p)
            elif status >= 0:
                assert abs(one[0] - other[0]) <= one[results + 2] + other[results + 2], (text, p)
    assert {0, 1, -1} <= statuses


def test_random_modules_compile_under_strict_flags_as_c99_and_as_cpp17_together(random_problems, tmp_path):
    files = sources(text for text, _ in random_problems.values())
    write(tmp_path, files | {"all.c": together(files)})
    run([GCC, *STRICT_C, "-O1", "-c", "all.c"], tmp_path)
    few = dict(list(files.items())[::4] + list(files.items())[1::4])
    write(tmp_path, {"few.c": together(few)})
    run([GXX, *STRICT_CXX, "-O0", "-c", "few.c"], tmp_path)


SWITCH = spec_text("switch_on_parameters", "x = where(a < b, a, 2*a - b) + max(a, b)*x/4",
                   {"a": (0.0, 1.0), "b": (0.0, 1.0)}, ("-9", "9"))
SUBNORMAL = spec_text("subnormal_constants",
                      "x*1e-310 + a*3e-324 = 4.9e-324*x^2 + 2.2250738585072014e-308*a + 1e-300*x", {"a": (1.0, 2.0)},
                      ("0", "9"))
NEGATIVE = spec_text("negative_constants",
                     "-x - -3*-a^-2 + (-2)^3 - -(-1/3)*x = where(not x < -1 or -a < -2 and x > -3, -x, -(-a))",
                     {"a": (1.0, 2.0)}, ("-99", "99"))
EVERYTHING = spec_text("everything", "x + a = 0.01*(" + " + ".join(
    f"{key}(a/9)" if row.arity == (1, 1) and key != "acosh" else f"{key}(1 + a, 2)" for key, row in OPERATIONS.items()
    if row.kind == "function" and key != "acosh") + " + acosh(1 + a) + a^x + where(a < x, a, x))", {"a": (0.1, 0.9)},
                       ("-9", "9"), outputs={"w": "x^a + erfc(x)"})


def test_switches_subnormal_and_negative_constants_and_every_operation_pass_the_analyzer(tmp_path):
    files = sources([SWITCH, SUBNORMAL, NEGATIVE, EVERYTHING])
    write(tmp_path, files | {"all.c": together(files)})
    run([GCC, *STRICT_C, "-O1", "-c", "all.c"], tmp_path)
    run([GCC, "-std=c99", "-O1", "-fanalyzer", "-Werror", "-c", "switch_on_parameters.c"], tmp_path)


def awkward_specs():
    """Awkward names as parameters, unknowns, outputs, definitions and constants; and the module's own names."""
    texts, half = [], len(AWKWARD)//2
    for k, names in enumerate((AWKWARD[:half], AWKWARD[half:])):
        *parameters, unknown, output, definition, constant = names
        total = " + ".join(parameters)
        equation = f"{unknown} + tanh({unknown}) + max({unknown}, {parameters[0]})/9 = {definition} + {constant}"
        more = {"constants": {constant: "0.25"},
                "definitions": {definition: f"({total})/99 + {parameters[0]}*{parameters[1]}"},
                "outputs": {output: f"where({unknown} < {parameters[2]}, {unknown}, min({definition}, "
                                    f"{parameters[3]}))"}}
        texts.append(spec_text(f"awkward_{k}", equation, {name: (0.0, 1.0) for name in parameters}, ("-99", "99"),
                               unknown, **more))
    own = ("residual", "partials", "bracket", "rounding", "outside", "kink", "outputs", "min", "max", "sign", "point",
           "sample", "locate", "solve_jacobian", "is_flat")
    parameters = [f"flow_{word}" for word in own]
    equation = f"flow + sign(flow)*1e-3 = min({' + '.join(parameters)}, max(flow_point, 4))"
    texts.append(spec_text("flow", equation, {name: (0.0, 1.0) for name in parameters}, ("-99", "99"), "flow",
                           outputs={"flow_clear": "flow*sign(flow_min)"}))
    return texts


def test_awkward_names_compile_as_c99_and_as_cpp_and_run_alike_in_both_targets(tmp_path):
    problems = {}
    for text in awkward_specs():
        model = closure(text.encode(), "test.toml")[0].model
        problems[model.name] = text, [[0.125*(k % 7) for k in range(len(model.parameters))]], len(model.results)
    files = sources(text for text, _, _ in problems.values())
    write(tmp_path, files | {"all.c": together(files), "main.c": c_runner(problems)})
    run([GCC, *STRICT_C, "-O1", "-c", "all.c"], tmp_path)
    run([GCC, "-O0", "-c", "all.c"], tmp_path)                     # the compiler's own dialect defines more macros
    run([GXX, *STRICT_CXX, "-O0", "-c", "all.c"], tmp_path)
    run([GCC, "-std=c99", "-ffp-contract=off", "main.c", "-o", "main", "-lm"], tmp_path)
    printed = {line.split()[0]: numbers(line.split()[1:]) for line in run([tmp_path / "main"], tmp_path).splitlines()}
    for name, (text, where, results) in problems.items():
        (row,) = by_python(name, text, where)
        assert row[results + len(FIELDS) - 1] in (0.0, 4.0)
        assert bits(printed[name]) == bits(row)


TEXTS = (HOSTILE.encode().decode("unicode_escape", "ignore").replace("\0", ""), "*/ int escaped; /*",
         "??/\n#error escaped ??/", "line \\\nint escaped;\\", '"""\nescaped = 1\n"""',
         "'''\nescaped = 1", "{{ 7*7 }} {% raw %} {# escaped #} %s %n {0}", "\u202Eescaped\u202C \u2066 \u200F \u061C",
         "".join(map(chr, range(1, 32))) + "\x7f\x85\u2028\u2029 escaped",
         "escaped "*700, "x"*5000, "*"*40 + "/" + "/"*40 + "*" + "?"*9 + "/",
         "\u03b8\u00e9\u6c34\u0436 \U0001F30A escaped", "\\", "a*\\/b", "*\u200b/", "\"\"\\\"")


def hostile_specs():
    for k, text in enumerate(TEXTS):
        quoted = toml(text)
        yield f"""format = 1
name = "hostile_{k}"
title = {quoted}
source = {quoted}
caution = {quoted}
dimensions = "label"
[constants]
c = {{ value = 2.5, unit = {quoted}, about = {quoted} }}
[parameters]
a = {{ range = [0.5, 2.0], unit = {quoted}, about = {quoted} }}
[unknown]
name = "x"
bracket = ["0", "9"]
unit = {quoted}
about = {quoted}
[residual]
equation = {toml("x*exp(x)" + chr(10) + " = a*c")}
[outputs]
w = {{ expression = "x + 1", unit = {quoted}, about = {quoted} }}
[[published]]
given = {{ a = 1.0 }}
expect = {{ x = 1.0 }}
tolerance = 1.0
source = {quoted}
"""


def toml(text):
    """A basic string of TOML."""
    return '"' + "".join(character if character not in '"\\' and ord(character) >= 32
                         and ord(character) != 127 else f"\\u{ord(character):04X}"
                         for character in text) + '"'


def without_comments(text):
    return re.sub(r"/\*.*?\*/", " ", text, flags=re.S)


def test_hostile_texts_stay_inside_comments_in_c_and_in_python(tmp_path):
    texts = []
    for text in hostile_specs():
        try:
            closure(text.encode("utf-8", "surrogatepass"), "test.toml")
            texts.append(text)
        except SpecError as refused:
            assert refused.diagnostics
    assert len(texts) >= len(TEXTS) - 4
    files = sources(texts)
    for name, text in files.items():
        assert text.isascii() or text.encode("utf-8")
        assert not re.search("[^\n -~\u00a0-\uffff\U00010000-\U0010ffff]",
                             text) and not re.search("[\u200b-\u200f\u2028-\u202e\u2066-\u2069]", text), name
        assert "escaped" not in without_comments(text) and "??" not in text and "\\" not in without_comments(text), name
        assert text.count("/*") == text.count("*/") and not re.search(r"/\*(?:(?!\*/).)*/\*", text, flags=re.S), name
    write(tmp_path, files | {"all.c": together(files)})
    run([GCC, *STRICT_C, "-Wcomment", "-Wtrigraphs", "-Wbidi-chars=any", "-O0", "-c", "all.c"], tmp_path)
    plain = None
    for name, text in sources(texts, "python").items():
        module = {}
        exec(compile(text, name, "exec"), module)  # our own emitted text, which must hold nothing of the author's
        assert "escaped" not in module and module["solve"]([1.0]).status == 0
        code = [line for line in text.split('"""', 2)[2].splitlines() if not line.startswith("N = ")]
        code = "\n".join(line.split("  #")[0] for line in code)
        assert plain in (None, code), name
        plain = code


@pytest.mark.parametrize("text", TEXTS)
def test_harmless_text_is_one_line_that_no_language_reads(text):
    line = harmless(text)
    assert line.isprintable() and not any(mark in line for mark in ("*/", "/*", "??", "\\", '"""'))
    assert harmless(line) == line


INTERFACE = ({"solve", "solve_many"}, {"solve_jacobian", "tangent", "adjoint", "jacobian"},     # by order
             {"hessian", "tangent_adjoint"})
MATHS = {row.c.split("(")[0] for row in OPERATIONS.values() if row.kind == "function"
         and not row.c.startswith("rw_")} | {
    "pow", "fabs", "copysign", "nextafter", "ldexp", "frexp", "fmin", "fmax", "memcpy", "sincos",
             "_GLOBAL_OFFSET_TABLE_"}


@pytest.mark.parametrize("order", [0, 1, 2])
@pytest.mark.parametrize("compiler", ["gcc", pytest.param("clang", marks=pytest.mark.skipif(
    shutil.which("clang") is None, reason="clang is not installed"))])
def test_an_object_exports_its_interface_and_imports_maths_alone(compiler, order, tmp_path):
    write(tmp_path, sources([EVERYTHING], order=order))
    exported = {f"everything_{name}" for names in INTERFACE[:order + 1] for name in names}
    for optimization in ("-O0", "-O2"):
        run([compiler, "-std=c99", optimization, "-c", "everything.c"], tmp_path)
        symbols = [line.split()[-2:] for line in run(["nm", "everything.o"], tmp_path).splitlines()]
        assert {name for kind, name in symbols if kind.isupper() and kind != "U"} == exported
        assert {name for kind, name in symbols if kind == "U"} <= MATHS
        assert not [name for kind, name in symbols if kind in "dDbBC"]


def test_a_header_twice_two_modules_and_cpp_link_into_one_program(tmp_path):
    first, second = (spec_text(name, equation, {"a": (0.5, 2.0)}, ("0", "9"))
                     for name, equation in (("first", "x*exp(x) = a"), ("second", "x^3 + min(x, 1) = a")))
    write(tmp_path, sources([first, second]))
    (tmp_path / "main.cpp").write_text("""
#include "first.h"
#include "second.h"
#include "first.h"
#include "second.h"
#include <cmath>
#include <cstdio>
int main()
{
    const double a = 1.0;
    first_point f;
    second_point s;
    const double *const p[1] = {&a};
    const std::ptrdiff_t stride[1] = {0};
    double y[3];
    double *const wanted[1] = {y};
    if (first_solve(&a, NAN, &f) != FIRST_SOLVED || second_solve(&a, NAN, &s) != SECOND_SOLVED) { return 1; }
    if (first_solve_many(3, p, stride, nullptr, wanted, nullptr, nullptr, nullptr) != 0 || y[2] != f.y[0]) { return 2; }
    std::printf("%.17g %.17g", f.y[0], s.y[0]);
    return 0;
}
""")
    run([GCC, "-std=c99", "-c", "first.c", "second.c"], tmp_path)
    run([GXX, "-std=c++17", "-Wall", "-Wextra", "-Werror", "main.cpp", "first.o", "second.o", "-o", "main", "-lm"],
        tmp_path)
    f, s = map(float, run([tmp_path / "main"], tmp_path).split())
    assert abs(f*math.exp(f) - 1.0) < 1e-15 and abs(s**3 + s - 1.0) < 1e-15


@pytest.mark.parametrize("flag", ["-ffast-math", "-ffinite-math-only", "-mfpmath=387"])
def test_arithmetic_that_is_not_ieee_is_refused(flag, tmp_path):
    write(tmp_path, sources([SWITCH]))
    done = subprocess.run([GCC, "-std=c99", flag, "-c", "switch_on_parameters.c"], cwd=tmp_path, capture_output=True,
                          text=True, check=False)
    assert done.returncode != 0 and "#error" in done.stderr and "switch_on_parameters needs" in done.stderr


def test_emitted_python_needs_nothing_but_its_own_file(tmp_path):
    write(tmp_path, sources([EVERYTHING, SWITCH], "python"))
    script = ("import sys, importlib.util\n"
              "before = set(sys.modules)\n"
              "def load(name):\n"
              "    spec = importlib.util.spec_from_file_location(name, name + '.py')\n"
              "    module = importlib.util.module_from_spec(spec)\n"
              "    spec.loader.exec_module(module)\n"
              "    return module\n"
              "for name, p in (('everything', [0.5]), ('switch_on_parameters', [0.25, 0.5])):\n"
              "    module = load(name)\n"
              "    r, jac = module.solve_jacobian(p)\n"
              "    assert r.status == 0, r.status\n"
              "    assert module.tangent(p, r.y[0], [1.0]*len(p))[0] == sum(jac[0])\n"
              "print(sorted(set(sys.modules) - before))\n")
    loaded = run([sys.executable, "-I", "-S", "-W", "error", "-c", script], tmp_path)
    assert set(re.findall(r"\w+", loaded)) <= {"math", "struct", "_struct"}
