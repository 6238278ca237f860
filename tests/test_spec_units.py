"""Units: what a text means, what agrees, and that a spec is checked as a whole without converting anything."""

import math
import subprocess
import sys
from fractions import Fraction

import pint
import pytest
from hypothesis import given
from hypothesis import strategies as st

from rootwright.spec.reader import read
from rootwright.spec.unit_text import ONE, UnitError, parse_unit
from rootwright.spec.unit_text import _PLAIN, _PREFIXED, _PREFIXES

REGISTRY = pint.UnitRegistry()
BASES = {"[length]": "m", "[mass]": "kg", "[time]": "s", "[current]": "A", "[temperature]": "K", "[substance]": "mol",
         "[luminosity]": "cd"}

SPEC = """\
format = 1
name = "mixing"
{dimensions}
[constants]
R = {{ value = 8.314462618, unit = "J/(mol K)" }}
T0 = {{ value = 273.15, unit = "K" }}
zero = {{ value = 0, unit = "1" }}
third = {{ value = "1/3", unit = "1" }}
per_degree = {{ value = "pi/180", unit = "1/deg" }}
{constants}
[parameters]
p = {{ range = [1.0, 2.0], unit = "Pa" }}
q = {{ range = [1.0, 2.0], unit = "kPa" }}
V = {{ range = [1.0, 2.0], unit = "m3/mol" }}
w = {{ range = [1.0, 2.0], unit = "cm3/mol" }}
T = {{ range = [1.0, 2.0], unit = "K" }}
t = {{ range = [10.0, 40.0], unit = "degC" }}
u = {{ range = [10.0, 40.0], unit = "degC" }}
f = {{ range = [50.0, 90.0], unit = "degF" }}
E = {{ range = [1.0, 2.0], unit = "J/mol" }}
share = {{ range = [1.0, 99.0], unit = "%" }}
angle = {{ range = [1.0, 2.0], unit = "rad" }}
tilt = {{ range = [1.0, 2.0], unit = "deg" }}
d = {{ range = [0.1, 2.0], unit = "m" }}
k = {{ range = [0.1, 2.0], unit = "s/m^(1/3)" }}
v = {{ range = [0.1, 2.0], unit = "m/s" }}
n = {{ range = [1.0, 2.0], unit = "1" }}
{parameters}
[definitions]
{definitions}
[unknown]
name = "x"
bracket = [{bracket}]
unit = {unit}
{start}
[residual]
equation = "{equation}"

[outputs]
part = {{ expression = "{part}"{declared} }}
used = {{ expression = "p*q*V*w*T*(t - u)*(f - f)*E*share*angle*tilt*d*k*v*n*{used}" }}
{published}
"""


PARTS = {"part": "1", "declared": "", "equation": "x = d", "bracket": '"0", "2"', "unit": '"m"', "dimensions": "",
         "constants": "", "parameters": "", "definitions": "", "start": "", "published": "", "used": "1"}


def spec(part="1", declared="", **parts):
    declared = f', unit = "{declared}"' if declared else ""
    text = SPEC.format(**PARTS | parts | {"part": part, "declared": declared})
    model, found = read(text.encode(), "spec.toml")
    return model, [diagnostic.message for diagnostic in found]


def errors(*args, **kwargs):
    model, messages = spec(*args, **kwargs)
    assert (model is None) == bool(messages)
    return messages


# The meaning of unit texts. pint's own registry is the judge.
def dimensions_by_pint(unit):
    dimensions = REGISTRY.get_dimensionality(unit)
    return {BASES[key]: Fraction(power).limit_denominator(100) for key, power in dimensions.items() if power}


def scale_by_pint(unit):
    """Factor to the base units kg, m, s, ..., for units without offset."""
    factor, _ = REGISTRY.get_root_units(unit)
    return factor * 1000.0 ** -float(dimensions_by_pint(unit).get("kg", 0))


EVERYDAY = [*(prefix + name for name in _PREFIXED for prefix in ("", *_PREFIXES)),
            *(name for name in _PLAIN if name != "degC")]


@pytest.mark.parametrize("name", EVERYDAY)
def test_the_built_in_units_are_those_of_the_units_library(name):
    unit = parse_unit(name)
    assert dict(unit.dimensions) == dimensions_by_pint(name)
    assert math.isclose(math.exp(unit.scale), scale_by_pint(name), rel_tol=1e-12)


