"""The Fortran interface: standard Fortran without a warning, and the same bits as from C."""

import re
import shutil

import pytest
from strategies import spec_text
from test_emission import run, write

from rootwright import cli
from rootwright.emit.assemble import Unsuitable
from rootwright.pipeline import closure, emit, find

GFORTRAN = pytest.mark.skipif(shutil.which("gfortran") is None, reason="gfortran is not installed")
STRICT = ["gfortran", "-std=f2008", "-pedantic", "-Wall", "-Wextra", "-Werror"]

FORTRAN = """
program main
    use, intrinsic :: iso_c_binding
    use, intrinsic :: ieee_arithmetic, only: ieee_value, ieee_quiet_nan
    use pipe_friction_module
    implicit none
    type(pipe_friction_point) :: r
    real(c_double), target :: many_re(3), rel(1), many_y(3), many_jac(3)
    type(c_ptr), target :: addresses(4)
    real(c_double) :: p(2), none, jac(2, 2), again(2, 2), y_dot(2), p_bar(2), hess(2, 2, 2), p_bar_dot(2)
    integer(c_int), target :: codes(3)
    integer :: i, status

    none = ieee_value(none, ieee_quiet_nan)
    p = [ 1d5, 1d-4 ]
    status = pipe_friction_solve(p, none, r)
    call show([ r%y, r%residual, r%slope, r%error_bound, r%lower, r%upper ])
    print "(3i4)", r%iterations, r%evaluations, r%status
    status = pipe_friction_solve_jacobian(p, 7d0, r, jac)
    call pipe_friction_jacobian(p, r%y(1), again)
    call pipe_friction_tangent(p, r%y(1), [ 1d0, 2d-6 ], y_dot)
    p_bar = 1d0
    call pipe_friction_adjoint(p, r%y(1), [ 1d0, 3d0 ], p_bar)
    call pipe_friction_hessian(p, r%y(1), hess)
    p_bar_dot = 1d0
    call pipe_friction_tangent_adjoint(p, r%y(1), [ 1d0, 2d-6 ], [ 1d0, 3d0 ], p_bar_dot)
    call show([ jac, again ])
    call show([ y_dot, p_bar, p_bar_dot ])
    call show([ hess ])
    print "(l1)", status == pipe_friction_solved .and. pipe_friction_jump == -5

    many_re = [ 1d4, 1d5, 1d6 ]
    rel = 1d-4
    addresses = [ c_null_ptr, c_null_ptr, c_loc(many_jac), c_null_ptr ]
    print "(i4)", pipe_friction_solve_many(3_c_size_t, [ c_loc(many_re), c_loc(rel) ], [ 1_c_intptr_t, 0_c_intptr_t ], &
        c_null_ptr, [ c_null_ptr, c_loc(many_y) ], c_null_ptr, c_loc(addresses), c_loc(codes))
    call show([ many_y, many_jac ])
    print "(3i4)", codes
contains
    subroutine show(numbers)
        real(c_double), intent(in) :: numbers(:)
        print "(*(z16.16, :, 1x))", (transfer(numbers(i), 1_c_int64_t), i = 1, size(numbers))
    end subroutine show
end program main
"""

C = """
#include "pipe_friction.h"
#include <inttypes.h>
#include <math.h>
#include <stdio.h>
#include <string.h>

static void show(int count, const double *numbers)
{
    for (int i = 0; i < count; i++) {
        uint64_t bits;
        memcpy(&bits, &numbers[i], sizeof bits);
        printf("%016" PRIX64 "%s", bits, i + 1 < count ? " " : "\\n");
    }
}

int main(void)
{
    const double p[2] = { 1e5, 1e-4 }, p_dot[2] = { 1.0, 2e-6 }, y_bar[2] = { 1.0, 3.0 };
    const double many_re[3] = { 1e4, 1e5, 1e6 }, *const many_p[2] = { many_re, &p[1] };
    const ptrdiff_t stride[2] = { 1, 0 };
    double many_y[6], *const y[2] = { NULL, many_y }, *const many_jac[4] = { NULL, NULL, &many_y[3], NULL };
    double jacobians[8], along[6] = { 0.0, 0.0, 1.0, 1.0, 1.0, 1.0 }, hess[8];
    int status, codes[3];
    pipe_friction_point r;
    pipe_friction_solve(p, NAN, &r);
    show(7, (const double[]){ r.y[0], r.y[1], r.residual, r.slope, r.error_bound, r.lower, r.upper });
    printf("%4d%4d%4d\\n", r.iterations, r.evaluations, r.status);
    status = pipe_friction_solve_jacobian(p, 7.0, &r, jacobians);
    pipe_friction_jacobian(p, r.y[0], jacobians + 4);
    pipe_friction_tangent(p, r.y[0], p_dot, along);
    pipe_friction_adjoint(p, r.y[0], y_bar, along + 2);
    pipe_friction_hessian(p, r.y[0], hess);
    pipe_friction_tangent_adjoint(p, r.y[0], p_dot, y_bar, along + 4);
    show(8, jacobians);
    show(6, along);
    show(8, hess);
    printf("%c\\n", status == PIPE_FRICTION_SOLVED ? 'T' : 'F');
    printf("%4zu\\n", pipe_friction_solve_many(3, many_p, stride, NULL, y, NULL, many_jac, codes));
    show(6, many_y);
    printf("%4d%4d%4d\\n", codes[0], codes[1], codes[2]);
    return 0;
}
"""


