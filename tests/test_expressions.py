"""The expression reader against Python's own arithmetic, `cmath`, SymPy, and hostile text."""

from __future__ import annotations

import cmath
import math
import string

import numpy as np
import pytest
from hypothesis import assume, example, given
from hypothesis import strategies as st

from gatewright.errors import ExpressionError
from gatewright.expressions import CONSTANTS, FUNCTIONS, MAX_DEPTH, MAX_LENGTH, MAX_TOKENS, parse

CMATH = {
    "arccos": cmath.acos, "arcsin": cmath.asin, "arctan": cmath.atan, "cos": cmath.cos, "exp": cmath.exp,
    "ln": cmath.log, "log": cmath.log, "sin": cmath.sin, "sqrt": cmath.sqrt, "tan": cmath.tan,
}  # fmt: skip


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("0", 0), ("2", 2), (".5", 0.5), ("5.", 5), ("1e-3", 1e-3), ("1.5E+2", 150), ("1_000", 1000), ("0x1F", 31),
        ("0b101", 5), ("0o17", 15), ("pi", math.pi), ("π", math.pi), ("tau", math.tau), ("τ", math.tau),
        ("euler", math.e), ("ℇ", math.e), ("-2^2", -4), ("2^3^2", 512), ("2**-1", 0.5), ("-2**-2", -0.25),
        ("(-2)^2", 4), ("2--1", 3), ("-+-3", 3), ("2*-3", -6), ("1/2", 0.5), ("6/2/3", 1), ("6-2-3", 1),
        ("3*pi/8", 3 * math.pi / 8), ("-pi/2", -math.pi / 2), ("2^0.5", math.sqrt(2)), ("i", 1j), ("j", 1j),
        ("0.5+0.5i", 0.5 + 0.5j), ("1e-3 - 2i", 1e-3 - 2j), ("2i^2", -4), ("-i", -1j), ("(1+i)*(1-i)", 2),
        ("sqrt(-1)", 1j), ("ln(-1)", math.pi * 1j), ("exp(i*pi)", cmath.exp(1j * math.pi)), (" 1 +\t2\n", 3),
        ("arcsin(1)", math.pi / 2), ("0^0", 1),
    ],
)  # fmt: skip
def test_values(text: str, value: complex) -> None:
    assert parse(text).value() == pytest.approx(value, rel=1e-15, abs=1e-15)
    assert complex(parse(text).evaluate()) == pytest.approx(value, rel=1e-15, abs=1e-15)
    assert complex(parse(text).to_sympy()) == pytest.approx(value, rel=1e-14, abs=1e-15)


NUMBERS = st.integers(0, 9).map(str) | st.floats(0, 100).map(repr)


def grow(inner: st.SearchStrategy[str]) -> st.SearchStrategy[str]:
    """Larger expressions, in the part of the grammar that is Python's as well."""
    return (
        st.tuples(inner, st.sampled_from("+-*/"), inner).map(" ".join)
        | st.tuples(inner, st.sampled_from("0123")).map("**".join)
        | inner.map("-{}".format)
        | inner.map("({})".format)
    )


@given(st.recursive(NUMBERS, grow, max_leaves=12))
@example("-2**2**3 - -1 / 4")
def test_precedence_is_that_of_python(text: str) -> None:
    """Python's language reference, section 6.17; the texts are made here, of numbers and operators only."""
    assert not set(text) - set(string.digits + ".e+-*/() ")
    try:
        # Python's integers are exact and ours are floats.
        expected = eval(text)
        assert abs(expected) < 1e300
    except (ArithmeticError, AssertionError):
        return
    try:
        value = parse(text).value()
    except ExpressionError as problem:
        assert "finite" in problem.what or "deep" in problem.what  # an intermediate result beyond floats
        return
    assert value == pytest.approx(expected, rel=1e-9, abs=1e-9) or abs(expected) > 2**53


