"""Expressions of behavioural sources: parsed once, evaluated with their partial derivatives on arrays.

The grammar is that of ngspice's B sources (ngspice 39 manual, section 5.1): arithmetic, comparison, logic,
the conditional operator, ``v(a)``, ``v(a,b)``, ``i(source)``, ``time``, ``temper`` and the usual functions.
Powers follow ngspice: ``x ^ y`` is ``|x| ^ y``.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from functools import lru_cache

import numpy as np
import numpy.typing as npt

__all__ = ["Dual", "Expression", "ExpressionError", "parse_expression", "spice_number"]

Array = npt.NDArray[np.float64]

_SUFFIX = {
    "t": 1e12,
    "g": 1e9,
    "meg": 1e6,
    "k": 1e3,
    "mil": 25.4e-6,
    "m": 1e-3,
    "u": 1e-6,
    "n": 1e-9,
    "p": 1e-12,
    "f": 1e-15,
    "a": 1e-18,
}
_NUMBER = re.compile(r"([+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?)([a-zA-Z]*)$")
_TOKEN = re.compile(
    r"\s*(?:(?P<probe>[vi]\s*\([^()]*\))|(?P<number>(?:\d+\.?\d*|\.\d+)(?:e[+-]?\d+)?[a-z]*)"
    r"|(?P<name>[a-z_]\w*)|(?P<op>\*\*|<=|>=|==|!=|<>|&&|\|\||[-+*/^()?:,<>!&|~]))",
    re.IGNORECASE,
)
_PROBE = re.compile(r"(?<![\w.])([vi])\s*\(([^()]*)\)", re.IGNORECASE)


class ExpressionError(ValueError):
    """An expression, or a function in it, that is not understood."""


def spice_number(text: str) -> float:
    """Read a number as SPICE does: ``4.7k``, ``1meg``, ``2.2e-9``; letters after the suffix are ignored.

    Raises
    ------
    ValueError
        If the text is no number.

    Examples
    --------
    >>> spice_number("2.5meg"), spice_number("1mF")
    (2500000.0, 0.001)
    """
    match = _NUMBER.match(text.strip())
    if match is None:
        raise ValueError(f"{text!r} is not a number")
    suffix = match[2].lower()
    for known in ("meg", "mil"):
        if suffix.startswith(known):
            return float(match[1]) * _SUFFIX[known]
    return float(match[1]) * _SUFFIX.get(suffix[:1], 1.0)


@dataclass(frozen=True)
class Dual:
    """A value with its partial derivatives, by probe (``v:node`` or ``i:source``)."""

    value: Array
    partial: Mapping[str, Array] = field(default_factory=dict)


Node = Callable[[Mapping[str, Array], Mapping[str, float]], Dual]


@dataclass(frozen=True)
class Expression:
    """A parsed expression.

    Attributes
    ----------
    text : str
        As it stood in the netlist.
    nodes, sources : tuple of str
        Nodes whose voltage and sources whose current it depends on; ground ``0`` is left out.
    """

    text: str
    nodes: tuple[str, ...]
    sources: tuple[str, ...]
    _evaluate: Node

    def evaluate(self, bias: Mapping[str, Array], constants: Mapping[str, float]) -> Dual:
        """Return value and partial derivatives.

        Parameters
        ----------
        bias : mapping
            ``v:node`` [V] and ``i:source`` [A], arrays of one shape; ``time`` [s] if the expression uses it.
        constants : mapping
            ``temper`` [degC] and the like.

        Returns
        -------
        Dual
            Partial derivatives are with respect to the probes, in SI units.
        """
        return self._evaluate(bias, constants)

    def with_probes(self, voltage: Callable[[str], str], current: Callable[[str], str]) -> str:
        """Return the expression's text with every node voltage and source current replaced.

        Parameters
        ----------
        voltage, current : callable
            Text that stands for the voltage of a node and the current of a source.
        """

        def replace(match: re.Match[str]) -> str:
            names = [name.strip().lower() for name in match[2].split(",")]
            if match[1].lower() == "i":
                return current(names[0])
            texts = ["0" if name in ("0", "gnd") else voltage(name) for name in names]
            return f"({' - '.join(texts)})"

        # ngspice reads "max (" as the name of a parameter, and its own listing is spaced like that
        return _PROBE.sub(replace, self.text.replace(" ", ""))


def _linear(terms: list[tuple[Array | float, Dual]], value: Array) -> Dual:
    partial: dict[str, Array] = {}
    for weight, term in terms:
        for key, slope in term.partial.items():
            partial[key] = partial.get(key, 0.0) + weight * slope
    return Dual(np.asarray(value, dtype=float), partial)


def _probe_node(prefix: str, plus: str, minus: str) -> Node:
    def evaluate(bias: Mapping[str, Array], _constants: Mapping[str, float]) -> Dual:
        value: Array | float = 0.0
        partial: dict[str, Array] = {}
        for name, sign in ((plus, 1.0), (minus, -1.0)):
            if name in ("", "0", "gnd"):
                continue
            key = f"{prefix}:{name}"
            value = value + sign * bias[key]
            partial[key] = np.asarray(partial.get(key, 0.0) + np.asarray(sign))
        return Dual(np.asarray(value, dtype=float), partial)

    return evaluate


def _guarded(function: Callable[[Array], Array]) -> Callable[[Array], Array]:
    def evaluate(x: Array) -> Array:
        with np.errstate(all="ignore"):
            return np.asarray(function(x))

    return evaluate


_LARGEST = 99.0 * np.log(10.0)

_UNARY: dict[str, tuple[Callable[[Array], Array], Callable[[Array], Array]]] = {
    "abs": (np.abs, np.sign),
    "sqrt": (lambda x: np.sqrt(np.abs(x)), lambda x: 0.5 / np.sqrt(np.maximum(np.abs(x), 1e-300))),
    # ngspice lets an exponential grow to 1e99 and no further
    "exp": (lambda x: np.exp(np.minimum(x, _LARGEST)), lambda x: np.exp(np.minimum(x, _LARGEST))),
    "ln": (lambda x: np.log(np.abs(x)), lambda x: 1 / x),
    "log": (lambda x: np.log(np.abs(x)), lambda x: 1 / x),
    "log10": (lambda x: np.log10(np.abs(x)), lambda x: 1 / (x * np.log(10.0))),
    "sin": (np.sin, np.cos),
    "cos": (np.cos, lambda x: -np.sin(x)),
    "tan": (np.tan, lambda x: 1 / np.cos(x) ** 2),
    "asin": (np.arcsin, lambda x: 1 / np.sqrt(1 - x * x)),
    "acos": (np.arccos, lambda x: -1 / np.sqrt(1 - x * x)),
    "atan": (np.arctan, lambda x: 1 / (1 + x * x)),
    "sinh": (np.sinh, np.cosh),
    "cosh": (np.cosh, np.sinh),
    "tanh": (np.tanh, lambda x: 1 / np.cosh(np.clip(x, -350, 350)) ** 2),
    "asinh": (np.arcsinh, lambda x: 1 / np.sqrt(x * x + 1)),
    "acosh": (np.arccosh, lambda x: 1 / np.sqrt(x * x - 1)),
    "atanh": (np.arctanh, lambda x: 1 / (1 - x * x)),
    "u": (lambda x: np.heaviside(x, 0.5), np.zeros_like),
    "u2": (lambda x: np.clip(x, 0, 1), lambda x: np.where((x > 0) & (x < 1), 1.0, 0.0)),
    "uramp": (lambda x: np.maximum(x, 0), lambda x: np.where(x > 0, 1.0, 0.0)),
    "sgn": (np.sign, np.zeros_like),
    "floor": (np.floor, np.zeros_like),
    "ceil": (np.ceil, np.zeros_like),
}


def _unary(name: str, argument: Node) -> Node:
    function, slope = (_guarded(f) for f in _UNARY[name])

    def evaluate(bias: Mapping[str, Array], constants: Mapping[str, float]) -> Dual:
        x = argument(bias, constants)
        return _linear([(slope(x.value), x)], function(x.value))

    return evaluate


def _product(x: Dual, y: Dual) -> Dual:
    return _linear([(y.value, x), (x.value, y)], x.value * y.value)


def _quotient(x: Dual, y: Dual) -> Dual:
    with np.errstate(all="ignore"):
        return _linear([(1 / y.value, x), (-x.value / y.value**2, y)], x.value / y.value)


def _power(x: Dual, y: Dual) -> Dual:
    base = np.abs(x.value)
    with np.errstate(all="ignore"):
        value = base**y.value
        by_base = np.where(y.value == 0, 0.0, y.value * base ** (y.value - 1) * np.sign(x.value))
        by_exponent = np.where(base > 0, value * np.log(np.maximum(base, 1e-300)), 0.0)
    return _linear([(by_base, x), (by_exponent, y)], value)


def _signed_power(x: Dual, y: Dual) -> Dual:
    plain = _power(Dual(np.abs(x.value), {}), y)
    with np.errstate(all="ignore"):
        by_base = np.where(y.value == 0, 0.0, y.value * np.abs(x.value) ** (y.value - 1))
    sign = np.sign(x.value)
    return _linear([(by_base, x), (sign, plain)], sign * plain.value)


def _choose(condition: npt.NDArray[np.bool_], x: Dual, y: Dual) -> Dual:
    first = np.where(condition, 1.0, 0.0)
    return _linear([(first, x), (1 - first, y)], np.where(condition, x.value, y.value))


def _flag(test: Callable[[Array, Array], Array]) -> Callable[[Dual, Dual], Dual]:
    return lambda x, y: Dual(np.where(test(x.value, y.value), 1.0, 0.0))


_BINARY: dict[str, Callable[[Dual, Dual], Dual]] = {
    "+": lambda x, y: _linear([(1.0, x), (1.0, y)], x.value + y.value),
    "-": lambda x, y: _linear([(1.0, x), (-1.0, y)], x.value - y.value),
    "*": _product,
    "/": _quotient,
    "^": _power,
    "**": _power,
    "pow": _power,
    "pwr": _signed_power,
    "min": lambda x, y: _choose(x.value < y.value, x, y),
    "max": lambda x, y: _choose(x.value > y.value, x, y),
    "<": _flag(np.less),
    ">": _flag(np.greater),
    "<=": _flag(np.less_equal),
    ">=": _flag(np.greater_equal),
    "==": _flag(np.equal),
    "!=": _flag(np.not_equal),
    "<>": _flag(np.not_equal),
    "&&": _flag(lambda x, y: (x != 0) & (y != 0)),
    "&": _flag(lambda x, y: (x != 0) & (y != 0)),
    "||": _flag(lambda x, y: (x != 0) | (y != 0)),
    "|": _flag(lambda x, y: (x != 0) | (y != 0)),
}
_LEVELS = (("||", "|"), ("&&", "&"), ("==", "!=", "<>"), ("<", ">", "<=", ">="), ("+", "-"), ("*", "/"))
_CONSTANTS = {"pi": np.pi, "e": np.e, "temper": None, "time": None}


class _Reader:
    """Recursive descent over the tokens of one expression."""

    def __init__(self, text: str) -> None:
        self.text = text
        self.nodes: dict[str, None] = {}
        self.sources: dict[str, None] = {}
        self.tokens: list[tuple[str, str]] = []
        place = 0
        stripped = text.strip()
        while place < len(stripped):
            match = _TOKEN.match(stripped, place)
            if match is None or match.lastgroup is None:
                raise ExpressionError(f"cannot read {stripped[place : place + 20]!r} in {text!r}")
            self.tokens.append((match.lastgroup, match[match.lastgroup].lower()))
            place = match.end()
        self.tokens.append(("end", ""))
        self.place = 0

    def peek(self) -> tuple[str, str]:
        return self.tokens[self.place]

    def take(self, expected: str | None = None) -> tuple[str, str]:
        token = self.tokens[self.place]
        if expected is not None and token[1] != expected:
            raise ExpressionError(f"expected {expected!r}, found {token[1]!r} in {self.text!r}")
        self.place += 1
        return token

    def conditional(self) -> Node:
        test = self.level(0)
        if self.peek()[1] != "?":
            return test
        self.take()
        first = self.conditional()
        self.take(":")
        second = self.conditional()

        def evaluate(bias: Mapping[str, Array], constants: Mapping[str, float]) -> Dual:
            return _choose(test(bias, constants).value != 0, first(bias, constants), second(bias, constants))

        return evaluate

    def level(self, depth: int) -> Node:
        if depth == len(_LEVELS):
            return self.signed()
        left = self.level(depth + 1)
        while self.peek()[0] == "op" and self.peek()[1] in _LEVELS[depth]:
            left = _binary(self.take()[1], left, self.level(depth + 1))
        return left

    def signed(self) -> Node:
        if self.peek()[1] in ("-", "+", "!", "~"):
            sign = self.take()[1]
            operand = self.signed()
            if sign == "+":
                return operand
            if sign == "-":
                return _binary("-", _constant(0.0), operand)
            return _binary("==", operand, _constant(0.0))
        return self.power()

    def power(self) -> Node:
        # ngspice takes powers from the left: 2^3^2 is 64
        left = self.atom()
        while self.peek()[1] in ("^", "**"):
            self.take()
            exponent = self.signed() if self.peek()[1] in ("-", "+", "!", "~") else self.atom()
            left = _binary("^", left, exponent)
        return left

    def atom(self) -> Node:
        kind, text = self.take()
        if kind == "number":
            return _constant(spice_number(text))
        if kind == "probe":
            return self.probe(text)
        if text == "(":
            inner = self.conditional()
            self.take(")")
            return inner
        if kind == "name" and self.peek()[1] == "(":
            return self.call(text)
        if kind == "name" and text in _CONSTANTS:
            return _named_constant(text)
        raise ExpressionError(f"{text or 'the end'!r} is not understood in {self.text!r}")

    def probe(self, text: str) -> Node:
        prefix, inside = text[0], text[text.index("(") + 1 : -1]
        names = [name.strip() for name in inside.split(",")]
        if len(names) > (2 if prefix == "v" else 1) or not names[0]:
            raise ExpressionError(f"{text!r} is not understood")
        target = self.nodes if prefix == "v" else self.sources
        for name in names:
            if name not in ("0", "gnd"):
                target[name] = None
        return _probe_node(prefix, names[0], names[1] if len(names) > 1 else "0")

    def call(self, name: str) -> Node:
        self.take("(")
        arguments = [self.conditional()]
        while self.peek()[1] == ",":
            self.take()
            arguments.append(self.conditional())
        self.take(")")
        if name in _UNARY and len(arguments) == 1:
            return _unary(name, arguments[0])
        if name in ("min", "max", "pow", "pwr") and len(arguments) == 2:
            return _binary(name, *arguments)
        raise ExpressionError(f"function {name!r} with {len(arguments)} argument(s) is not supported")


def _constant(value: float) -> Node:
    dual = Dual(np.asarray(value))
    return lambda _bias, _constants: dual


def _named_constant(name: str) -> Node:
    fixed = _CONSTANTS[name]
    if fixed is not None:
        return _constant(fixed)
    if name == "time":
        return lambda bias, _constants: Dual(np.asarray(bias["time"]))
    return lambda _bias, constants: Dual(np.asarray(constants[name]))


def _binary(operator: str, left: Node, right: Node) -> Node:
    combine = _BINARY[operator]
    return lambda bias, constants: combine(left(bias, constants), right(bias, constants))


@lru_cache(maxsize=1024)
def parse_expression(text: str) -> Expression:
    """Parse the expression of a behavioural source.

    Raises
    ------
    ExpressionError
        If a character, name or function is not understood.

    Examples
    --------
    >>> law = parse_expression("v(a,b) / (1k + 2*v(c))")
    >>> law.nodes
    ('a', 'b', 'c')
    """
    reader = _Reader(text)
    evaluate = reader.conditional()
    if reader.peek()[0] != "end":
        raise ExpressionError(f"{reader.peek()[1]!r} is one too many in {text!r}")
    return Expression(text, tuple(reader.nodes), tuple(reader.sources), evaluate)