@pytest.mark.parametrize("text, by_pint", [
    ("kg/m3", "kg/m**3"), ("m3/s", "m**3/s"), ("m^3/s", "m**3/s"), ("mol2/L2", "mol**2/L**2"), ("J/(mol K)", "J/mol/K"),
    ("J/(mol*K)", "J/mol/K"), ("J/mol/K", "J/mol/K"), ("J mol^-1 K^-1", "J/mol/K"), ("J mol-1 K-1", "J/mol/K"),
    ("W/(m2 K4)", "W/m**2/K**4"), ("bar*cm^3/(mol*K)", "bar*cm**3/mol/K"), ("m\u00b2\u00b7s\u207b\u00b9", "m**2/s"),
    ("s/m^(1/3)", "s*m**(-1/3)"), ("Pa*m^0.5", "Pa*m**0.5"), ("MPa m^(1/2)", "MPa*m**0.5"), ("m**2", "m**2"), ("1/s",
    "1/s"),
    ("psi", "psi"), ("ft3/min", "ft**3/minute"), ("Btu/(lb degF)", "Btu/lb/delta_degF"), ("inH2O", "inH2O"), ("hp",
    "hp"),
    ("\u00b5m", "um"), ("k\u03a9", "kohm"), ("\u03bcF", "uF"), ("rpm", "rpm"), ("mmHg", "mmHg"), ("kcal/mol",
    "kcal/mol"),
    ("(m/s)^2", "m**2/s**2"), ("1000 kg", "t"), ("  m  /  s ", "m/s"), ("1/degC", "1/delta_degC"), ("J/(kg \u00b0C)",
    "J/kg/K"),
])
def test_handbook_spellings_mean_what_the_units_library_means(text, by_pint):
    unit = parse_unit(text)
    assert dict(unit.dimensions) == dimensions_by_pint(by_pint)
    assert math.isclose(math.exp(unit.scale), scale_by_pint(by_pint), rel_tol=1e-9)


@pytest.mark.parametrize("text", ["1", "-", "rad", "m/m", "1/1"])
def test_spellings_of_no_unit_are_dimensionless(text):
    assert parse_unit(text).agrees(ONE)


@pytest.mark.parametrize("text, scale", [
    ("%", 0.01), ("percent", 0.01), ("\u2030", 0.001), ("ppm", 1e-6), ("deg", math.pi / 180),
    ("\u00b0", math.pi / 180), ("kJ/J", 1000.0)])
def test_percent_and_degrees_are_scales_of_their_own(text, scale):
    unit = parse_unit(text)
    assert unit.dimensions == () and math.isclose(math.exp(unit.scale), scale) and not unit.agrees(ONE)


def test_a_temperature_scale_keeps_its_origin_only_alone():
    assert parse_unit("degC").origin and parse_unit("\u00b0C").agrees(parse_unit("degC")) and parse_unit("degF").origin
    assert not parse_unit("degC").agrees(parse_unit("K")) and not parse_unit("degC").agrees(parse_unit("degF"))
    assert parse_unit("W/(m2 degC)").agrees(parse_unit("W/(m2 K)"))


@pytest.mark.parametrize("text", [
    "", "zork", "currency", "J/mol K", "W/m*K", "m^", "m^x", "m^(1/0)", "m^1e9", "m^101", "m101", "(((m^99)^99)^99)",
    "(m", "m)",
    "m//s", "/s", "*m", "m;s", "m,s", "m\ts", "0 m", "-1 m", "m--2", "(" * 60, "m " * 61, "m" * 300, "1e999 m", "dB",
    "pH_", "__import__",
    "().__class__", "m2K", "sqrt(m)", "m\u202e", "9" * 100, "m^(" + "9" * 50 + "/3)", "lambda: 0", "None",
    "import os", "m if s",
])
def test_a_text_that_is_no_unit_is_refused_with_a_place(text):
    with pytest.raises(UnitError) as caught:
        parse_unit(text)
    assert 0 <= caught.value.start <= caught.value.end <= len(text) and caught.value.help


@given(st.text(alphabet="mskgKJ12/*^().- \u00b0%\u00b2eN", max_size=30))
def test_any_text_is_a_unit_or_refused(text):
    try:
        parse_unit(text)
    except UnitError as error:
        assert error.message


# When the check takes place.
def test_a_spec_with_units_everywhere_is_checked():
    model, messages = spec()
    assert messages == [] and model.dimensions == "checked"


@pytest.mark.parametrize("change", [
    {"unit": '""'}, {"parameters": "bare = { range = [0, 1] }", "used": "bare"}, {"constants": "bare = 2",
    "used": "bare"}])
