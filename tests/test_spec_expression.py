"""Expressions: what the text means, what is refused, and that every part knows its place."""

import ast

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rootwright.operations import OPERATIONS
from rootwright.spec.expression import (
    MAX_NESTING, MAX_OPERATIONS, Apply, ExpressionError, Name, Number, names_in, parse, postorder)

INFIX = {"add": "+", "sub": "-", "mul": "*", "div": "/", "pow": "^", "lt": "<", "le": "<=", "gt": ">", "ge": ">="}


def spelled(node):
    """The tree in prefix form, to read in a test."""
    if isinstance(node, Number):
        return node.text
    if isinstance(node, Name):
        return node.name
    return f"({' '.join([INFIX.get(node.op, node.op), *map(spelled, node.args)])})"


def tree(text, form="number"):
    return spelled(parse(text, form).tree)


def problems(text, form="number"):
    with pytest.raises(ExpressionError) as caught:
        parse(text, form)
    return caught.value.problems


# Precedence and associativity by the usual rules of mathematical notation; the power rules by the spec format.
@pytest.mark.parametrize("text, meaning", [
    ("a - b - c", "(- (- a b) c)"),
    ("a / b / c", "(/ (/ a b) c)"),
    ("a / b * c", "(* (/ a b) c)"),
    ("a + b * c ^ d", "(+ a (* b (^ c d)))"),
    ("a ^ b ^ c", "(^ a (^ b c))"),
    ("a ** b", "(^ a b)"),
    ("-x^2", "(neg (^ x 2))"),
    ("2^-3", "(^ 2 (neg 3))"),
    ("2^-3^2", "(^ 2 (neg (^ 3 2)))"),
    ("2^-3*4", "(* (^ 2 (neg 3)) 4)"),
    ("-a*b", "(* (neg a) b)"),
    ("a*-b + c", "(+ (* a (neg b)) c)"),
    ("a - -b", "(- a (neg b))"),
    ("(a + b)*c", "(* (+ a b) c)"),
    ("((a))", "a"),
    ("min(a, b, c)", "(min a b c)"),
    ("sqrt (a)", "(sqrt a)"),
    ("where(a < b and not c >= d or e <= 1, u, v)", "(where (or (and (< a b) (not (>= c d))) (<= e 1)) u v)"),
    ("where((a + 1) < b, u, v)", "(where (< (+ a 1) b) u v)"),
    ("where(not (a < b), u, v)", "(where (not (< a b)) u v)"),
])
def test_operators_bind_as_in_mathematics(text, meaning):
    assert tree(text) == meaning


@pytest.mark.parametrize("text", ["3", "3.", ".5", "0.5", "1e3", "1E+3", "1.5e-3", ".5e2", "007"])
def test_a_decimal_is_kept_as_written(text):
    assert parse(text).tree == Number(text, 0, len(text))


def test_unary_plus_leaves_no_trace():
    assert tree("+x - +y") == "(- x y)"


def test_line_breaks_and_tabs_are_space():
    assert tree("a\n  +\tb\r\n*c") == "(+ a (* b c))"


def test_the_form_is_never_rewritten():
    assert tree("x/x + 0*y + 1*z - z") == "(- (+ (+ (/ x x) (* 0 y)) (* 1 z)) z)"


def test_an_equation_is_left_minus_right():
    assert tree("y = -2*log10(x)", "equation") == "(- y (* (neg 2) (log10 x)))"
    assert tree("y - 1", "equation") == "(- y 1)"


def test_a_condition_joins_comparisons():
    assert tree("a*b <= 1 or not a > 2", "condition") == "(or (<= (* a b) 1) (not (> a 2)))"


@pytest.mark.parametrize("name", [key for key, row in OPERATIONS.items() if row.kind == "function"])
def test_every_function_of_the_table_takes_as_many_arguments_as_the_table_says(name):
    fewest, most = OPERATIONS[name].arity
    assert tree(f"{name}({', '.join('abc'[:fewest])})") == f"({name} {' '.join('abc'[:fewest])})"
    assert "argument" in problems(f"{name}({', '.join('abc'[:fewest - 1])})")[0].message
    if most is not None:
        assert "argument" in problems(f"{name}({', '.join('abcd'[:most + 1])})")[0].message


@pytest.mark.parametrize("word", ["e", "I", "root", "slope", "p", "lambda_1", "andy", "nothing", "order"])
def test_ordinary_names_stay_names(word):
    assert tree(word) == word


@pytest.mark.parametrize("text", [
    "", " ", "(", ")", "()", "a +", "+", "a b", "2x", "2 x", "2(x)", "(a)(b)", "a,b", "(a, b)", "max(,a)", "max(a,)",
    "max(a b)", "1_000", "0x10", "1.2.3", "1..2", "1e", "1e+", "..5", "1d3", "a == b", "a = b", "a != b", "a // b",
    "a & b", "a | b", "a % b", "a[1]", "a.b", "a;b", "a'", '"a"', "a := b", "@a", "#a", "$a", "`a`", "{{a}}", "_a",
    "__import__('os')", "lambda: 1", "a if b else c", "\u03b1", "a\u00a0+b", "a\u2212b", "a\u00d7b", "a\u200b",
    "\u202ea", "\uff11", "a\0b", "a\x0bb", "1 and 2", "not a", "a and b", "a < b", "(a < b) + 1", "sin(a < b)",
    "where(a, b, c)", "where(a < b, c < d, e)", "where(a < b < c, 1, 2)",
    "(a < b) < c", "a < (b < c)", "f(x)", "and", "or a", "not", "a and", "a ^ ^ b", "a * / b",
])
def test_nonsense_is_an_error_with_a_place_inside_the_text(text):
    for problem in problems(text):
        assert 0 <= problem.start <= problem.end <= len(text)
        assert problem.message and problem.help and "\n" not in problem.message + problem.help


