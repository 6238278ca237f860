"""A corpus of root-finding problems as plain data: an equation in x, a bracket, and the root or the stated outcome.

`APS` holds the 154 problems of G. E. Alefeld, F. A. Potra and Y. Shi, Algorithm 748: enclosing zeros of continuous
functions, ACM Trans. Math. Softw. 21 (1995) 327-344, table I, numbered as there. The roots printed are those of SciPy's
collection of the same functions (scipy/optimize/_tstutils.py, BSD licence). `SPECIAL` holds one case for each promise.
"""

from dataclasses import dataclass


@dataclass(frozen=True)
class Case:
    id: str
    equation: str
    bracket: tuple                # two expressions
    root: str | None              # decimal or expression; None where there is none, or none in closed form
    outcome: str = "solved"       # "solved", "flat" or a failure's word
    ends: str = "closed"
    source: str = "exact by construction"


def _aps(family, number, equation, bracket, root):
    return Case(f"aps.{family:02}.{number:02}", equation, bracket, root, source="Alefeld, Potra and Shi 1995, table I")


def _pole_series():
    terms = " + ".join(f"{(2 * i - 5) ** 2}/(x - {i * i})^3" for i in range(1, 21))
    return f"-2*({terms})"


def _alefeld_potra_shi():
    cases = [_aps(1, 0, "sin(x) - x/2", ("pi/2", "pi"), "1.89549426703398094")]
    roots = ("3.02291534727305677", "6.68375356080807848", "11.2387016550022114", "19.6760000806234103",
             "29.8282273265047557", "41.9061161952894139", "55.9535958001430913", "71.9856655865877997",
             "90.0088685391666701", "110.026532748330197")
    for n, root in enumerate(roots, 1):
        cases.append(_aps(2, n - 1, _pole_series(), (f"{n}^2 + 1e-9", f"{n + 1}^2 - 1e-9"), root))
    for i, (a, b) in enumerate(((-40, -1), (-100, -2), (-200, -3))):
        cases.append(_aps(3, i, f"{a}*x*exp({b}*x)", ("-9", "31"), "0"))
    powers = [("0.2", n, ("0", "5")) for n in (4, 6, 8, 10, 12)]
    powers += [("1", n, ("0", "5")) for n in (4, 6, 8, 10, 12)]
    powers += [("1", n, ("-0.95", "4.05")) for n in (8, 10, 12, 14)]
    for i, (a, n, bracket) in enumerate(powers):
        cases.append(_aps(4, i, f"x^{n} - {a}", bracket, f"{a}^(1/{n})"))
    cases.append(_aps(5, 0, "sin(x) - 0.5", ("0", "1.5"), "pi/6"))
    roots = ("0.422477709641236709", "0.306699410483203705", "0.223705457654662959", "0.171719147519508369",
             "0.138257155056824066", "0.0346573590208538521", "0.0173286795139986315", "0.0115524530093324210",
             "0.00866433975699931573", "0.00693147180559945415")
    for i, (n, root) in enumerate(zip((1, 2, 3, 4, 5, 20, 40, 60, 80, 100), roots)):
        cases.append(_aps(6, i, f"2*x*exp(-{n}) - 2*exp(-{n}*x) + 1", ("0", "1"), root))
    roots = ("0.0384025518406218985", "0.00990000999800049949", "0.00249375003906201174")
    for i, (n, root) in enumerate(zip((5, 10, 20), roots)):
        cases.append(_aps(7, i, f"(1 + (1 - {n})^2)*x - (1 - {n}*x)^2", ("0", "1"), root))
    roots = ("0.5", "0.345954815848242059", "0.245122333753307220", "0.195547623536565629", "0.164920957276440960")
    for i, (n, root) in enumerate(zip((2, 5, 10, 15, 20), roots)):
        cases.append(_aps(8, i, f"x^2 - (1 - x)^{n}", ("0", "1"), root))
    roots = ("0.275508040999484394", "0.137754020499742197", "0.0103052837781564422", "0.00361710817890406339",
             "4.10872918496395375e-4", "2.59895758929076292e-5", "7.66859512218533719e-6")
    for i, (n, root) in enumerate(zip((1, 2, 4, 5, 8, 15, 20), roots)):
        cases.append(_aps(9, i, f"(1 + (1 - {n})^4)*x - (1 - {n}*x)^4", ("0", "1"), root))
    roots = ("0.401058137541547011", "0.516153518757933583", "0.539522226908415781", "0.548182294340655241",
             "0.552704666678487833")
    for i, (n, root) in enumerate(zip((1, 5, 10, 15, 20), roots)):
        cases.append(_aps(10, i, f"exp(-{n}*x)*(x - 1) + x^{n}", ("0", "1"), root))
    for i, n in enumerate((2, 5, 15, 20)):
        cases.append(_aps(11, i, f"({n}*x - 1)/(({n} - 1)*x)", ("0.01", "1"), f"1/{n}"))
    for i, n in enumerate((2, 3, 4, 5, 6, *range(7, 34, 2))):
        cases.append(_aps(12, i, f"x^(1/{n}) - {n}^(1/{n})", ("1", "100"), f"{n}"))
    cases.append(_aps(13, 0, "where(x < 0 or x > 0, x*exp(-1/(x*x)), 0)", ("-1", "4"), "0"))
    for n in range(1, 41):
        cases.append(_aps(14, n - 1, f"where(x >= 0, {n}/20*(x/1.5 + sin(x) - 1), -{n}/20)", ("-1e4", "pi/2"),
                          "0.623806518961612433"))
    for i, n in enumerate((*range(20, 41), *range(100, 1001, 100))):
        inner = f"where(x >= 0, exp(({n} + 1)*x/2*1e3) - 1.859, -0.859)"
        cases.append(_aps(15, i, f"where(x > 2e-3/(1 + {n}), exp(1) - 1.859, {inner})", ("-1e4", "1e-4"),
                          f"2*log(1.859)/(({n} + 1)*1e3)"))
    return tuple(cases)


