"""Expressions of behavioural sources: grammar, values, partial derivatives.

Outside references: values by numpy and the ngspice 39 manual, section 5.1 (powers are |x|^y, taken from the left);
slopes against central differences, which know nothing of the derivative rules. The same grammar is compared with
ngspice's own evaluation in tests/spice.
"""

import math

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from transim.circuit.expression import Dual, ExpressionError, parse_expression, spice_number

BIAS = {"v:a": 0.7, "v:b": 2.5, "v:c": -1.2, "v:d": -1.7, "v:h": 0.4, "i:va": -0.014, "time": 3e-6}


def evaluate(text, **changed):
    bias = {key: np.asarray(value, dtype=float) for key, value in {**BIAS, **changed}.items()}
    return parse_expression(text).evaluate(bias, {"temper": 40.0})


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("1+2*3", 7.0),
        ("(1+2)*3", 9.0),
        ("10-4-3", 3.0),
        ("24/4/3", 2.0),
        ("-2^2", -4.0),
        ("2^3^2", 64.0),
        ("2^-1^2", 0.5),
        ("2*-3", -6.0),
        ("2--3", 5.0),
        ("!0 + !7", 1.0),
        ("1<2==1", 1.0),
        ("1+2<4", 1.0),
        ("1 && 0 || 1", 1.0),
        ("0 && 1 || 0", 0.0),
        ("3 <> 4", 1.0),
        ("v(a) > v(b) ? 1 : 2", 2.0),
        ("v(a)<v(b) ? v(c)>0 ? 3 : 4 : 5", 4.0),
        ("0 ? 1 : 0 ? 2 : 3", 3.0),
        ("1 ? 0 : 1 ? 2 : 3", 0.0),
    ],
)
def test_precedence(text, expected):
    assert float(evaluate(text).value) == expected


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("v(a)", 0.7),
        ("V(A , B)", -1.8),
        ("v(a, gnd)", 0.7),
        ("v(0, a)", -0.7),
        ("50*i(Va)", -0.7),
        ("temper", 40.0),
        ("time*1e6", 3.0),
        ("pi", math.pi),
        ("e", math.e),
        ("v(d)^3", 1.7**3),
        ("v(d)**1.5", 1.7**1.5),
        ("pow(v(d), 3)", 1.7**3),
        ("pwr(v(d), 3)", -(1.7**3)),
        ("min(v(d), v(a))", -1.7),
        ("max (v(d), v(a))", 0.7),
        ("u(v(a)) + u(v(d)) + u(0)", 1.5),
        ("u2(v(h)) + u2(v(b)) + u2(v(d))", 1.4),
        ("uramp(v(b)) + uramp(v(d))", 2.5),
        ("sgn(v(d)) + sgn(0) + floor(v(d)) + ceil(v(h))", -2.0),
        ("exp(1000)", 1e99),
    ],
)
def test_values(text, expected):
    assert float(evaluate(text).value) == pytest.approx(expected, rel=1e-12)


SMOOTH = {
    "abs": (np.abs, -3.0, 3.0), "sqrt": (np.sqrt, 0.1, 9.0), "exp": (np.exp, -5.0, 5.0), "ln": (np.log, 0.1, 9.0),
    "log": (np.log, 0.1, 9.0), "log10": (np.log10, 0.1, 9.0), "sin": (np.sin, -4.0, 4.0), "cos": (np.cos, -4.0, 4.0),
    "tan": (np.tan, -1.3, 1.3), "asin": (np.arcsin, -0.9, 0.9), "acos": (np.arccos, -0.9, 0.9),
    "atan": (np.arctan, -9.0, 9.0), "sinh": (np.sinh, -4.0, 4.0), "cosh": (np.cosh, -4.0, 4.0),
    "tanh": (np.tanh, -4.0, 4.0), "asinh": (np.arcsinh, -9.0, 9.0), "acosh": (np.arccosh, 1.1, 9.0),
    "atanh": (np.arctanh, -0.9, 0.9),
}  # fmt: skip


@pytest.mark.parametrize("name", SMOOTH)
@given(share=st.floats(0.0, 1.0))
def test_functions_and_slopes(name, share):
    function, low, high = SMOOTH[name]
    x = low + share * (high - low)
    assume(name != "abs" or abs(x) > 1e-3)
    found = evaluate(f"{name}(v(a))", **{"v:a": x})
    assert float(found.value) == pytest.approx(float(function(x)), rel=1e-12, abs=1e-15)
    step = 1e-5
    slope = (function(x + step) - function(x - step)) / (2.0 * step)
    assert float(found.partial["v:a"]) == pytest.approx(float(slope), rel=1e-5, abs=1e-8)


TERMS = st.recursive(
    st.sampled_from(["v(a)", "v(b)", "v(a,b)", "i(va)", "0.7", "1.5k", "3m", "temper"]),
    lambda inner: st.one_of(
        st.tuples(inner, st.sampled_from("+-*"), inner).map(lambda t: f"({t[0]} {t[1]} {t[2]})"),
        st.tuples(inner, inner).map(lambda t: f"({t[0]}) / (2 + ({t[1]})^2)"),
        st.tuples(inner, st.sampled_from(["2", "3", "2.5"])).map(lambda t: f"(3 + abs({t[0]}))^{t[1]}"),
        st.tuples(inner, inner).map(lambda t: f"pwr(2 + tanh({t[0]}), atan({t[1]}))"),
        st.tuples(st.sampled_from(["sin", "tanh", "atan", "-", "asinh"]), inner).map(lambda t: f"{t[0]}({t[1]})"),
        st.tuples(inner, inner, inner).map(lambda t: f"(({t[0]}) > 0.1234 ? ({t[1]}) : ({t[2]}))"),
        st.tuples(st.sampled_from(["min", "max"]), inner, inner).map(lambda t: f"{t[0]}({t[1]}, {t[2]})"),
    ),
    max_leaves=6,
)