@pytest.mark.parametrize("text, form, place, words", [
    ("a < b < c", "condition", "<", "chained"),
    ("a == b", "equation", "==", "'=='"),
    ("a = b = c", "equation", "=", "second"),
    ("a + snh(b)", "number", "snh", "snh"),
    ("a + (b < c)", "number", "(b < c)", "number is needed"),
    ("a*(b + 1", "number", "(", "never closed"),
    ("where(x, 1, 2)", "number", "x", "condition is needed"),
    ("a + 2b", "number", "2b", "not a number"),
])
def test_the_place_is_the_smallest_wrong_part(text, form, place, words):
    problem = problems(text, form)[-1]
    assert text[problem.start:problem.end] == place
    assert words in problem.message


@pytest.mark.parametrize("text, suggestion", [
    ("snh(x)", "sinh"), ("ln(x)", "log"), ("arctan(x)", "atan"), ("Sqrt(x)", "sqrt"), ("maximum(a, b)", "max"),
    ("2x", "2*x"), ("1_000", "1000"), ("1.5d-3", "1.5e-3"), ("1D3", "1e3"), ("a\u2212b", "-"), ("x\u00b2", "^2"),
    ("min(a)", "min(a, b, ...)"),
])
def test_the_help_says_what_would_be_right(text, suggestion):
    assert suggestion in problems(text)[0].help


def test_every_wrong_call_of_an_expression_is_reported():
    found = problems("sin(a, b) + foo(c) + atan2(d) + (a < b)")
    assert [problem.message.split()[0] for problem in found] == ["sin", "no", "atan2", "a"]


def test_spans_include_the_parentheses_of_arguments():
    text = " (a + b) * sin( c )"
    product = parse(text).tree
    assert text[product.start:product.end] == "(a + b) * sin( c )"
    assert [text[part.start:part.end] for part in product.args] == ["a + b", "sin( c )"]


def test_names_come_from_left_to_right():
    assert [name.name for name in names_in(parse("c + where(b < a, pi, c)").tree)] == ["c", "b", "a", "pi", "c"]


def test_a_sum_of_thousands_of_terms_needs_no_recursion():
    expression = parse("+".join(["a"] * (MAX_OPERATIONS + 1)))
    assert sum(1 for _ in postorder(expression.tree)) == 2 * MAX_OPERATIONS + 1


@pytest.mark.parametrize("text", [
    "+".join(["a"] * (MAX_OPERATIONS + 2)),
    "max(" + ",".join(["a"] * (MAX_OPERATIONS + 2)) + ")",
    "+" * (MAX_OPERATIONS + 2) + "a",
])
def test_too_many_operations_are_refused(text):
    assert "20,000 operations" in problems(text)[0].message


@pytest.mark.parametrize("deep", ["({})", "-{}", "2^{}", "sin({})", "where(a < 1, 0, {})", "2 - (1 - {})"])
def test_nesting_is_bounded_and_the_help_says_what_to_do(deep):
    text = "a"
    for _ in range(MAX_NESTING):
        text = deep.format(text)
    parse(text)
    problem = problems(deep.format(text))[0]
    assert "200 levels" in problem.message and "[definitions]" in problem.help


def test_ten_thousand_parentheses_are_a_clear_error():
    assert "200 levels" in problems("(" * 10_000 + "a" + ")" * 10_000)[0].message


# Python's own parser as the judge of arithmetic: it shares precedence and associativity with the spec language
# (The Python Language Reference, section 6.17) for these operators.
def python_tree(node):
    if isinstance(node, ast.Expression):
        return python_tree(node.body)
    if isinstance(node, ast.Constant):
        return str(node.value)
    if isinstance(node, ast.Name):
        return node.id
    if isinstance(node, ast.UnaryOp):
        inner = python_tree(node.operand)
        return inner if isinstance(node.op, ast.UAdd) else f"(neg {inner})"
    symbol = {ast.Add: "+", ast.Sub: "-", ast.Mult: "*", ast.Div: "/", ast.Pow: "^"}[type(node.op)]
    return f"({symbol} {python_tree(node.left)} {python_tree(node.right)})"


ARITHMETIC = st.recursive(
    st.sampled_from(["a", "b", "1", "23"]),
    lambda inner: st.one_of(
        st.tuples(inner, st.sampled_from(["+", "-", "*", "/", "**"]), inner).map(" ".join),
        st.tuples(st.sampled_from(["-", "+"]), inner).map("".join),
        inner.map("({})".format)),
    max_leaves=12)


@given(ARITHMETIC)
def test_arithmetic_means_what_python_reads(text):
    assert tree(text) == python_tree(ast.parse(text, mode="eval"))


@given(st.text(alphabet="ab12.e+-*/^()<>=,_ \n\u00b2&sin", max_size=40))
def test_any_text_is_a_tree_or_problems(text):
    for form in ("number", "condition", "equation"):
        try:
            expression = parse(text, form)
        except ExpressionError as error:
            assert error.problems
        else:
            assert all(isinstance(node, (Number, Name, Apply)) for node in postorder(expression.tree))
