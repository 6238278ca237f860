"""Specs with one fault planted, most of them too small to meet by chance, and the same specs with the fault barely gone.

What is true of each follows from the mathematics beside it. None: a claim without meaning because another one fails, or one that the contract leaves
open (a slope at a jump).
"""

from proof_specs import NOWHERE, UNSAID
from proof_specs import case as plain

# Neither refuted nor proved in full with the few boxes of a test.
UNSETTLED = ("x_pow0b", "gap_no", "equal_required_strict", "d_both_tiny", "d_exp_under")


def case(name, equation, bracket, parameters, *, spread=(), **more):
    """As of `proof_specs.case`; `spread` lists parameters that are spread logarithmically."""
    made = plain(name, equation, bracket, parameters, **more)
    text = made.text
    for parameter in spread:
        text = text.replace(f"{parameter} = {{ range", f'{parameter} = {{ spread = "log", range')
    return made._replace(text=text)


def cases():
    return (*_narrow(), *_slivers(), *_second(), *_nowhere(), *_flat(), *_kinks(), *_jumps(), *_open(), *_edges(), *_in_doubles())


def _narrow():
    """Brackets that miss the root by 1e-9, or by what a double leaves of a decimal: in a corner, inside, on an edge."""
    return (
        case("kepler_corner_clear", "x - e*sin(x) = m", ("0", "3.067037497630688558041"), {"m": (0, 3), "e": (0, 0.9)}),
        # Reduced van der Waals gas: the largest volume is at the lowest pressure and the highest temperature.
        case("waals_miss", "(p + 3/x^2)*(3*x - 1) = 8*T", ("0.4", "15.96536627568942769651"),
             {"T": (1.5, 3), "p": (0.5, 2)}, wrong=("exists",), unknown=NOWHERE),
        case("waals_clear", "(p + 3/x^2)*(3*x - 1) = 8*T", ("0.4", "15.96536627768942769651"), {"T": (1.5, 3), "p": (0.5, 2)}),
        case("diode_miss", "(V - x)/R = 1e-9*(exp(x/0.02585) - 1)", ("-0.1", "0.4557859185473684711776"),
             {"V": (0, 5), "R": (100, 10000)}, wrong=("exists",), unknown=NOWHERE),
        # The Antoine equation of water solved for T at 760 mmHg.
        case("antoine_miss", "10^(8.07131 - 1730.63/(233.426 + x)) = p", ("-20", "99.99682973571643607028"),
             {"p": (1, 760)}, wrong=("exists",), unknown=NOWHERE),
        case("rachford_clear", "z*(K - 1)/(1 + x*(K - 1)) - 0.5*(1 - z)/(1 - 0.5*x) = 0", ("0", "1.000000001000000000000"),
             {"z": (0.4, 0.6), "K": (2, 3)}),
        case("hertz_miss", "k*x^1.5 = F", ("0.1", "3.999999999000000000000"), {"F": (1, 8), "k": (1, 2)}, wrong=("exists",),
             unknown=NOWHERE),
        case("hertz_clear", "k*x^1.5 = F", ("0.1", "4.000000001000000000000"), {"F": (1, 8), "k": (1, 2)}),
        case("hump_touch", "x = a*(1 - a)", ("-1", "0.25"), {"a": (0, 1)}),
        case("bowl_touch", "x = 1 - (a - 0.3)^2 - (b - 0.7)^2", ("-2", "1"), {"a": (0, 1), "b": (0, 1)}),
        # The root is 1 at a = sqrt(2).
        case("ridge_irrational_miss", "x + x^3 = 2 - (a^2 - 2)^2", ("-9", "0.999999999"), {"a": (1, 2)}, wrong=("exists",),
             unknown=NOWHERE),
        case("ridge_irrational_clear", "x + x^3 = 2 - (a^2 - 2)^2", ("-9", "1.000000001"), {"a": (1, 2)}),
        case("edge_touch", "x^3 + b*x = a*(1 + b)", ("0", "1"), {"a": (0.1, 1), "b": (0.5, 2)}),
        case("turn_long", "x - 0.5*sin(x) = m", ("0", "6.283185307179587"), {"m": (0, "2*pi")}, doubles=None),
        case("turn_exact", "x - 0.5*sin(x) = m", ("0", "2*pi"), {"m": (0, "2*pi")}, doubles=None),
        # 3*0.1 is 0.3 for decimals and more for doubles.
        case("dec_three", "x = 3*a", ("0", "0.3"), {"a": (0, 0.1)}, doubles=None),
        case("req_not_miss", "x = a + b", ("0", "2.999999"), {"a": (0, 2), "b": (0, 2)}, wrong=("exists",), unknown=NOWHERE,
             require=("not (a > 1 and b > 1)",)),
        case("log_lambert_miss", "x + log(x) = log(a)", ("0", "24.43500440393491313826"),
             {"a": (1e-12, 1000000000000.0)}, wrong=("exists",), unknown=NOWHERE, spread=("a",), ends="open-lower"),
        case("log_lambert", "x + log(x) = log(a)", ("0", "30"), {"a": (1e-12, 1000000000000.0)}, spread=("a",), ends="open-lower"),
    )