@GFORTRAN
def test_fortran_gets_the_bits_that_c_gets(tmp_path):
    """Every function, warm starts and addresses that are not given included."""
    write(tmp_path, emit(closure(*find("pipe_friction"), 2)[0], fortran=True) | {"main.f90": FORTRAN, "main.c": C})
    run(["gcc", "-std=c99", "-O2", "-ffp-contract=off", "-c", "pipe_friction.c"], tmp_path)
    run([*STRICT, "-c", "pipe_friction_module.f90"], tmp_path)
    run([*STRICT, "main.f90", "pipe_friction.o", "-o", "from_fortran", "-lm"], tmp_path)
    run(["gcc", "-std=c99", "main.c", "pipe_friction.o", "-o", "from_c", "-lm"], tmp_path)
    from_fortran, from_c = (run([tmp_path / name], tmp_path) for name in ("from_fortran", "from_c"))
    assert from_fortran == from_c and from_c.count("\n") == 9 and "7FF8" not in from_c


@GFORTRAN
@pytest.mark.parametrize("order", [0, 1, 2])
def test_the_module_is_standard_fortran_at_every_order(order, tmp_path):
    for name in ("if97_temperature", "wien_peak"):
        write(tmp_path, emit(closure(*find(name), order)[0], fortran=True, single_header=order == 1))
        run([*STRICT, "-c", f"{name}_module.f90"], tmp_path)


LONGEST = "a" + "b"*46


def long_spec(name):
    return closure(spec_text(name, "x*exp(x) = a", {"a": (0.5, 2.0)}, ("0", "9")).encode(), "test.toml", 2)[0]


@GFORTRAN
def test_the_longest_name_fits_into_the_lines_and_names_of_fortran(tmp_path):
    write(tmp_path, emit(long_spec(LONGEST), fortran=True))
    text = (tmp_path / f"{LONGEST}_module.f90").read_text()
    assert max(map(len, text.splitlines())) <= 132
    assert max(map(len, re.findall(r"\w+", re.sub(r"!.*", "", text)))) == 63
    run([*STRICT, "-c", f"{LONGEST}_module.f90"], tmp_path)


def test_a_name_too_long_for_fortran_is_refused_in_words(tmp_path, capsys):
    with pytest.raises(ValueError, match="at most 63 characters") as refused:
        emit(long_spec(LONGEST + "c"), fortran=True)
    assert isinstance(refused.value, Unsuitable)
    spec = tmp_path / "long.toml"
    spec.write_text(spec_text(LONGEST + "c", "x*exp(x) = a", {"a": (0.5, 2.0)}, ("0", "9")))
    assert cli.main(["compile", str(spec), "--fortran", "--into", str(tmp_path)]) == 2
    assert "which leaves 47" in capsys.readouterr().err


@pytest.mark.parametrize("option", [["--fortran"], ["--fortran", "--single-header"]])
def test_the_fortran_option_writes_one_file_more_and_all_are_told_fresh(option, tmp_path):
    assert cli.main(["compile", "kepler", *option, "--into", str(tmp_path)]) == 0
    files = {"kepler.h", "kepler_module.f90"} | ({"kepler.c"} if len(option) == 1 else set())
    assert {path.name for path in tmp_path.iterdir()} == files
    assert cli.main(["fresh", str(tmp_path)]) == 0


def test_the_other_files_are_the_same_with_and_without_fortran():
    closed, _ = closure(*find("kepler"))
    plain, more = emit(closed), emit(closed, fortran=True)
    assert plain.items() <= more.items() and len(more) == 3
    assert "intent(out) :: jac(2, 4)\n" in more["kepler_module.f90"]          # parameters first: the rows of C are its columns
