"""Large residuals: their kernels are emitted in parts, and compute what whole ones do."""

import re
import subprocess

import pytest
from test_emission import GCC, GXX, STRICT_C, STRICT_CXX, write

from rootwright import pipeline
from rootwright.binding.module import load
from rootwright.emit import parts
from rootwright.evidence.points import choose

OPERATIONS = 2000
SWITCHED = b"""
format = 1
name = "switched"
[parameters]
a = { range = [0.5, 2.0] }
b = { range = [0.5, 2.0] }
[definitions]
work = "where(x < a, x*x, 2*a*x - a*a)"
[unknown]
name = "x"
bracket = ["0", "4"]
[residual]
equation = "where(a < b and x > 1, work + b*x, work + b*x^2) = exp(a)"
[outputs]
twice = { expression = "2*x + work" }
"""


def large():
    """Spec of a long chain of definitions in twenty parameters."""
    parameters = "\n".join(f"p{k} = {{ range = [0.5, 2.0] }}" for k in range(20))
    links = OPERATIONS//9
    steps = "\n".join(f'd{k + 1} = "d{k} + 0.001*p{k % 20}*log1p(d{k}*p{(3*k + 1) % 20})/(1 + 0.1*d{k})"'
                      for k in range(links))
    return (f'format = 1\nname = "chain"\n[parameters]\n{parameters}\n[unknown]\nname = "x"\nbracket = ["1e-3", "50"]\n'
            f'[definitions]\nd0 = "x"\n{steps}\n[residual]\nequation = "d{links} = 10"\n').encode()


def closed(name, order=1):
    data = {"switched": SWITCHED, "chain": large()}.get(name)
    return pipeline.closure(data, f"{name}.toml", order)[0] if data else pipeline.promising(name, order)


@pytest.mark.parametrize("name", ["switched", "implied_volatility"])
def test_a_kernel_in_parts_computes_what_the_whole_one_does(name, monkeypatch):
    closure = closed(name, 2)
    whole = load(closure, pipeline.emit(closure), "c")
    monkeypatch.setattr(parts, "WHOLE", 0)
    monkeypatch.setattr(parts, "MOST", 5)
    files = pipeline.emit(closure)
    assert f"{name}_rounding_2(" in files[f"{name}.c"]
    split = load(closure, files, "c")
    for points in choose(closure, 20, seed=5):
        for point in points:
            p = list(point.values())
            one, other = whole.solve_jacobian(p), split.solve_jacobian(p)
            assert repr(one) == repr(other)
            assert repr(whole.hessian(p, one[0].y[0])) == repr(split.hessian(p, one[0].y[0]))


@pytest.mark.parametrize("flags", [[GCC, *STRICT_C], [GXX, *STRICT_CXX]], ids=["c99", "cpp17"])
def test_parts_pass_strict_compilers(flags, monkeypatch, tmp_path):
    monkeypatch.setattr(parts, "WHOLE", 0)
    monkeypatch.setattr(parts, "MOST", 5)
    files = pipeline.emit(closed("switched", 2))
    write(tmp_path, files)
    subprocess.run([*flags, "-c", "switched.c", "-o", "switched.o"], cwd=tmp_path, check=True)


def test_no_function_of_a_large_module_computes_much():
    text = pipeline.emit(closed("chain"))["chain.c"]
    functions = [re.findall(r"^ +const double t\w+ = (?!work)", function, flags=re.M) for function in re.split(r"^}$", text, flags=re.M)]
    assert max(map(len, functions)) < parts.WHOLE
    assert sum(map(len, functions)) > 5*parts.WHOLE


def test_a_module_of_usual_size_has_its_kernels_whole():
    for name in pipeline.shipped():
        assert "work[" not in pipeline.emit(closed(name))[f"{name}.c"]