def _slivers():
    """Faults in a millionth of the range of a parameter, that no sample meets."""
    return (
        case("sliver_of_a_bracket", "x = a + 3*exp(-((b - 0.123456)/2e-7)^2)", ("-1", "2"), {"a": (0, 1), "b": (0, 1)},
             wrong=("exists",), unknown=NOWHERE),
        case("sliver_of_a_switch", "x = where(abs(b - 0.123456) < 5e-7, 3, a)", ("-1", "2"), {"a": (0, 1), "b": (0, 1)},
             wrong=("exists", "kink"), unknown=NOWHERE),
        case("sliver_of_a_logarithm", "log(x + a + 1 - 5*exp(-((b - 0.7654321)/3e-7)^2)) = 0", ("0", "1.5"), {"a": (-0.5, -0.1), "b": (0, 1)},
             wrong=("defined",), unknown=UNSAID),
        case("sliver_of_a_flat", "x^3 + x*(b - 0.123456)^2 = a", ("-3", "3"), {"a": (-1, 1), "b": (0, 1)}, wrong=("slope",)),
    )


def _second():
    """Second zeros in slivers, at ends, and where the residual only touches 0."""
    return (
        # Three zeros where c > 0 and a^2 < 4*c^3.
        case("cubic_sliver", "x^3 - 3*c*x = a", ("-3", "3"), {"c": (-1, 1e-06), "a": (-1, 1)}, wrong=("unique", "slope")),
        case("cubic_clear", "x^3 - 3*c*x = a", ("-3", "3"), {"c": (-1, -1e-06), "a": (-1, 1)}),
        # Two more zeros at 0.7 - 1e-7 and 0.7 + 1e-7.
        case("pair_hidden", "(x - a)*((x - 0.7)^2 - 1e-14) = 0", ("0", "1"), {"a": (0.2, 0.4)}, wrong=("unique",)),
        case("pair_gone", "(x - a)*((x - 0.7)^2 + 1e-14) = 0", ("0", "1"), {"a": (0.2, 0.4)}),
        case("pair_param_clear", "(x - a)*((x - 0.7)^2 + k) = 0", ("0", "1"), {"a": (0.2, 0.4), "k": (1e-09, 1)}),
        case("zero_at_end_and_inside", "x*(x - a)*(x + 1) = 0", ("0", "2"), {"a": (0.5, 1)}, wrong=("unique",)),
        case("touching_zero", "(x - a)*(x - 0.5)^2 = 0", ("0", "1"), {"a": (0.7, 0.9)}, wrong=("unique", "slope")),
        # At b = 0 every number is a zero.
        case("all_zero_at_end", "(x - a)*b = 0", ("0", "1"), {"a": (0.2, 0.8), "b": (0, 1)}, wrong=("unique", "slope")),
        # x*exp(-x) falls from x = 1 on, but its zero there lies beyond the bracket.
        case("semenov", "x*exp(-x) = d", ("0", "1.03"), {"d": (0.1, 0.3677)}),
    )


