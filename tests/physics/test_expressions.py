"""What an expression may say, what it may not, and what it is worth."""

import ast
import math
import pickle

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from wavepack.physics.expressions import (
    DEEPEST,
    LONGEST,
    ExpressionError,
    compile_expression,
)

X = np.linspace(-2.0, 2.0, 9)
Y = np.linspace(0.5, 1.5, 5)[:, None]


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("2", 2.0),
        ("  1 + 2*3 ", 7.0),
        ("2**3**2", 512.0),
        ("-2**2", -4.0),
        ("7/2", 3.5),
        ("pi", math.pi),
        ("1 < 2 < 3", 1.0),
        ("1 < 3 < 2", 0.0),
        ("2 > 1 and not 3 == 4", 1.0),
        ("0 or 0", 0.0),
        ("1 != 1 or 2 >= 2", 1.0),
        ("where(1 > 2, 5, 6)", 6.0),
        ("(2 > 1)*3 + (2 > 1)", 4.0),
        ("-(2 > 1)", -1.0),
        ("min(3, 2) + max(3, 2)", 5.0),
        ("hypot(3, 4)", 5.0),
        ("atan2(1, 1)*4", math.pi),
        ("exp(0) + sin(0) + cos(0) + abs(-1)", 3.0),
        ("floor(1.5) + ceil(1.5) + round(1.2) + sign(-3)", 3.0),
        ("cosh(1)**2 - sinh(1)**2", 1.0),
        ("erf(1) + erfc(1)", 1.0),
        ("log10(100) + log2(8)", 5.0),
        ("1e3", 1000.0),
        ("a*x", 6.0),
        ("1 +\n 2\t* 3", 7.0),
    ],
)
def test_expressions_have_the_value_of_arithmetic(text: str, value: float) -> None:
    """Each construct gives what arithmetic says."""
    expression = compile_expression(text, parameters={"a": 2.0})
    assert float(expression.evaluate(x=3.0, y=0.0, t=0.0)) == pytest.approx(value, rel=1e-15)


def test_arrays_broadcast() -> None:
    """An open mesh gives the values of the whole plane."""
    text = "0.5*(x**2 + y**2) + 3*exp(-((x - 1)**2 + y**2)/0.5)*cos(4*x)"
    found = compile_expression(text).evaluate(x=X, y=Y)
    wanted = 0.5 * (X**2 + Y**2) + 3 * np.exp(-((X - 1) ** 2 + Y**2) / 0.5) * np.cos(4 * X)
    np.testing.assert_array_equal(found, wanted)


def test_conditions_hold_point_by_point() -> None:
    """Comparisons, logic and where act on each point alone."""
    inside = compile_expression("-1 <= x < 1 and not x == 0").evaluate(x=X)
    np.testing.assert_array_equal(inside, ((X >= -1) & (X < 1) & (X != 0)).astype(float))
    chosen = compile_expression("where(x > 0, x, -2*x)").evaluate(x=X)
    np.testing.assert_array_equal(chosen, np.where(X > 0, X, -2 * X))


@pytest.mark.parametrize(
    "text", ["1/x", "log(x)", "(-8)**0.5", "9**9**9**9", "exp(1000)", "0/0", "sqrt(-1)", "asin(2)"]
)
def test_undefined_values_are_not_finite(text: str) -> None:
    """Where it has no value an expression gives inf or nan: no error, nothing complex."""
    value = compile_expression(text).evaluate(x=0.0)
    assert value.dtype == np.float64
    assert not np.isfinite(value)


def test_it_knows_what_it_uses() -> None:
    """Names are the variables used; parameters are fixed at the start."""
    expression = compile_expression("a*x + b", parameters={"a": 2.0, "b": 1.0, "unused": 3.0})
    assert expression.names == {"x"}
    assert expression.parameters == (("a", 2.0), ("b", 1.0))
    assert str(expression) == "a*x + b"
    with pytest.raises(KeyError):
        expression.evaluate(y=1.0)