def test_without_a_unit_on_something_in_use_nothing_is_checked(change):
    model, messages = spec("p + q", **change)
    assert messages == [] and model.dimensions == "none"


def test_a_unit_missing_on_something_unused_does_not_switch_the_check_off():
    assert errors("p + q", constants="bare = 2")


def test_labels_are_not_checked():
    model, messages = spec("p + q + exp(t)", dimensions='dimensions = "label"')
    assert messages == [] and model.dimensions == "label"


def test_labels_may_be_any_text():
    model, messages = spec(dimensions='dimensions = "label"', parameters='m = { range = [0, 1], unit = "dollars; */" }',
                           used="m")
    assert messages == [] and model.parameters[-1].unit == "dollars; */"


# Nothing is converted; each message names both units.
@pytest.mark.parametrize("part, first, second", [
    ("p + q", "Pa", "kPa"), ("V - w", "m3/mol", "cm3/mol"), ("n + share", "1", "%"), ("d + 0.1", "m", "1"),
    ("1 - share", "1", "%"),
    ("angle + tilt", "rad", "deg"), ("T + t*0 + 1", "", "degC"), ("max(d, p)", "m", "Pa"), ("min(d, 0, n)", "m", "1"),
    ("hypot(d, n)", "m", "1"), ("atan2(p, q)", "Pa", "kPa"), ("where(p < q, 1, 2)", "Pa", "kPa"), ("t + 273.15",
    "degC", "1"),
    ("where(n < 1, d, T)", "m", "K"), ("t - f", "degC", "degF"), ("T - t", "K", "degC"), ("d^2 + d", "m^2", "m"),
    ("sqrt(d) + d", "m^(1/2)", "m"), ("cbrt(V) + d", "m/mol^(1/3)", "m"), ("d*v + p*q", "m^2/s", "1000 kg^2/(m^2 s^4)"),
    ("f + T", "degF", "K"),
])
def test_different_units_do_not_meet(part, first, second):
    message, = errors(part)
    assert first in message and second in message


@pytest.mark.parametrize("part, declared", [
    ("p + p", "Pa"), ("p*V/(R*T)", "1"), ("exp(-E/(R*T))", "1"), ("d^2", "m2"), ("d^2*d^-2", "1"), ("d^(5/3)",
    "m^(5/3)"),
    ("d^third", "m^(1/3)"), ("d^(2*third)/k", "m/s"), ("d^1.5", "m^1.5"), ("(d/d)^n", "1"), ("2^n", "1"),
    ("sqrt(d^2)", "m"),
    ("cbrt(d^3)", "m"), ("sqrt(v^2 + v^2)", "m/s"), ("hypot(d, d)", "m"), ("atan2(d, d) + angle", "rad"), ("abs(-d)",
    "m"),
    ("sign(d - d)", "1"), ("max(d, 0, d)", "m"), ("where(d < 0, d, 0)", "m"), ("d + 0", "m"), ("0.0 - p", "Pa"),
    ("0*p + d", "m"),
    ("sin(angle) + sin(tilt*per_degree)", "1"), ("log(p/p)", "1"), ("erf(n)", "1"), ("n^0.5", "1"), ("d*pi", "m"),
    ("share^1", "%"),
    ("x/d", "1"), ("p*V", "J/mol"), ("q*w/(R*T)", "1/1000"), ("p*v*d^2", "W"),
    # Temperatures: differences are in kelvin, a point and a difference make a point.
    ("t - u", "K"), ("t - u + T", "K"), ("t + (u - t)", "degC"), ("t + T0", "degC"), ("t - T0", "degC"), ("T0 + t",
    "degC"),
    ("max(t, u)", "degC"), ("where(t < u, t, u)", "degC"), ("(t - u)/T", "1"), ("t - 0", "degC"), ("E*(t - u)/T",
    "J/mol"),
    ("(f - f)/(f - f)", "1"),
])
def test_honest_formulas_pass_with_the_unit_they_have(part, declared):
    assert errors(part, declared) == []
    assert errors(part, "A") != []


@pytest.mark.parametrize("part", [
    "exp(d)", "log(p)", "sin(tilt)", "log(share)", "exp(q/p)", "tanh(T)", "erf(d)", "log10(E/R)"])
def test_transcendental_functions_take_dimensionless_numbers(part):
    message, = errors(part)
    assert "dimensionless" in message


@pytest.mark.parametrize("part", ["n^d", "2^T", "n^share", "d^n", "d^sqrt(2)", "d^pi", "d^x", "p^(1/n)"])
def test_powers_need_known_exponents_or_dimensionless_bases(part):
    assert len(errors(part)) == 1