def _nowhere():
    """Where the residual has no value: poles, 0/0, and domains left in a corner."""
    return (
        # 2 - a*b is 0 in a corner only: 1.41421356238^2 > 2 > 1.41421356237^2.
        case("pole_corner", "x + atan(1/(2 - a*b)) = a", ("-4", "4"),
             {"a": (0, "1.41421356238"), "b": (0, "1.41421356238")}, wrong=("defined",), unknown=UNSAID),
        case("growth_clear", "(exp(a*x) - 1)/a + x = 2", ("0", "3"), {"a": (1e-06, 1)}),
        # Cancels to x + sqrt(a), but not at x = sqrt(a).
        case("removable_irrational", "(x^2 - a)/(x - sqrt(a)) = b", ("0.5", "3"),
             {"a": (1, 2), "b": (3, 3.5)}, wrong=("defined",), unknown=UNSAID),
        case("square_over", "x*x/x = a", ("-1", "2"), {"a": (0.5, 1)}, wrong=("defined",), unknown=UNSAID),
        case("tan_above_by_double", "tan(x) = a", ("0", "1.5707963267948967"), {"a": (0, 10)}, wrong=("defined",), unknown=UNSAID),
        case("tan_before_pole", "tan(x) = a", ("0", "1.5"), {"a": (0, 10)}),
        case("asin_touch", "asin(a*b) + x = 1", ("-2", "2"), {"a": (0, 1), "b": (0, 1)}),
        case("acosh_touch", "acosh(x + a) = b", ("0", "3"), {"a": (1, 2), "b": (1.5, 2)}),
        # log(0) at x = 0, a third of the way.
        case("log_square", "log(x^2) = a", ("-1", "2"), {"a": (0.1, 1)}, wrong=("defined",), unknown=UNSAID),
        # a - 0.1 is 0 at a decimal that no double is.
        case("dec_pole", "x + 1/(a - 0.1) = 1", ("-1e7", "2"), {"a": (0, 1)}, wrong=("defined",), unknown=UNSAID),
        # A negative base to a power that is not whole.
        case("x_pow_var_neg", "x^n + 3*x = a + 0*n", ("-1", "2"), {"n": (2, 3), "a": (0.5, 0.9)}, wrong=("defined",), unknown=UNSAID),
        # 0^0 is 1: defined all over.
        case("x_pow0b", "x^n + x = a", ("0", "2"), {"n": (0, 3), "a": (1.2, 1.5)}, unknown=("slope",)),
        case("over_zero", "x + x^3/a = 1", ("0", "1"), {"a": (0, 1)}, wrong=("defined",), unknown=UNSAID),
        case("over_small", "x + x^3/a = 1", ("0", "1"), {"a": (1e-06, 1)}),
        case("quotient_at_closed_end", "(x^2 - a^2)/(x - a) = b", ("a", "9"),
             {"a": (0.5, 1), "b": (3, 4)}, wrong=("defined",), unknown=UNSAID),
        case("quotient_at_open_end", "(x^2 - a^2)/(x - a) = b", ("a", "9"), {"a": (0.5, 1), "b": (3, 4)}, ends="open-lower"),
    )


def _flat():
    """Slopes that vanish at one point."""
    return (
        # At a = sqrt(2).
        case("flat_root2", "x^3 = a^2 - 2", ("-2", "2"), {"a": (1, 2)}, wrong=("slope",)),
        case("fold_at_range_end", "x^2 = a - 1", ("0", "2"), {"a": (1, 2)}, wrong=("slope",)),
        # x = 0 at a = sqrt(2), the end of the range.
        case("fold_at_irrational_end", "x^2 = a^2 - 2", ("0", "2"), {"a": ("sqrt(2)", 2)}, wrong=("slope",)),
        case("cosine_steep", "x + 0.999*cos(x) = a", ("-2", "4"), {"a": (0, 3)}),
        case("inflection_clear", "(x - a)^3 + k*(x - a) = 0", ("-1", "2"), {"a": (0, 1), "k": (1e-06, 1)}),
        # cbrt(x)^3 has slope 1, though cbrt has none at 0.
        case("cbrt_hidden", "cbrt(x)^2*cbrt(x) = a - 1/3", ("-2", "2"), {"a": (0, 1)}),
    )


def _kinks():
    """Switches at the root."""
    return (
        case("switch_at_range_end", "where(a < 1, x - a, 2*x - 2*a) = 0", ("-1", "4"), {"a": (1, 2)}, wrong=("kink",)),
        case("switch_outside", "where(a < 1, x - a, 2*x - 2*a) = 0", ("-1", "4"), {"a": (1.000001, 2)}),
        case("max_param_end", "x = max(a, 0.5)", ("-1", "2"), {"a": (0.5, 1)}, wrong=("kink",)),
        case("max_param_clear", "x = max(a, 0.5)", ("-1", "2"), {"a": (0.500001, 1)}),
        case("where_root_clear", "where(x < 1, x, x^2) = a", ("0", "3"), {"a": (0, 0.999999999)}),
        case("tie_all", "max(x - a, b*(x - a)) = 0", ("-1", "2"), {"a": (0, 1), "b": (0.5, 0.9)}, wrong=("kink",), unknown=("slope",)),
    )


