"""Specs for the proof: some true all over their range, the others with one planted fault, and what is true of each.

The truth of every claim is known from the mathematics beside it. None: it has no meaning because another claim fails.
"""

from typing import NamedTuple

from problem_specs import spec

CLAIMS = ("defined", "exists", "unique", "slope", "kink")


class Case(NamedTuple):
    id: str
    text: str
    truth: dict[str, bool | None]      # claim -> whether it holds over the real numbers
    doubles: bool = True               # whether existence also holds for what the module computes


def case(name, equation, bracket, parameters, wrong=(), unknown=(), doubles=True, **more):
    """`wrong` lists the claims that are false, `unknown` those without meaning."""
    truth = {claim: None if claim in unknown else claim not in wrong for claim in CLAIMS}
    return Case(name, spec(name, equation, bracket, parameters, **more), truth, doubles)


NOWHERE = ("unique", "slope")           # say nothing where no zero exists
UNSAID = ("exists", "unique", "slope")  # nor where the residual has no value


def cases():
    return (*_true(), *_brackets(), *_second_roots(), *_undefined(), *_flat(), *_switches(), *_ends(), *_jumps(), *_doubles())


def _true():
    return (
        case("line", "x = a", ("-2", "2"), {"a": (-1, 1)}),
        case("cube_root", "x^3 + x = a", ("-3", "3"), {"a": (-20, 20)}),
        # log(x) <= x - 1, so that x*exp(x) at log(1 + a) is at least a.
        case("product_log", "x*exp(x) = a", ("0", "log1p(a) + 0.01"), {"a": (0.001, 100)}),
        # The root touches both ends where a does: a face of contact.
        case("contact", "x^2 = a", ("0", "1"), {"a": (0.01, 1)}),
        case("contact_at_end", "x*(1 + a*x) = a", ("0", "a"), {"a": (0.25, 4)}),
        case("ratio_only", "x + exp(x) = a/b", ("-1", "log(1 + a/b)"), {"a": (1, 5), "b": (1, 2)}),
        case("shifted_sine", "x - 0.9*sin(x) = m", ("m - 1", "m + 1"), {"m": (0, 6)}),
        case("rising_sum", "x + x^3 + tanh(x) = a*b", ("-4", "4"), {"a": (-2, 2), "b": (-2, 2)}),
        case("pole_outside", "1/(1 + x) = a", ("-0.5", "9.5"), {"a": (0.1, 1.9)}),
        case("required_order", "x = log(b/a)", ("-0.01", "b/a"), {"a": (1, 9), "b": (1, 9)}, require=("b >= a",)),
        case("guarded_branch", "where(x > 2, x^2 - 2, x) = a", ("0", "1.5"), {"a": (0.1, 1.4)}),
        case("abs_away", "abs(x + 9) + x = a", ("0", "9"), {"a": (10, 20)}),
        case("open_log", "log(x) = a", ("0", "10"), {"a": (-5, 2)}, ends="open-lower"),
        # sin(x)/x falls from 1 to 0 between 0 and pi.
        case("open_sinc", "sin(x)/x = a", ("0", "3.2"), {"a": (0.1, 0.9)}, ends="open-lower"),
        case("open_poles", "1/x + 1/(x - 1) = a", ("0", "1"), {"a": (-10, 10)}, ends="open"),
        case("steep_power", "x^7 = a", ("0.5", "2"), {"a": (0.01, 100)}),
        case("gaussian_tail", "erfc(x) = a", ("-2", "6"), {"a": (0.001, 1.9)}),
    )


def _brackets():
    """A bracket that misses the root somewhere."""
    return (
        # The root is log(1 + a), the upper end 1e-9 below it at a = 2 and above it for a < 2 - 3e-9.
        case("short_by_a_billionth", "exp(x) - 1 = a", ("0", "1.09861228766810969"), {"a": (0.1, 2)}, wrong=("exists",), unknown=NOWHERE),
        case("long_by_a_billionth", "exp(x) - 1 = a", ("0", "1.09861228966810969"), {"a": (0.1, 2)}),
        case("corner_missed", "x = a + b", ("0", "1.999999999"), {"a": (0, 1), "b": (0, 1)}, wrong=("exists",), unknown=NOWHERE),
        case("corner_met", "x = a + b", ("0", "2"), {"a": (0, 1), "b": (0, 1)}),
        case("reversed_in_a_corner", "x = a/2", ("0", "a - 0.0000001"), {"a": (0, 1)}, wrong=("defined", "exists"), unknown=NOWHERE),
        case("no_root", "x^2 + a", ("-1", "1"), {"a": (1e-9, 1)}, wrong=("exists",), unknown=NOWHERE),
    )


