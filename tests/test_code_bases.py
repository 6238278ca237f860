"""Emitted C in the code bases of others: their compilers with every warning, their standards, many modules in one program."""

import math
import shutil

import pytest
from test_emission import (EVERYTHING, INTERFACE, NEGATIVE, SUBNORMAL, SWITCH, WARNINGS, awkward_specs, random_problems,  # noqa: F401
                           run, sources, together, write)

from rootwright import cli, pipeline
from rootwright.pipeline import emit

SHIPPED = ("pipe_friction", "if97_temperature", "plastic_multiplier", "implied_volatility", "platinum_thermometer",
           "wien_peak")
GCC_LINES = {"c99": ["gcc", "-std=c99", *WARNINGS, "-Wmissing-prototypes"],
             "c11": ["gcc", "-std=c11", *WARNINGS, "-Wmissing-prototypes"],
             "c++17": ["g++", "-x", "c++", "-std=c++17", *WARNINGS],
             "c++20": ["g++", "-x", "c++", "-std=c++20", *WARNINGS]}
EVERY = ["-pedantic", "-Weverything", "-Wno-padded", "-Wno-declaration-after-statement", "-Werror"]
# The source is C: it has C's casts and null pointer, and hexadecimal numbers, which C++ has from 2017 on.
AS_CXX = ["-Wno-old-style-cast", "-Wno-zero-as-null-pointer-constant", "-Wno-pre-c++17-compat-pedantic"]
CLANG_LINES = {"c99": ["clang", "-std=c99", *EVERY], "c11": ["clang", "-std=c11", *EVERY],
               "c++17": ["clang++", "-x", "c++", "-std=c++17", *EVERY, *AS_CXX],
               "c++20": ["clang++", "-x", "c++", "-std=c++20", *EVERY, *AS_CXX]}
LINES = [pytest.param(line, id=f"{line[0]} {standard}", marks=pytest.mark.skipif(
    shutil.which(line[0]) is None, reason=f"{line[0]} is not installed"))
    for lines in (GCC_LINES, CLANG_LINES) for standard, line in lines.items()]
CLANG = pytest.mark.skipif(shutil.which("clang++") is None, reason="clang++ is not installed")


def shipped(name, order=1, **options):
    """Files of the module of a shipped spec."""
    return emit(pipeline.promising(name, order), **options)


@pytest.fixture(scope="module")
def modules(random_problems):  # noqa: F811
    """Files of modules of every order: shipped and random ones, every operation, switches, odd constants, odd names."""
    random = [text for text, _ in random_problems.values()][::3]
    files = sources([EVERYTHING, SWITCH, SUBNORMAL, NEGATIVE, *awkward_specs(), *random], order=2)
    for k, name in enumerate(SHIPPED):
        files |= shipped(name, k % 3)
    return files


@pytest.mark.parametrize("line", LINES)
def test_modules_are_clean_of_warnings(line, modules, tmp_path):
    write(tmp_path, modules | {"all.c": together(modules)})
    run([*line, "-fsyntax-only", "all.c"], tmp_path)


@CLANG
@pytest.mark.parametrize("standard", ["c++98", "c++17"])
def test_headers_are_clean_of_every_warning_in_cpp(standard, modules, tmp_path):
    headers = {name: text for name, text in modules.items() if name.endswith(".h")}
    main = "".join(f'#include "{name}"\n' for name in headers) + "int main() { return WIEN_PEAK_SOLVED; }\n"
    write(tmp_path, headers | {"main.cpp": main})
    run(["clang++", f"-std={standard}", *EVERY, "-Wno-c++98-compat-pedantic", "-c", "main.cpp"], tmp_path)


UNIT = """
#include "kepler.h"
#include "wien_peak.h"
#include "pipe_friction.h"
#include "kepler.h"
#include <math.h>
#ifdef __cplusplus
extern "C"
#endif
int UNIT(double y[3]);
int UNIT(double y[3])
{
    const double orbit[2] = { 0.1, 3.141592653589793/36.0 }, power[1] = { 5.0 }, pipe[2] = { 1e5, 1e-4 };
    kepler_point k;
    wien_peak_point w;
    pipe_friction_point f;
    const int status = kepler_solve(orbit, (double)NAN, &k) | wien_peak_solve(power, 4.0, &w)
        | pipe_friction_solve(pipe, (double)NAN, &f);
    y[0] = k.y[0];
    y[1] = w.y[0];
    y[2] = f.y[1];
    return status;
}
"""
MAIN = """
#include <stdio.h>
int first(double y[3]);
int second(double y[3]);
int main(void)
{
    double y[3], z[3];
    const int status = first(y) | second(z);
    printf("%d %a %a %a %a %a %a\\n", status, y[0], y[1], y[2], z[0], z[1], z[2]);
    return 0;
}
"""