@pytest.mark.parametrize(
    ("text", "sharp", "logical"),
    [
        ("x**2", False, False),
        ("abs(x)", False, False),
        ("x > 0", True, True),
        ("2*(x > 0)", True, False),
        ("not x", True, True),
        ("x and y", True, True),
        ("where(x, 1, 2)", True, False),
        ("floor(x)", True, False),
        ("sign(x)", True, False),
    ],
)
def test_it_knows_whether_it_jumps(text: str, *, sharp: bool, logical: bool) -> None:
    """Comparisons, logic and functions with jumps make it sharp; conditions are logical."""
    expression = compile_expression(text)
    assert (expression.sharp, expression.logical) == (sharp, logical)


def test_equal_texts_are_equal() -> None:
    """Equality and hash go by text and parameters; copies survive pickling."""
    a, b = (compile_expression("a*x", parameters={"a": 2.0}) for _ in range(2))
    assert a == b
    assert hash(a) == hash(b)
    assert a != compile_expression("a*x", parameters={"a": 3.0})
    a.evaluate(x=1.0)
    assert pickle.loads(pickle.dumps(a)) == a  # noqa: S301 - our own bytes


@pytest.mark.parametrize(
    ("text", "column", "part"),
    [
        ("", 1, "got nothing"),
        ("   ", 1, "got nothing"),
        ("x +", 3, "got 'x +' and no more"),
        ("x 2", 3, "need an expression"),
        ("(x", 1, "a ) is missing"),
        ("sin(2*(x + 1)", 4, "a ) is missing"),
        ("x + 1)", 6, "found ) without a ("),
        ("x = 1", 3, "write == to compare"),
        ("x^2", 2, "write ** for a power"),
        ("x & y", 3, "write and, or, not"),
        ("x + yy", 5, "no name yy; the nearest known is y"),
        ("1 + sinn(x)", 5, "no function sinn; the nearest known is sin"),
        ("sin + 1", 1, "parentheses after the function sin"),
        ("  sin(x, y)", 3, "need 1 value in sin(), got 2"),
        ("where(x > 0, 1)", 1, "need 3 values in where(), got 2"),
        ("x.real", 1, "a dot after a name"),
        ("1 if x else 2", 1, "where(condition, yes, no)"),
        ("x + х", 5, "cyrillic small letter ha"),  # noqa: RUF001 - a look-alike is the point
        ("x**2000", 4, "exponent of at most 1000"),
        ("1e999", 1, "1.8e308"),
        ("x # y", 3, "found #"),
    ],
)
def test_errors_name_column_and_remedy(text: str, column: int, part: str) -> None:
    """A refusal names the column, what was found and what is allowed."""
    with pytest.raises(ExpressionError) as refused:
        compile_expression(text)
    assert refused.value.column == column
    assert str(refused.value).startswith(f"column {column}: ")
    assert part in str(refused.value)