def _second_roots():
    return (
        # Three roots where a lies within 2/(3*sqrt(3))*e^1.5 of 0 (e = 0.01: 0.000385).
        case("fold_in_a_sliver", "x^3 - 0.0001*x = a", ("-2", "2"), {"a": (-1, 1)}, wrong=("unique", "slope")),
        case("bump", "x + 1.2*exp(-((x - 0.5)/0.001)^2)*0.001 = a", ("-1", "2"), {"a": (0, 1)}, wrong=("unique", "slope")),
        case("small_bump", "x + 0.8*exp(-((x - 0.5)/0.001)^2)*0.001 = a", ("-1", "2"), {"a": (0, 1)}),
        case("wave", "x + 0.11*sin(10*x) = a", ("-1", "2"), {"a": (0, 1)}, wrong=("unique", "slope")),
        case("three_roots", "(x - 1)*(x - 2)*(x - 3) = a", ("0", "4"), {"a": (-0.1, 0.1)}, wrong=("unique",)),
        # The factor of the sine is some 1e-4 but for b within 1e-6 of 1, where it rises to 0.6.
        case("sliver_of_a_parameter", "x - 0.3*(1 + tanh(1e7*(b - 0.9999995)))*sin(6*x) = a", ("-1", "2"),
             {"a": (0, 1), "b": (0, 1)}, wrong=("unique", "slope")),
    )


def _undefined():
    return (
        case("pole_inside", "1/(x - a) = 0.5", ("0", "4"), {"a": (0.5, 1.5)}, wrong=("defined",), unknown=UNSAID),
        case("removable", "sin(x - a)/(x - a) = 0.5", ("0", "3"), {"a": (0.5, 1)}, wrong=("defined",), unknown=UNSAID),
        case("removable_quotient", "(x^2 - 1)/(x - 1) = a", ("0", "4"), {"a": (1.5, 4)}, wrong=("defined",), unknown=UNSAID),
        case("log_in_a_corner", "x + log(1 - a*b) = 0", ("-1", "40"), {"a": (0, 1), "b": (0, 1)}, wrong=("defined", "exists"), unknown=NOWHERE),
        case("root_in_a_corner", "x + sqrt(1 - a*b) = 2", ("0", "3"), {"a": (0, 1), "b": (0, 1.000001)}, wrong=("defined",), unknown=UNSAID),
        case("root_to_the_corner", "x + sqrt(1 - a*b) = 2", ("0", "3"), {"a": (0, 1), "b": (0, 1)}),
        case("infinite_end", "x = 1", ("0", "2/a"), {"a": (0, 1)}, wrong=("defined",), unknown=UNSAID),
        case("arcsine_outside", "asin(x) = a", ("-1.0000001", "1"), {"a": (-1, 1)}, wrong=("defined",), unknown=UNSAID),
        case("squared_pole", "1/(x - a)^2 = 4", ("0", "2"), {"a": (0.5, 1)}, wrong=("defined",), unknown=UNSAID),
    )


def _flat():
    return (
        case("triple_root", "(x - a)^3", ("0", "4"), {"a": (1, 3)}, wrong=("slope",)),
        case("flat_at_one_point", "x^3 = a", ("-2", "2"), {"a": (-1, 1)}, wrong=("slope",)),
        case("double_root", "(x - 1)^2 = a", ("1", "4"), {"a": (0, 4)}, wrong=("slope",)),
        case("parabolic_orbit", "x - e*sin(x) = m", ("m - 1", "m + 1"), {"e": (0, 1), "m": (0, 3)}, wrong=("slope",)),
    )


def _switches():
    return (
        case("kink_at_root", "max(x, 2*x) = a", ("-4", "4"), {"a": (-1, 1)}, wrong=("kink",)),
        case("kink_beside_root", "max(x, 2*x) = a", ("-4", "4"), {"a": (0.001, 1)}),
        case("switch_of_parameters", "x = min(a, b)", ("-1", "2"), {"a": (0, 1), "b": (0, 1)}, wrong=("kink",)),
        case("switch_beyond", "x = min(a, b)", ("-1", "3"), {"a": (0, 1), "b": (1.001, 2)}),
        case("corner_of_abs", "abs(x) + 2*x = a", ("-4", "4"), {"a": (-1, 1)}, wrong=("kink",)),
    )


def _ends():
    """Open ends that do not keep what they promise."""
    return (
        case("no_change_at_pole", "1/x = a", ("0", "1"), {"a": (0.5, 0.9)}, wrong=("exists",), unknown=NOWHERE, ends="open-lower"),
        case("closed_at_a_pole", "1/x = a", ("0", "4"), {"a": (0.5, 2)}, wrong=("defined",), unknown=UNSAID),
        case("wrong_end_open", "log(x) = a", ("0", "9"), {"a": (-3, 2)}, wrong=("defined",), unknown=UNSAID,
             ends="open-upper"),
        # The only zero is at the open end itself.
        case("zero_at_open_end", "x*(1 + a*x)", ("0", "1"), {"a": (1, 2)}, wrong=("exists",), unknown=NOWHERE, ends="open-lower"),
    )


def _jumps():
    return (
        case("step", "where(x < a, x - 9, x + 9)", ("0", "4"), {"a": (1, 3)}, wrong=("exists",), unknown=(*NOWHERE, "kink")),
        case("sign_only", "sign(x - a) + 0.1*x = 0.05", ("0", "1"), {"a": (0.2, 0.8)}, wrong=("exists",), unknown=(*NOWHERE, "kink")),
        case("pole_as_sign_change", "1/(x - a)", ("0", "4"), {"a": (1, 3)}, wrong=("defined", "exists"), unknown=NOWHERE),
    )


def _doubles():
    """True over the real numbers, not in doubles."""
    return (
        case("overflow", "x^100*a = 1", ("0.001", "1e5"), {"a": (1, 1e10)}, doubles=False),
        case("exponential_overflow", "exp(x)*a = 5", ("-20", "800"), {"a": (1, 1e5)}, doubles=False),
    )
