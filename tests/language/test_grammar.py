"""The grammar: meaning of expressions, places in errors, bounds."""

import ast
import operator
import time

import pytest
import sympy
from hypothesis import given, settings
from hypothesis import strategies as st

from frg.errors import InputError, Place
from frg.language.algebra import Refused, constant_value, substitute
from frg.language.grammar import parse
from frg.language.names import NameTable
from frg.language.shapetext import parse_custom_shape
from frg.language.wording import expression_text

x, y, rho, tau = sympy.symbols("x y rho tau")
U, V = sympy.Function("U"), sympy.Function("V")
NAMES = NameTable(
    names={"x": "parameter", "y": "parameter", "rho": "coordinate", "tau": "coordinate", "phi": "field"},
    functions={"U": 1, "V": 2},
    differentiable=frozenset({"phi"}),
    lorentz=("mu", "nu"),
    thresholds=True,
)


def read(text):
    return parse(text, names=NAMES, place=Place(source="file", line=7, column=10))


def error_of(text):
    with pytest.raises(InputError) as caught:
        read(text)
    assert caught.value.remedy
    assert caught.value.place.source == "file"
    return caught.value


@pytest.mark.parametrize(
    ("text", "meaning"),
    [
        ("1/3", sympy.Rational(1, 3)),
        ("0.1", sympy.Rational(1, 10)),
        ("1.25e-2", sympy.Rational(1, 80)),
        (".5", sympy.Rational(1, 2)),
        ("-x^2", -(x**2)),
        ("(-x)^2", x**2),
        ("2^3^2", sympy.Integer(512)),
        ("2**-x", 2 ** (-x)),
        ("x - y - 1", x - y - 1),
        ("x/y/2", x / y / 2),
        ("x/y*2", 2 * x / y),
        ("--x", x),
        ("2*-x", -2 * x),
        ("sqrt(8)", 2 * sympy.sqrt(2)),
        ("sqrt(x) + pi", sympy.sqrt(x) + sympy.pi),
        ("exp(x)*log(y)", sympy.exp(x) * sympy.log(y)),
        ("sin(pi/6) + cos(0) + tan(x)", sympy.Rational(3, 2) + sympy.tan(x)),
        ("tan(x + pi/2)", -1 / sympy.tan(x)),
        ("gamma(5) + zeta(2)", 24 + sympy.pi**2 / 6),
        ("U(rho)", U(rho)),
        ("U(rho + 1)", U(rho + 1)),
        ("V(rho, 2*tau)", V(rho, 2 * tau)),
        ("diff(U(rho), rho)", sympy.Derivative(U(rho), rho)),
        ("diff(U(rho), rho, 2)", sympy.Derivative(U(rho), rho, 2)),
        ("diff(diff(U(rho), rho), rho)", sympy.Derivative(U(rho), rho, 2)),
        ("diff(V(rho,tau), tau, rho)", sympy.Derivative(V(rho, tau), rho, tau)),
        ("diff(V(rho,tau), rho, 3, tau, 2)", sympy.Derivative(V(rho, tau), (rho, 3), (tau, 2))),
        ("d(phi, mu)^2", sympy.Function("d")(*sympy.symbols("phi mu")) ** 2),
        ("l(1, x)", sympy.Function("l")(1, x)),
        ("l(0, x, y)", sympy.Function("l")(0, x, y)),
        ("x\n + y", x + y),
    ],
)
def test_meaning(text, meaning):
    assert read(text) == meaning


def test_decimals_are_exact():
    assert read("0.1 + 0.2") == sympy.Rational(3, 10)
    assert not read("2.7*x").has(sympy.Float)