APS = _alefeld_potra_shi()


def _special():
    """(equation, lower, upper, root, outcome, ends), one line each; the root is exact or a closed form."""
    huge, pole = "1e300", "1/(x - 1/3)"
    lines = [
        # roots at an end, touching it, or beyond it by the rounding of the end
        ("x - 1", "0", "1", "1"), ("x - 1", "1", "2", "1"), ("x*(1 - x)", "0", "1", "0"),
        ("x^2", "0", "1", "0", "flat"),
        ("x^2", "-1", "0", "0", "flat"), ("sin(x)", "1", "pi", "pi"), ("cos(x)", "0", "pi/2", "pi/2"),
        ("x - 1/3", "1/3", "1", "1/3"), ("x^2 - 2*x + 1", "1", "3", "1", "flat"),
        # a bracket of one point, and one that crosses itself by rounding or for good
        ("exp(x) - 2", "log(2)", "log(2)", "log(2)"), ("exp(x) - 3", "log(2)", "log(2)", None, "no_sign_change"),
        ("x - 1", "3*(1/3)*1.0000000000000002", "1", "1"), ("x - 1", "2", "1", None, "bad_bracket"),
        ("x - 1", "1/0", "2", None, "not_finite"), ("x - 1", "0", "log(-1)", None, "not_finite"),
        # open ends: poles, logarithms, a trivial root shut out, nothing in between
        ("1/x - 2", "0", "1", "1/2", "solved", "open-lower"),
        ("log(x) + 100", "0", "1", "exp(-100)", "solved", "open-lower"),
        ("x - x^2/2", "0", "3", "2", "solved", "open-lower"), ("1/x + 1/(x - 1)", "0", "1", "1/2", "solved", "open"),
        ("1/(1 - x) - 1e10", "0", "1", "1 - 1e-10", "solved", "open-upper"),
        ("1/(x - 1) + 1/(x - 2)", "1", "2", "3/2", "solved", "open"),
        ("x", "0", "1", None, "no_sign_change", "open-lower"), ("exp(-x)", "0", "1", None, "no_sign_change", "open"),
        ("log(x)", "0", "0", None, "no_sign_change", "open-lower"), ("log(-x)", "1", "2", None, "not_finite", "open"),
        # infinite and undefined at an end
        ("log(x)", "0", "2", "1"), ("1/x - 1", "0", "2", "1"), ("log(-x)", "1", "2", None, "not_finite"),
        # subnormal, enormous, across zero
        ("x - 3e-320", "1e-322", "1e-315", "3e-320"), ("x - 1e-322", "-1e-320", "1e-318", "1e-322"),
        ("x*1e200 - 1e-120", "1e-323", "1e-310", "1e-320"), ("log(x)", "1e-300", huge, "1"),
        ("log(x) - 600", "1e-300", huge, "exp(600)"), ("x - 1", "1e-300", huge, "1"),
        ("x*x - 2", "-1", huge, "sqrt(2)"),
        ("x", "-1e300", "1.7e308", "0"), ("x", "-1.7e308", "1.7e308", "0"), ("exp(x) - 1", "-700", "700", "0"),
        ("x^3 - 2", "-1e100", "2e100", "2^(1/3)"), ("exp(-x) - 1e-300", "0", "1e6", "300*log(10)"),
        # repeated roots
        ("x^3", "-1e100", "2e100", "0", "flat"), ("x^5", "-1", "2", "0", "flat"), ("(x - 1)^3", "0", "3", "1", "flat"),
        ("x^3 - 3*x^2 + 3*x - 1", "0", "3", "1", "flat"), ("(x - 0.3)^9", "0", "1", "0.3", "flat"),
        ("(x - 1)^2", "0", "3", None, "no_sign_change"),
        # vertical tangents
        ("cbrt(x)", "-1", "2", "0", "flat"), ("cbrt(x - 1/3)", "0", "1", "1/3", "flat"),
        ("sqrt(x) - 0.5", "0", "1", "1/4"),
        ("where(x < 1/3, -sqrt(1/3 - x), sqrt(x - 1/3))", "0", "1", "1/3", "flat"), ("sqrt(x)", "0", "1", "0", "flat"),
        # steps and poles, where there is no root
        ("where(x < 1/3, -1, 1)", "0", "1", None, "jump"), ("where(x > 1e-200, 1, -1)", "1e-300", huge, None, "jump"),
        ("where(x < 1/3, x - 2, x + 2)", "0", "1", None, "jump"), ("where(x < 1/3, x - 1, x)", "0", "1", None, "jump"),
        ("where(x < 1/3, 1e8*(x - 1), 1e8*x)", "-5", "7", None, "jump"), (pole, "0", "1", None, "jump"),
        ("-" + pole, "0", "1", None, "jump"), ("1/x", "-1", "2", None, "jump"), ("-1/x^3", "-1", "1e10", None, "jump"),
        ("sin(x)/cos(x)", "1", "2", None, "jump"),
        # slopes that mislead: steep, nearly level, turning
        ("exp(1000*(x - 1)) - 2", "0", "3", "1 + log(2)/1000"), ("x^20 - 1e-10", "0", "10", "0.1^(1/2)"),
        ("x^3 - 2*x + 2", "-1e6", "1e6", None, "solved"), ("(x - 1)*(x - 2)*(x - 3)", "0", "1.9", "1"),
        ("x*exp(-x*x)", "-20", "15", "0"),
        # the end's residual underflows to zero
        ("x*exp(-x*x)", "-30", "20", "0", "flat"),
    ]
    return tuple(Case(f"special.{i:02}", equation, (lower, upper), root, *rest)
                 for i, (equation, lower, upper, root, *rest) in enumerate(lines))


SPECIAL = _special()