@given(
    text=TERMS,
    a=st.floats(-2.0, 2.0),
    b=st.floats(-2.0, 2.0),
    i=st.floats(-0.5, 0.5),
    probe=st.sampled_from(["v:a", "v:b", "i:va"]),
)
def test_partial_derivatives_are_central_differences(text, a, b, i, probe):
    point = {"v:a": a, "v:b": b, "i:va": i}
    found = evaluate(text, **point)
    slope = float(found.partial.get(probe, 0.0))
    sides = []
    for step in (1e-6, 3e-6):
        high, low = (float(evaluate(text, **{**point, probe: point[probe] + s * step}).value) for s in (1, -1))
        sides += [(high - float(found.value)) / step, (float(found.value) - low) / step]
    size = max(1e-3, *map(abs, sides), abs(float(found.value)) * 1e-3)
    # a corner (conditional, min, max, abs) within the steps has no slope
    assume(max(sides) - min(sides) < 1e-3 * size)
    assert slope == pytest.approx(0.5 * (sides[0] + sides[1]), abs=1e-3 * size)


@given(a=st.floats(-3.0, 3.0).filter(lambda x: abs(x) > 0.05), n=st.sampled_from([1.0, 2.0, 2.5, 3.0]))
def test_power_of_a_negative_number_is_that_of_its_magnitude(a, n):
    laws = {f"v(a)^{n}": lambda x: abs(x) ** n, f"pwr(v(a),{n})": lambda x: math.copysign(abs(x) ** n, x)}
    for text, law in laws.items():
        found = evaluate(text, **{"v:a": a})
        assert float(found.value) == pytest.approx(law(a), rel=1e-12)
        slope = (law(a + 1e-6) - law(a - 1e-6)) / 2e-6
        assert float(found.partial["v:a"]) == pytest.approx(slope, rel=1e-6)


def test_choice_takes_the_slope_of_the_branch_that_is_taken():
    found = evaluate("v(a) > 0 ? 3*v(b) : 5*v(c)", **{"v:a": np.array([1.0, -1.0])})
    assert np.array_equal(found.partial["v:b"], [3.0, 0.0])
    assert np.array_equal(found.partial["v:c"], [0.0, 5.0])


def test_arrays_are_evaluated_at_once():
    x = np.linspace(-2.0, 2.0, 41)
    found = evaluate("v(a)*v(b) + max(v(a), 0)", **{"v:a": x})
    assert found.value == pytest.approx(2.5 * x + np.maximum(x, 0.0))
    assert found.partial["v:b"] == pytest.approx(x)
    assert found.partial["v:a"][x > 0] == pytest.approx(3.5)
    assert isinstance(found, Dual)


def test_what_an_expression_depends_on():
    law = parse_expression("v(A, gnd)*i(Vs) + v(x1.n, b)/v(a) + time")
    assert law.nodes == ("a", "x1.n", "b")
    assert law.sources == ("vs",)


def test_probes_are_replaced_in_the_text():
    law = parse_expression("max ( v(a) , 0 ) - v(a,b) * i(vs)")
    found = law.with_probes(lambda node: f"v(t_{node})", lambda name: f"(i({name})+1)")
    assert found == "max((v(t_a)),0)-(v(t_a) - v(t_b))*(i(vs)+1)"
    bias = {"v:t_a": np.asarray(0.7), "v:t_b": np.asarray(2.5), "i:vs": np.asarray(-1.5)}
    assert float(parse_expression(found).evaluate(bias, {}).value) == pytest.approx(0.7 + 1.8 * -0.5)


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("4.7k", 4700.0), ("1meg", 1e6), ("1MEGohm", 1e6), ("1M", 1e-3), ("1mil", 25.4e-6), ("10mF", 0.01),
        ("22p", 22e-12), ("3f", 3e-15), ("2a", 2e-18), ("1T", 1e12), ("5G", 5e9), ("2.2u", 2.2e-6), ("7n", 7e-9),
        ("1e-3k", 1.0), ("-.5", -0.5), ("5.", 5.0), ("50ohm", 50.0), ("+1E3", 1000.0),
    ],
)  # fmt: skip
def test_numbers_as_spice_reads_them(text, value):
    assert spice_number(text) == pytest.approx(value, rel=1e-12)


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_plain_numbers_come_back(value):
    assert spice_number(repr(value)) == value


@pytest.mark.parametrize("text", ["", "k", "1.2.3", "0x10", "inf", "nan", "- 1"])
def test_what_is_no_number(text):
    with pytest.raises(ValueError, match="is not a number"):
        spice_number(text)


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("v(a) +", "the end"),
        ("v(a) v(b)", "one too many"),
        ("(v(a)", "expected '\\)'"),
        ("v(a) ? 1", "expected ':'"),
        ("hertz * v(a)", "'hertz' is not understood"),
        ("nint(v(a))", "function 'nint' with 1"),
        ("sin(1, 2)", "function 'sin' with 2"),
        ("min(1)", "function 'min' with 1"),
        ("v(a,b,c)", "is not understood"),
        ("i(a,b)", "is not understood"),
        ("v()", "is not understood"),
        ("v(a) # 3", "cannot read ' # 3'"),
        ("", "the end"),
    ],
)
def test_what_is_not_understood_is_named(text, words):
    with pytest.raises(ExpressionError, match=words):
        parse_expression(text)