@given(st.sampled_from(FUNCTIONS), st.complex_numbers(max_magnitude=5, allow_nan=False))
def test_functions_against_cmath(name: str, z: complex) -> None:
    assume(name not in ("ln", "log") or abs(z) > 1e-300)
    # Branch cuts and poles belong to either side.
    assume(abs(z.imag) > 1e-3 and abs(z.real) > 1e-3)
    expression = parse(f"{name}(x)", names=["x"])
    expected = CMATH[name](z)
    assert complex(expression.evaluate({"x": z})) == pytest.approx(expected, rel=1e-12)
    literal = f"{name}({z.real!r} + ({z.imag!r})*i)"
    assert parse(literal).value() == pytest.approx(expected, rel=1e-12)


@given(st.sampled_from(FUNCTIONS), st.floats(-5, 5, allow_subnormal=False))
def test_functions_of_reals_and_sympy(name: str, x: float) -> None:
    x = round(x, 6)
    expression = parse(f"{name}(({x!r}))")
    try:
        expected = CMATH[name](x)
    except ValueError:
        with pytest.raises(ExpressionError):
            expression.value()
        return
    assert expression.value() == pytest.approx(expected, rel=1e-12, abs=1e-15)
    assert complex(expression.evaluate()) == pytest.approx(expected, rel=1e-12, abs=1e-15)
    if name not in ("arccos", "arcsin") or abs(x) <= 1:  # beyond, SymPy takes the other side of the cut
        assert complex(expression.to_sympy()) == pytest.approx(expected, rel=1e-9, abs=1e-12)


def test_real_arguments_stay_real_where_they_can() -> None:
    assert parse("sqrt(x)", names=["x"]).evaluate({"x": [4.0, -4.0]}).tolist() == [2, 2j]
    assert parse("x^y", names="xy").evaluate({"x": [-8.0, -8.0], "y": [2.0, 3.0]}).tolist() == [64, -512]
    cube_root = parse("x^(1/3)", names="x").evaluate({"x": -8.0})
    assert complex(cube_root) == pytest.approx(1 + math.sqrt(3) * 1j)


def test_names_and_broadcasting() -> None:
    expression = parse("exp(-i*theta/2) * b + 0*theta", names=["a", "theta", "b"])
    assert expression.names == ("theta", "b")
    theta, b = np.linspace(0, 3, 5), np.array([[1.0], [2.0]])
    result = expression.evaluate({"theta": theta, "b": b, "unused": np.zeros((3, 1, 1))})
    assert result.shape == (3, 2, 5)
    np.testing.assert_allclose(result[1], np.exp(-0.5j * theta) * b, atol=1e-15)
    constant = parse("i").evaluate({"theta": theta})
    assert constant.shape == (5,) and constant.dtype == np.complex128 and (constant == 1j).all()
    constant[0] = 0  # its own memory


def test_inputs_are_not_modified() -> None:
    values = np.array([1, 2])
    parse("-x", names="x").evaluate({"x": values})
    assert values.tolist() == [1, 2]
    np.testing.assert_allclose(parse("x^-1", names="x").evaluate({"x": values}), [1, 0.5])


def test_real() -> None:
    assert parse("a*2", names="a").real({"a": 0.25}) == 0.5
    assert parse("exp(i*pi)").real() == pytest.approx(-1)
    with pytest.raises(ExpressionError, match="is not real"):
        parse("sqrt(-1)", imaginary=False).real()
    with pytest.raises(ExpressionError, match="no value for 'a'"):
        parse("a", names="a").real()


def test_sympy_is_exact() -> None:
    import sympy

    t = sympy.Symbol("t", real=True)
    assert parse("cos(t/2)^2 + sin(t/2)^2", names="t").to_sympy().simplify() == 1
    assert parse("0.1*t + 1/3", names="t").to_sympy() == t / 10 + sympy.Rational(1, 3)
    assert parse("sqrt(2)*pi*euler*i").to_sympy() == sympy.sqrt(2) * sympy.pi * sympy.E * sympy.I


def test_options() -> None:
    with pytest.raises(ExpressionError, match="unknown name 'i'"):
        parse("i", imaginary=False)
    assert parse("i", names="i", imaginary=False).real({"i": 2.0}) == 2
    assert parse("tau", names=["tau"]).real({"tau": 2.0}) == 2
    for name in ("pi", "sin", "i", "j"):
        with pytest.raises(ExpressionError, match="cannot be the name of a variable"):
            parse("1", names=[name])
    with pytest.raises(ExpressionError, match=r"a power written '\*\*'"):
        parse("2^3", power=["**"])
    assert parse("2^3", power=["^"]).value() == 8