@pytest.mark.parametrize("part", [
    "2*t", "t/T", "-t", "t^2", "exp(t)", "t + u", "abs(t)", "sqrt(t)", "T - t", "sign(t)", "t*t", "1/t",
    "t + 273.15", "611*exp(17.6*t/(t + 243))"])
def test_a_point_on_a_temperature_scale_is_no_number(part):
    assert errors(part) != []
    assert spec(part, dimensions='dimensions = "label"')[1] == []


def test_a_difference_of_fahrenheit_temperatures_is_not_in_kelvin():
    assert errors("(f - f) + T") != []


@pytest.mark.parametrize("expression, ok", [("2*d", True), ("2*p", False), ("d*v", False)])
def test_a_definition_has_the_unit_of_its_expression(expression, ok):
    assert (errors(definitions=f'twice = "{expression}"', equation="x = twice") == []) == ok


def test_one_mistake_in_a_definition_is_one_message():
    assert len(errors("1 + (p + q)*d + exp(p + d)", definitions='clash = "p + q"\ntwice = "2*clash + d"')) == 3


# Bare numbers and zeros take the unit of what they bound; expressions with names must come out in it.
@pytest.mark.parametrize("change, ok", [
    ({"bracket": "0, 20"}, True), ({"bracket": '"0", "2*pi"'}, True), ({"bracket": '"-1", "d"'}, True),
    ({"bracket": '"0", "2*d + 1"'}, False), ({"bracket": '"0", "p"'}, False), ({"bracket": '"0*p", "d"'}, True),
    ({"start": 'start = "d/2"'}, True), ({"start": 'start = "1.5"'}, True), ({"start": 'start = "T"'}, False),
    ({"constants": 'D = { value = "2/3", unit = "m" }'}, True),
    ({"constants": 'D = { value = "2*R", unit = "m" }'}, False),
    ({"constants": 'D = { value = "2*R", unit = "J/(mol K)" }'}, True),
    ({"parameters": 'a = { range = [1, "2*pi"], unit = "s" }', "used": "a"}, True),
    ({"parameters": 'a = { range = ["T0/2", 400], unit = "K" }', "used": "a"}, True),
    ({"parameters": 'a = { range = ["R", 400], unit = "K" }', "used": "a"}, False),
    ({"equation": "x = n"}, False), ({"equation": "x - d"}, True), ({"equation": "0 = x - d"}, True),
])
def test_bounds_have_the_unit_of_what_they_bound(change, ok):
    assert (errors(**change) == []) == ok


def test_the_sides_of_an_equation_may_both_be_points():
    assert errors(unit='"degC"', equation="x = t + (T - T0)", bracket='"t", "u"') == []


def test_requirements_and_published_values_are_checked():
    given_values = "p=1,q=1,V=1,w=1,T=1,t=20,u=20,f=50,E=1,share=1,angle=1,tilt=1,k=1,v=1,n=1"
    published = ("[domain]\nrequire = [\"{}\"]\n[[published]]\ngiven = {{ " + given_values + ", d = {} }}\n"
                 "expect = {{ x = {} }}\ntolerance = {}\nsource = \"invented\"\n")
    assert errors(published=published.format("p*V < R*T", 1, "1.0", "1e-3")) == []
    for wrong in [("p < q", 1, "1.0", "1e-3"), ("p < p", '"R"', "1.0", "1e-3"), ("p < p", 1, '"R"', "1e-3"),
    ("p < p", 1, "1.0", '"R"')]:
        assert len(errors(published=published.format(*wrong))) == 1


def test_a_tolerance_of_a_temperature_is_a_difference():
    published = ("[[published]]\ngiven = { p=1,q=1,V=1,w=1,T=1,t=20,u=20,f=50,E=1,share=1,angle=1,tilt=1,d=1,k=1,v=1,n=1 }\n"
                 'expect = { x = "25" }\ntolerance = "T0/1000"\nsource = "invented"\n')
    assert errors(unit='"degC"', equation="x = t", bracket='"t", "u"', published=published) == []


def test_the_units_library_is_not_loaded_for_everyday_units():
    program = ("import sys; from rootwright.spec.reader import read;"
               "model, found = read(sys.stdin.buffer.read(), 's.toml');"
               "sys.exit(not (model and not found and model.dimensions == 'checked' and 'pint' not in sys.modules))")
    text = SPEC.format(**PARTS).replace("degF", "degC")
    assert subprocess.run([sys.executable, "-c", program], input=text.encode()).returncode == 0