ATTACKS = [
    "__import__('os').system('true')",
    "__import__",
    "__builtins__",
    "__class__",
    "x.__class__",
    "x.__class__.__mro__[1].__subclasses__()",
    "().__class__",
    "(1).__class__",
    "1 .real",
    "x.tofile('f')",
    "x.dump('f')",
    "x.data",
    "x.T",
    "open('/etc/passwd').read()",
    "open(1)",
    "eval(x)",
    "exec(x)",
    "compile(x, x, x)",
    "getattr(x, y)",
    "setattr(x, y, t)",
    "globals()",
    "locals()",
    "vars()",
    "dir()",
    "type(x)",
    "print(x)",
    "input()",
    "exit()",
    "breakpoint()",
    "help()",
    "lambda: x",
    "(lambda x: x)(1)",
    "[x for x in y]",
    "{x for x in y}",
    "{x: y for x in y}",
    "(x for x in y)",
    "sum(x for x in y)",
    "x[0]",
    "x[::2]",
    "[1, 2]",
    "(1, 2)",
    "{1: 2}",
    "{1}",
    "'a'",
    '"a" * 10',
    "'a' * 10**9",
    "b'a'",
    "f'{x}'",
    'f"{x}"',
    "r'a'",
    "...",
    "None",
    "True",
    "1j",
    "1J*1J",
    "x if y else t",
    "(x := 1)",
    "x; y",
    "import os",
    "yield x",
    "(yield)",
    "await x",
    "*x",
    "sin(*x)",
    "sin(**x)",
    "sin(x=1)",
    "sin(x)(y)",
    "sin(x).y",
    "where(x > 0, sin, cos)(x)",
    "x @ y",
    "x // y",
    "x % y",
    "x << y",
    "x >> 1",
    "~x",
    "x is y",
    "x in y",
    "x not in y",
    "assert x",
    "del x",
    "x \\\n + 1",
    "x\x00",
    "x\u2028+ 1",
    "ｘ",  # noqa: RUF001 - a wide letter, which Python reads as x
    "ｓｉｎ(x)",  # noqa: RUF001 - likewise
    "𝐱 + 1",  # noqa: RUF001 - likewise
    "x\u00a0+ 1",
    "x\u200b",
    "1_0 if 1else 2",
    "@x",
    "x!",
    "$x",
    "`x`",
]


@pytest.mark.parametrize("text", ATTACKS)
def test_nothing_but_arithmetic_gets_in(text: str) -> None:
    """Whatever is no arithmetic is refused with a column, before anything is evaluated."""
    with pytest.raises(ExpressionError) as refused:
        compile_expression(text)
    assert 1 <= refused.value.column <= len(text) + 1


@pytest.mark.parametrize(
    "text",
    [
        "x" * (LONGEST + 1),
        "(" * 1000 + "x" + ")" * 1000,
        "-" * 1999 + "x",
        "not " * 400 + "x",
        "sin(" * (DEEPEST + 1) + "x" + ")" * (DEEPEST + 1),
        "x" + "**x" * 400,
        "+".join("x" * 900),
        "<".join("x" * 900),
        "9" * 1999,
        "1" + "0" * 400,
        "x**" + "9" * 400,
        "(" * 49,
    ],
)
def test_size_is_limited(text: str) -> None:
    """Texts too long, too deep or with numbers too large are refused at once."""
    with pytest.raises(ExpressionError):
        compile_expression(text)


@given(st.one_of(st.text(max_size=80), st.text("xyt012.+-*/()<>=! andorotwhersic,", max_size=60)))
def test_any_text_is_refused_or_evaluated(text: str) -> None:
    """No text whatever raises anything but a refusal with a column inside it."""
    try:
        expression = compile_expression(text)
    except ExpressionError as error:
        column = error.column
    else:
        column = 1
        assert expression.evaluate(x=X, y=0.25, t=0.125).dtype == np.float64
    assert 1 <= column <= len(text) + 1


def _trees() -> st.SearchStrategy[str]:
    leaves = st.one_of(st.sampled_from(["x", "y", "pi"]), st.floats(0.1, 10).map(repr))
    return st.recursive(
        leaves,
        lambda inner: st.builds("({} {} {})".format, inner, st.sampled_from("+-*/"), inner),
        max_leaves=12,
    )


@given(_trees(), st.floats(0.1, 3), st.floats(0.1, 3))
def test_arithmetic_agrees_with_python(text: str, x: float, y: float) -> None:
    """Random arithmetic has the value that Python's own floats give, bit for bit."""
    tree = compile(ast.parse(text, mode="eval"), "text", "eval")
    try:
        wanted = eval(tree, {"__builtins__": {}}, {"x": x, "y": y, "pi": math.pi})  # noqa: S307 - made here
    except ZeroDivisionError:
        return
    assert float(compile_expression(text).evaluate(x=x, y=y)) == wanted