@pytest.mark.parametrize(
    ("text", "column", "fragment"),
    [
        ("x + rhp", 14, "rhp"),
        ("x +", 13, "x +"),
        ("x ++ * y", 15, "*"),
        ("(x + y", 10, "(x + y"),
        ("x)", 11, ")"),
        ("2x", 11, "x"),
        ("x y", 12, "y"),
        ("x^^y", 12, "^"),
        ("x + W(rho)", 14, "W"),
        ("x(2)", 10, "x"),
        ("1 + U", 14, "U"),
        ("U(rho, tau)", 10, "U(rho, tau)"),
        ("l(x)", 10, "l(x)"),
        ("sin", 10, "sin"),
        ("1 + sin()", 14, "sin()"),
        ("mu", 10, "mu"),
        ("d(phi)", 10, "d(phi)"),
        ("d(chi, mu)", 12, "chi"),
        ("d(phi, rho)", 17, "rho"),
        ("d(phi^2, mu)", 15, "^"),
        ("diff(x, x)", 10, "diff(x, x)"),
        ("diff(U(rho), tau)", 10, "diff(U(rho), tau)"),
        ("diff(U(rho))", 10, "diff(U(rho))"),
        ("diff(U(rho), rho, 2, 2)", 10, "diff(U(rho), rho, 2, 2)"),
        ("diff(U(rho), rho, 21)", 10, "diff(U(rho), rho, 21)"),
        ("x + 'a'", 14, "'"),
        ("x ; y", 12, ";"),
        ("__import__", 10, "__import__"),
        ("x + 1/0", 16, "0"),
        ("1/(x - x)", 12, "(x - x)"),
        ("x^y^log(0)", 14, "log(0)"),
    ],
)
def test_errors_name_the_column_and_the_text(text, column, fragment):
    error = error_of(text)
    assert (error.place.line, error.place.column, error.place.text) == (7, column, fragment)


def test_lines_of_a_long_text():
    error = error_of("x +\n  y +\n   zz")
    assert (error.place.line, error.place.column, error.place.text) == (9, 4, "zz")


def test_unknown_name_gives_the_nearest():
    assert "did you mean 'rho'" in error_of("rhoo").remedy
    assert "did you mean 'sqrt'" in error_of("sqr(x)").remedy
    assert "[running]" in error_of("Q(rho)").remedy


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("\u0445 + 1", ["U+0445", "CYRILLIC", "'x'"]),
        ("rh\u03bf", ["U+03BF", "GREEK", "'o'"]),
        ("x \u2212 1", ["U+2212", "MINUS", "'-'"]),
        ("x\u00b2", ["U+00B2", "'^2'"]),
        ("\uff58", ["U+FF58", "FULLWIDTH", "'x'"]),
        ("\u03c1", ["U+03C1", "rho"]),
        ("\U0001f600", ["U+1F600"]),
        ("x\u00a0+ 1", ["U+00A0", "NO-BREAK SPACE"]),
    ],
)
def test_look_alikes_are_named(text, words):
    message = str(error_of(text))
    for word in words:
        assert word in message


@pytest.mark.parametrize(
    "text",
    [
        "9^9^9^9",
        "10^(10^10)",
        "(10^300)^300",
        "((((2^999)^999)^999)^999)",
        "1e999999",
        "1e-999999",
        "1" * 400,
        "1e300*1e300",
        "x*1e300*1e300",
        "gamma(10^9)",
        "gamma(171)",
        "zeta(10^9)",
        "zeta(-10^6)",
        "exp(10^6)",
        "exp(10^6*log(3))*x",
        "exp(exp(exp(exp(9))))",
        "exp(exp(exp(9)))^x",
        "2^(1000*log(3)/log(2))",
        "(2*x)^1000*(3*x)^999*(7*y)^999*(5*x)^999*(11*x)^900*(13*x)^900",
        "((x^1000)^1000)^1000",
        "x^1000*x^1000",
        "x^(10^10*y)",
        "(2^900+1)^(1/3)",
        "+".join(f"1/{k}^99" for k in range(900, 1300)),
        "*".join(["(1e200*x)"] * 300),
        "(" * 100 + "x" + ")" * 100,
        "(" * 3000,
        "x^" * 100 + "x",
        "-" * 5000 + "x",
        "x+" * 10000 + "x",
        "sin(" * 60 + "x" + ")" * 60,
        "gamma(0)",
        "gamma(-3)",
        "gamma(x - x)",
        "zeta(1)",
        "log(0)",
        "log(-1)",
        "1/0",
        "0^-1",
        "sqrt(-1)",
        "(-8)^(1/3)",
        "tan(pi/2)",
        "1/sin(pi)",
        "exp((x + 10^200) - x)",
    ],
)
def test_undefined_or_huge_is_an_error_at_once(text):
    start = time.perf_counter()
    error_of(text)
    assert time.perf_counter() - start < 1.0


