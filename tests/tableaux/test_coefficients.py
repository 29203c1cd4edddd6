import re
from decimal import Decimal
from fractions import Fraction

import mpmath
import pytest
from hypothesis import given
from hypothesis import strategies as st

from levelstride.errors import InputError
from levelstride.tableaux import find, names
from levelstride.tableaux.coefficients import as_decimal, evaluate, rounded


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("0", Fraction(0)),
        ("-3/4", Fraction(-3, 4)),
        ("0.1", Fraction(1, 10)),
        (".5", Fraction(1, 2)),
        ("+2.5e-1", Fraction(1, 4)),
        ("1/2 - 1/3*(2 + 1)", Fraction(-1, 2)),
        ("2**3 - 2**-1", Fraction(15, 2)),
        ("sqrt(9/4)", Fraction(3, 2)),
        ("  1 / 2 ", Fraction(1, 2)),
        ("-2**2", Fraction(-4)),
    ],
)
def test_rational_text_is_an_exact_fraction(text, value):
    assert evaluate(text) == value
    assert isinstance(evaluate(text), Fraction)


def test_decimals_are_read_as_text_and_not_as_doubles():
    assert evaluate("0.1 + 0.2 - 0.3") == 0
    assert evaluate("0.24169426078821") == Fraction(24169426078821, 10**14)


def test_long_rows_of_signs_are_read():
    assert evaluate("-" * 900 + "1") == 1


def test_roots_carry_eighty_digits_and_round_correctly():
    with mpmath.workdps(100):
        wanted = mpmath.mpf(1) / 2 - mpmath.sqrt(3) / 6
        got = evaluate("1/2 - sqrt(3)/6")
        assert isinstance(got, Decimal)
        assert abs(mpmath.mpf(str(got)) - wanted) < mpmath.mpf(10) ** -78
        assert rounded(got) == float(wanted)


HOSTILE = [
    "",
    "   ",
    "1/0",
    "0**-1",
    "0/0",
    "sqrt(2)/0",
    "sqrt(-1)",
    "sqrt()",
    "sqrt(1, 2)",
    "sqrt",
    "sqrt(2)(3)",
    "1 2",
    "2(3)",
    "1//2",
    "5 % 2",
    "2**0.5",
    "2**(1/2)",
    "2**100",
    "((2**64)**64)**64",
    "1e99",
    "9" * 7,
    "1" * 2000,
    "(" * 400 + "1" + ")" * 400,
    "1e999999999",
    "nan",
    "inf",
    "1_000",
    "0x10",
    "1j",
    "1e5j",
    "abs(1)",
    "__import__('os')",
    "().__class__",
    "1 if 1 else 2",
    "[1]",
    "1,2",
    "1;2",
    "1\n2",
    "\x00",
    "½",
    "٣",
    "1 < 2",
    "True",
    "exp(1)",
    "sqrt(2)**64**64",
    "1/(sqrt(2) - sqrt(2))",
    "10*sqrt(2)**64",
]


@pytest.mark.parametrize("text", HOSTILE)
def test_hostile_text_is_refused_in_one_line(text):
    with pytest.raises(InputError) as error:
        evaluate(text)
    (line,) = error.value.problems
    assert line.startswith("coefficient ")
    assert "allowed are" in line
    assert len(line) < 300
    assert "\n" not in line


@given(st.text(alphabet="0123456789.eE+-*/() sqrt", max_size=30) | st.text(max_size=30))
def test_any_text_is_a_number_or_an_input_error(text):
    try:
        value = evaluate(text)
    except InputError:
        return
    assert abs(rounded(value)) <= 1e6


def expressions():
    """Pairs of text and exact value."""
    integers = st.integers(0, 99).map(lambda n: (str(n), Fraction(n)))
    decimals = st.decimals(0, 9, places=3).map(lambda d: (str(d), Fraction(d)))

    def grow(children):
        def join(left, sign, right):
            (a, x), (b, y) = left, right
            if sign == "/" and y == 0:
                sign = "+"
            value = {"+": x + y, "-": x - y, "*": x * y, "/": x / y if y else x}[sign]
            return f"({a}) {sign} ({b})", value

        return st.builds(join, children, st.sampled_from("+-*/"), children) | children.map(
            lambda pair: (f"-({pair[0]})", -pair[1])
        )

    return st.recursive(integers | decimals, grow, max_leaves=6)


@given(expressions())
def test_random_expressions_have_their_exact_value(pair):
    text, value = pair
    if abs(value) > 10**6:
        with pytest.raises(InputError):
            evaluate(text)
    else:
        assert evaluate(text) == value
        assert rounded(evaluate(text)) == float(value)


def test_every_coefficient_of_the_library_agrees_with_mpmath():
    """The slow twin reads numbers with mpmath and lets Python itself do the arithmetic."""
    texts = set()
    for name in names():
        text = find(name).coefficient_text
        for row in (*text.a_explicit, *text.a_implicit, text.b_explicit, text.b_implicit):
            texts.update(row)
    with mpmath.workdps(100):
        space = {"mpf": mpmath.mpf, "sqrt": mpmath.sqrt, "__builtins__": {}}
        for text in texts:
            quoted = re.sub(r"\d+(\.\d*)?", lambda m: f"mpf('{m[0]}')", text)
            wanted = mpmath.mpf(eval(quoted, space))
            got = evaluate(text)
            assert abs(mpmath.mpf(str(as_decimal(got))) - wanted) < mpmath.mpf(10) ** -75, text
            assert rounded(got) == float(wanted), text