@pytest.mark.parametrize(
    ("text", "column", "message"),
    [
        ("", 1, "empty"), ("   ", 1, "empty"), ("1+", 3, "ends early"), ("(1", 1, "not closed"),
        ("1)", 2, "not opened"),
        ("1 2", 3, "operator is missing"), ("2(3)", 2, "operator is missing"), ("1 i", 3, "operator is missing"),
        ("()", 2, "value is missing"), ("*2", 1, "value is missing"), ("sin 2", 5, "is a function"),
        ("2 + sin", 8, "ends early"), ("1,2", 2, "operator is missing"), ("1e999", 1, "cannot be read"),
        ("1__0", 1, "cannot be read"), ("2 + coss(1)", 5, "did you mean 'cos'"), ("1/0", 2, "no finite value"),
        ("0^-1", 2, "no finite value"), ("2*ln(0)", 3, "no finite value"), ("9**9**9", 2, "no finite value"),
        ("exp(1000)", 1, "no finite value"), ("1e200*1e200", 6, "no finite value"), ("1/(1/0)", 5, "no finite value"),
        ("(1e200*i)*(1e200*i)", 10, "no finite value"), ("__import__('os')", 1, "unknown name '__import__'"),
        ("().__class__", 2, "value is missing"), ("pi.real", 3, "operator is missing"),
        ("1 if 1 else 2", 3, "operator"),
        ("lambda: 1", 1, "unknown name"), ("a=1", 1, "unknown name"), ("\0", 1, "value is missing"),
        ("nan", 1, "unknown name"),
        ("(" * 10_000, MAX_DEPTH + 1, "nested too deeply"), ("-" * 9_999 + "1", MAX_DEPTH + 1, "nested too deeply"),
        ("2^" * 3_000 + "2", 2 * MAX_DEPTH + 2, "nested too deeply"), ("9" * (MAX_LENGTH + 1), 1, "too long"),
        ("1+" * (MAX_TOKENS // 2) + "1", MAX_TOKENS + 1, "too many parts"),
    ],
)  # fmt: skip
def test_bad_text_is_one_clear_error(text: str, column: int, message: str) -> None:
    with pytest.raises(ExpressionError) as caught:
        parse(text).value()
    assert message in str(caught.value)
    assert caught.value.column == column
    assert "\n" not in str(caught.value) and len(str(caught.value)) < 400
    for form in ("evaluate", "to_sympy"):
        if message == "no finite value" and form == "to_sympy" and "/0" not in text and "9**9**9" != text:
            continue  # SymPy holds numbers that floats do not
        with pytest.raises(ExpressionError):
            getattr(parse(text), form)()


def test_values_that_are_not_finite() -> None:
    for bad in (np.nan, np.inf, [0.0, np.nan], 1j * np.inf):
        with pytest.raises(ExpressionError, match="no finite value"):
            parse("x+1", names="x").evaluate({"x": bad})
    with pytest.raises(ExpressionError, match="no finite value"):
        parse("1/x", names="x").evaluate({"x": [1.0, 0.0]})
    with pytest.raises(ExpressionError, match="text"):
        parse(3)  # type: ignore[arg-type]


def test_long_flat_expressions_are_fine() -> None:
    assert parse("1" + "+1" * 1500).value() == 1501
    assert parse("(" * 99 + "1" + ")" * 99).value() == 1


ALPHABET = st.sampled_from(
    ["1", "2.5", "9", "pi", "i", "x", "sin", "sqrt", "exp", "(", ")", "+", "-", "*", "/", "^", "**", " ", ",", "§"]
)


@given(st.lists(ALPHABET, max_size=25).map("".join) | st.text(max_size=30))
def test_any_text_is_read_or_refused(text: str) -> None:
    try:
        expression = parse(text, names=["x"])
        expression.evaluate({"x": 0.5})
        expression.real({"x": 0.5})
    except ExpressionError as problem:
        assert str(problem)
        assert problem.column is not None


def test_tables() -> None:
    assert set(CMATH) == set(FUNCTIONS)
    assert {parse(name).value() for name in CONSTANTS} == {math.pi, math.tau, math.e}
