"""The examples as a stranger would run them, and what they compute against other ways to compute it."""

import re
import shutil
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from scipy.optimize import brentq, least_squares, minimize_scalar
from scipy.special import lambertw
from test_code_bases import CLANG_LINES, GCC_LINES, shipped
from test_emission import run, write
from walkthrough import block, blocks, follow, place  # noqa: F401

EXAMPLES = Path(__file__).parent.parent / "specs" / "examples"
PAGE = (EXAMPLES / "README.md").read_text(encoding="utf-8")


@pytest.mark.parametrize("number, needed", [(0, "cc"), (1, "c++"), (2, "cc")], ids=["canal", "panel", "electrode"])
def test_an_example_prints_what_its_page_shows(number, needed, place):  # noqa: F811
    if shutil.which(needed) is None:
        pytest.skip(f"{needed} is not installed")
    shutil.copytree(EXAMPLES, place[0], dirs_exist_ok=True)
    follow(place, blocks(PAGE, "console")[number:number + 1])
    assert len(blocks(PAGE, "console")) == 3


NEWER = ["-Wno-c++98-compat-pedantic", "-Wno-pre-c++17-compat-pedantic"]         # the class is written in C++17


@pytest.mark.parametrize("line, source", [
    (GCC_LINES["c99"], "canal.c"), (CLANG_LINES["c99"], "canal.c"), (GCC_LINES["c++17"], "panel.cpp"),
    ([*CLANG_LINES["c++17"], *NEWER], "panel.cpp")], ids=["gcc", "clang", "g++", "clang++"])
def test_the_examples_pass_strict_compilers(line, source, tmp_path):
    if shutil.which(line[0]) is None:
        pytest.skip(f"{line[0]} is not installed")
    for path in EXAMPLES.glob("*.[ch]*"):
        shutil.copy(path, tmp_path)
    write(tmp_path, shipped("normal_depth") | shipped("solar_diode", single_header=True))
    run([*line, "-fsyntax-only", source], tmp_path)


def table(mark):
    """The numbers of the table printed below a line that begins with a mark, as shown on the page."""
    lines = block(PAGE, "console", mark).splitlines()
    start = next(k for k, line in enumerate(lines) if line.startswith(mark)) + 1
    return np.array([[float(word) for word in line.split()] for line in lines[start:] if re.fullmatch(r"[\d. -]+", line)])


def test_the_canal_agrees_with_the_same_steps_taken_for_the_depth_instead():
    """Manning's equation gives the discharge outright where the depth is the unknown: no closure, and bisection."""
    length, dt, width, side = 2000.0, 300.0, 3.0, 1.5

    def area(y):
        return (width + side*y)*y

    def discharge(y):
        radius = area(y)/(width + 2*y*np.sqrt(1 + side**2))
        return area(y)*radius**(2/3)*np.sqrt(5e-4)/0.03

    depth = [brentq(lambda y: discharge(y) - 2.0, 0.1, 9.0, xtol=1e-14)]*5
    highest = np.zeros((5, 3))
    for k in range(1, 24*12 + 1):
        rate = 2.0 + (18.0*np.sin(np.pi*k/72)**2 if k < 72 else 0.0)
        for i, before in enumerate(depth):
            stored = length*area(before) + dt*rate
            depth[i] = brentq(lambda y: length*area(y) + dt*discharge(y) - stored, 0.1, 9.0, xtol=1e-14)
            rate = discharge(depth[i])
            if rate > highest[i, 0]:
                highest[i] = rate, depth[i], k/12
    shown = table("reach")
    assert shown.shape == (5, 4)
    assert (abs(shown[:, 1:] - highest) <= [5e-5, 5e-5, 5e-3]).all()


def test_the_panel_agrees_with_the_closed_form_of_its_current():
    """Jain, A. and Kapoor, A. (2004), Solar Energy Materials and Solar Cells 81, 269-277: the current by Lambert's W."""
    shown = table("light")
    assert shown.shape == (5, 6)
    for light, open_circuit, strongest, current, power, by_series in shown:
        photo, saturation, series, shunt, a = 8.2*light/1000, 2e-10, 0.35, 400*1000/light, 1.55

        def amperes(v):
            total = series + shunt
            w = lambertw(series*saturation*shunt/(a*total)*np.exp(shunt*(series*(photo + saturation) + v)/(a*total))).real
            return (shunt*(photo + saturation) - v)/total - a/series*w

        best = minimize_scalar(lambda v: -v*amperes(v), bounds=(20, 40), method="bounded", options={"xatol": 1e-8})
        assert abs(-best.fun - power) <= 5e-4 and abs(best.x - strongest) <= 6e-4
        assert abs(amperes(strongest) - current) <= 6e-3       # the voltage is rounded to 0.5 mV, and dI/dV is near I/V
        assert abs(brentq(amperes, 20, 45, xtol=1e-12) - open_circuit) <= 5e-4
        assert abs(-by_series/current**2 - 1.0) <= 3e-3         # Joule's law: the resistance takes I^2*r


def test_the_fit_agrees_with_one_by_differences_of_a_bisected_root(place):  # noqa: F811
    script = "import electrode; f, e = electrode.fit(); print(*f.x, *e, f.cost, *electrode.CURRENT, *electrode.MEASURED)"
    done = subprocess.run([sys.executable, "-B", "-c", script], cwd=EXAMPLES, env=place[1], capture_output=True,
                          text=True, check=True)
    numbers = np.array(done.stdout.split(), dtype=float)
    x, errors, cost, current, measured = numbers[:3], numbers[3:6], numbers[6], numbers[7:19], numbers[19:]
    f = 96485.33212/8.31446261815324/298.15

    def residuals(x):
        i0, aa, r = np.exp(x[0]), x[1], x[2]*1e-5
        eta = [brentq(lambda e: i0*(np.expm1(aa*f*e) - np.expm1(-(1 - aa)*f*e)) - i, 0.0, 1.0, xtol=1e-15)
               for i in current]
        return eta + current*r - measured

    found = least_squares(residuals, [0.0, 0.5, 0.0], jac="3-point", xtol=1e-14, ftol=1e-14, gtol=1e-14)
    assert (abs(found.x*[1, 1, 1e-5] - x) <= 1e-4*errors).all() and abs(found.cost/cost - 1.0) <= 1e-9
    made_with = np.log(0.5), 0.42, 2e-5
    assert (abs(x - made_with) <= 2*errors).all()