@CLANG
def test_many_modules_live_in_many_translation_units_of_one_program(tmp_path):
    """Three modules, each built by another compiler to another standard, called from C and from C++ in one program.

    Meeus, J. (1998), Astronomical Algorithms, example 30.a: E = 5.554589 degrees at e = 0.1, M = 5 degrees. Wien's
    x = 4.965114231744276 (CODATA). Friction factor: fluids (Python library), documented example of Colebrook(1E5, 1E-4).
    """
    files = shipped("kepler") | shipped("wien_peak", 0) | shipped("pipe_friction", 2)
    write(tmp_path, files | {"unit.c": UNIT, "main.c": MAIN})
    same = ["-ffp-contract=off", "-O1", "-c"]
    run([*GCC_LINES["c11"], *same, "kepler.c"], tmp_path)
    run([*CLANG_LINES["c++20"], *same, "wien_peak.c"], tmp_path)
    run([*GCC_LINES["c++17"], *same, "pipe_friction.c"], tmp_path)
    run([*CLANG_LINES["c99"], *same, "-DUNIT=first", "unit.c", "-o", "first.o"], tmp_path)
    run([*GCC_LINES["c++20"], *same, "-DUNIT=second", "unit.c", "-o", "second.o"], tmp_path)
    run([*GCC_LINES["c99"], *same, "main.c"], tmp_path)
    objects = [f"{name}.o" for name in ("main", "first", "second", "kepler", "wien_peak", "pipe_friction")]
    run(["g++", *objects, "-o", "main", "-lm"], tmp_path)
    status, *words = run([tmp_path / "main"], tmp_path).split()
    assert status == "0" and words[:3] == words[3:]
    orbit, peak, factor = map(float.fromhex, words[:3])
    assert abs(math.degrees(orbit) - 5.554589) < 5e-7
    assert abs(peak - 4.965114231744276) < 2e-15 and abs(factor - 0.018513866077471648) < 4e-17


# -- one header


@pytest.mark.parametrize("line", LINES)
def test_single_headers_are_clean_of_warnings_with_and_without_their_implementation(line, tmp_path):
    write(tmp_path, shipped("kepler", 2, single_header=True) | shipped("plastic_multiplier", 0, single_header=True)
          | {"user.c": '#include "kepler.h"\n#define PLASTIC_MULTIPLIER_IMPLEMENTATION\n#include "plastic_multiplier.h"\n'
                       '#define KEPLER_IMPLEMENTATION\n#include "kepler.h"\n#include "kepler.h"\n',
             "other.c": '#include "kepler.h"\n#include "plastic_multiplier.h"\nextern const int other;\n'
                        'const int other = KEPLER_SOLVED;\n'})
    run([*line, "-fsyntax-only", "user.c"], tmp_path)
    run([*line, "-fsyntax-only", "other.c"], tmp_path)


@pytest.mark.parametrize("standard", ["c99", "c++17"])
def test_single_headers_make_the_program_that_header_and_source_make(standard, tmp_path):
    """Declared in many units and implemented in one, the same numbers come out, to the last bit."""
    names = ("kepler", "wien_peak", "pipe_friction")
    line = [*GCC_LINES[standard], "-ffp-contract=off"]
    said = []
    for single in (False, True):
        folder = tmp_path / str(single)
        folder.mkdir()
        files = {}
        for name in names:
            files |= shipped(name, single_header=single)
        if single:
            files["all.c"] = "".join(f'#define {name.upper()}_IMPLEMENTATION\n#include "{name}.h"\n' for name in names)
        write(folder, files | {"main.c": MAIN, "unit.c": UNIT})
        built = [name for name in files if name.endswith(".c")]
        run([*line, "-DUNIT=first", "-c", "unit.c", "-o", "first.o"], folder)
        run([*line, "-DUNIT=second", "-c", "unit.c", "-o", "second.o"], folder)
        for name in (*built, "main.c"):
            run([*(GCC_LINES["c99"] if name == "main.c" else line), "-c", name], folder)
        run(["g++", *(f"{name.removesuffix('.c')}.o" for name in (*built, "main.c")), "first.o", "second.o", "-o", "main",
             "-lm"], folder)
        said.append(run([folder / "main"], folder))
    assert said[0] == said[1] and said[0].startswith("0 0x1.")


def test_a_single_header_exports_its_interface_from_one_unit_and_nothing_from_the_others(tmp_path):
    write(tmp_path, shipped("kepler", single_header=True) | {
        "in.c": "#define KEPLER_IMPLEMENTATION\n#include \"kepler.h\"\n", "out.c": '#include "kepler.h"\n'})
    run(["gcc", "-std=c99", "-c", "in.c", "out.c"], tmp_path)
    exported = {line.split()[2] for line in run(["nm", "in.o"], tmp_path).splitlines() if line.split()[-2] == "T"}
    assert exported == {f"kepler_{name}" for names in INTERFACE[:2] for name in names}
    assert run(["nm", "out.o"], tmp_path) == ""


def test_the_single_header_option_writes_one_file_that_is_told_fresh(tmp_path, capsys):
    assert cli.main(["compile", "kepler", "--single-header", "--into", str(tmp_path)]) == 0
    assert [path.name for path in tmp_path.iterdir()] == ["kepler.h"]
    assert "rootwright compile kepler --target c --order 1 --single-header\n" in (tmp_path / "kepler.h").read_text()
    assert cli.main(["fresh", str(tmp_path)]) == 0
    (tmp_path / "kepler.h").write_text((tmp_path / "kepler.h").read_text().replace("wright 0.1.0", "wright 0.0.9"))
    capsys.readouterr()
    assert cli.main(["fresh", str(tmp_path)]) == 1
    assert "kepler --target c --order 1 --single-header --into" in capsys.readouterr().out


def test_an_option_of_the_c_target_is_refused_for_another(tmp_path, capsys):
    for option in ("--single-header", "--fortran"):
        assert cli.main(["compile", "kepler", option, "--target", "python", "--into", str(tmp_path)]) == 2
        assert f"{option} is for the C target" in capsys.readouterr().err and not list(tmp_path.iterdir())