def test_long_honest_expressions_are_read_quickly():
    start = time.perf_counter()
    total = read("+".join(f"x^{k % 50}*y/{k}" for k in range(1, 350)))
    assert len(total.args) == 50
    assert time.perf_counter() - start < 1.0


def test_regulator_shape():
    a, b = sympy.symbols("a b")
    assert parse_custom_shape("a*exp(-y)*(1+b*y)", ["a", "b"]) == a * sympy.exp(-y) * (1 + b * y)
    with pytest.raises(InputError, match="unknown name 'b'"):
        parse_custom_shape("a*b", ["a"])
    with pytest.raises(InputError, match="cannot name"):
        parse_custom_shape("y", ["y"])


def test_substitution_is_bounded():
    nine = sympy.Integer(9)
    assert substitute(x**2 + U(y), {"x": nine, "y": nine}) == 81 + U(9)
    with pytest.raises(Refused, match="exponent"):
        substitute(x ** (x**x), {"x": nine})
    with pytest.raises(Refused, match="division by zero"):
        substitute(1 / (x - 9), {"x": nine})


leaves = st.one_of(
    st.sampled_from([x, y, sympy.pi]),
    st.builds(sympy.Rational, st.integers(-9, 9), st.integers(1, 9)),
)


def _grow(children):
    smooth = [sympy.exp, sympy.sin, sympy.cos, U, lambda e: sympy.sqrt(e**2 + 1)]
    return st.one_of(
        st.builds(lambda a, b: a + b, children, children),
        st.builds(lambda a, b: a * b, children, children),
        st.builds(lambda a, b: a / (b**2 + 1), children, children),
        st.builds(lambda a, n: (a + x) ** n, children, st.integers(0, 4)),
        st.builds(lambda f, a: f(a), st.sampled_from(smooth), children),
        st.just(sympy.Derivative(V(rho, tau), rho, (tau, 2))),
    )


@settings(max_examples=150, deadline=None)
@given(st.recursive(leaves, _grow, max_leaves=8))
def test_expression_to_text_and_back(expression):
    # reading applies the bounds, so what they refuse is not part of the statement
    text = expression_text(expression)
    try:
        once = read(text)
    except InputError as error:
        assert any(word in error.message for word in ("large", "digits", "too high"))
        return
    assert once == expression


_OPERATORS = {
    ast.Add: operator.add,
    ast.Sub: operator.sub,
    ast.Mult: operator.mul,
    ast.Div: operator.truediv,
    ast.Pow: operator.pow,
}


def _value_by_python(text):
    """The value under the precedence rules of Python's own parser."""

    def value(node):
        if isinstance(node, ast.BinOp):
            return _OPERATORS[type(node.op)](value(node.left), value(node.right))
        return -value(node.operand) if isinstance(node, ast.UnaryOp) else node.value

    return value(ast.parse(text.replace("^", "**"), mode="eval").body)


digits = st.sampled_from(["1", "2.5", "3", "0.125", "4"])


@settings(max_examples=150, deadline=None)
@given(
    st.recursive(
        digits,
        lambda inner: st.one_of(
            st.builds(lambda a, o, b: f"{a} {o} {b}", inner, st.sampled_from(list("+-*/")), inner),
            st.builds(lambda a: f"(-{a})", inner),
            st.builds(lambda a: f"-{a}", inner),
            st.builds(lambda a: f"({a})^2", inner),
            st.builds(lambda a: f"({a})", inner),
        ),
        max_leaves=10,
    )
)
def test_precedence_agrees_with_python(text):
    try:
        wanted = _value_by_python(text)
    except ZeroDivisionError:
        wanted = None
    try:
        found = constant_value(read(text))
    except InputError as error:
        assert wanted is None or abs(wanted) > 1e290 or "digits" in error.message or "zero" in error.message
        return
    assert found == pytest.approx(wanted, rel=1e-9, abs=1e-9)