def _jumps():
    """Sign changes that are only jumps, and jumps beside a root."""
    return (
        case("gap_left_open", "where(x > a, x - a, -1) = 0", ("0", "4"), {"a": (1, 3)}, wrong=("exists",), unknown=(*NOWHERE, "kink")),
        # The same, with a zero at the jump itself.
        case("gap_left_closed", "where(x >= a, x - a, -1) = 0", ("0", "4"), {"a": (1, 3)}, wrong=("kink",), unknown=("slope",)),
        # A zero 1e-12 beyond the jump.
        case("gap_no", "where(x > a, x - a - 1e-12, -1) = 0", ("0", "4"), {"a": (1, 3)}),
        case("gap_irrational", "where(x^2 > a, x^2 - a, -1) = 0", ("0", "4"),
             {"a": (1, 3)}, wrong=("exists",), unknown=(*NOWHERE, "kink")),
        # The root would be at the jump for a from 2 to 4.
        case("sign_gap", "sign(x - 1) + 3*x = a", ("-1", "4"), {"a": (0, 2.5)}, wrong=("exists",), unknown=(*NOWHERE, "kink")),
        case("sign_clear", "sign(x - 1) + 3*x = a", ("-1", "4"), {"a": (0, 1.9)}),
        case("staircase", "x + sign(x - 1) + sign(x - 2) = a", ("0", "4"),
             {"a": (0.4, 0.6)}, wrong=("exists",), unknown=(*NOWHERE, "kink")),
        case("staircase_hit", "x + sign(x - 1) + sign(x - 2) = a", ("0", "4"), {"a": (1.4, 1.6)}),
        # The angle jumps across the negative axis.
        case("atan2_cut", "atan2(x, a) = 0", ("-2", "2"), {"a": (-1, -0.5)}, wrong=("exists",), unknown=NOWHERE),
        case("atan2_upper", "atan2(a, x) = b", ("-5", "5"), {"a": (0.1, 1), "b": (0.5, 2.5)}),
    )


def _open():
    """Signs next to open ends, wrong on an edge of the range or in a corner."""
    return (
        case("open_misses", "x = a", ("0", "1"), {"a": (0, 1)}, wrong=("exists",), unknown=NOWHERE, ends="open-upper"),
        case("open_clears", "x = a", ("0", "1"), {"a": (0, 0.999999)}, ends="open-upper"),
        case("open_sign_clear", "k/x - x = 0", ("0", "2"), {"k": (1e-06, 1)}, ends="open-lower"),
        case("open_two_poles_clear", "a/x + b/(x - 1) = k", ("0", "1"), {"a": (0.1, 1), "b": (0.001, 1), "k": (-10, -2)}, ends="open"),
        # sin(x)/x falls from 1 to 0.
        case("sinc_open", "sin(x)/x = a", ("0", "3.1"), {"a": (0.1, 0.9)}, ends="open-lower"),
        case("growth_open", "(exp(x) - 1)/x = a", ("0", "4"), {"a": (1.1, 9)}, ends="open-lower"),
        case("catenary_clear", "(cosh(x) - 1)/x = h", ("0", "2.466497137207526160142"), {"h": (0.5, 2)}, ends="open-lower"),
    )


def _edges():
    """Brackets without width, and ranges without points."""
    return (
        case("equal_corner", "x = (a + b)/2", ("a", "b"), {"a": (0, 1), "b": (1, 2)}, wrong=("defined",)),
        case("equal_clear", "x = (a + b)/2", ("a", "b"), {"a": (0, 1), "b": (1.000001, 2)}),
        case("equal_required_strict", "x = (a + b)/2", ("a", "b"), {"a": (0, 1), "b": (1, 2)}, require=("b > a",)),
    )


def _in_doubles():
    """True of real numbers, not of doubles: values that overflow, or vanish."""
    return (
        case("d_product", "(x*b)*(x*b)/(b*b) = a", ("0.5", "4"), {"a": (1, 9), "b": (1e+199, 1e+200)}, doubles=False),
        case("d_both_tiny", "(x*b)*(k*x) = a*b*k", ("0.5", "4"), {"a": (1, 9), "b": (1e-200, 1e-180), "k": (1e-200, 1e-180)},
             doubles=False),
        case("d_exp_under", "exp(-1000*x) = exp(-1000*a)", ("0", "1"), {"a": (0.5, 0.9)}, doubles=False),
        case("d_square_under", "x*b*b/b = a*b", ("0", "4"), {"a": (1, 3), "b": (1e-200, 1e-170)}, doubles=False),
    )
