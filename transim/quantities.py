"""Quantities with units: reading, writing, and plain numbers for decks.

Inside the program every quantity is a float in the SI unit named beside it; levels are in dB or dBm,
angles in degrees and temperatures in degrees Celsius.
"""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from dataclasses import dataclass
from decimal import Decimal
from types import MappingProxyType

from transim.errors import QuantityError

__all__ = [
    "UNITS",
    "Unit",
    "dbm_to_peak_volts",
    "decibels",
    "deck_number",
    "format_quantity",
    "format_range",
    "parse_quantity",
]

_PREFIXES = {-15: "f", -12: "p", -9: "n", -6: "u", -3: "m", 0: "", 3: "k", 6: "M", 9: "G", 12: "T"}
# Both Unicode letters for micro: the micro sign and the Greek mu.
_EXPONENTS = {prefix: power for power, prefix in _PREFIXES.items() if prefix} | {"\u00b5": -6, "\u03bc": -6}

_LETTER_AS_POINT = re.compile(r"([+-]?[0-9]+)([fpnu\u00b5\u03bcmkMGT])([0-9]+)[ \t]*(.*)")
_PLAIN = re.compile(r"([+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+))(?:[eE]([+-]?[0-9]{1,4}))?[ \t]*(.*)")


@dataclass(frozen=True)
class Unit:
    """A unit that quantities may have.

    Parameters
    ----------
    symbol : str
        How the program writes it.
    quantity : str
        What is measured in it, with its article.
    example : str
        A text that `parse_quantity` accepts.
    prefixed : bool
        Whether it takes a prefix from f to T.
    spellings : tuple of str
        What else is read as this unit.
    """

    symbol: str
    quantity: str
    example: str
    prefixed: bool = True
    spellings: tuple[str, ...] = ()

    @property
    def expected(self) -> str:
        """What an error says was expected."""
        if self.symbol == "1":
            return f"{self.quantity} such as {self.example}"
        return f'{self.quantity} in {self.symbol}, for example "{self.example}"'


UNITS: Mapping[str, Unit] = MappingProxyType(
    {
        unit.symbol: unit
        for unit in (
            Unit("V", "a voltage", "3.3 V"),
            Unit("A", "a current", "10 mA"),
            Unit("s", "a time", "150 ns"),
            Unit("Hz", "a frequency", "150 MHz"),
            Unit("ohm", "a resistance", "50 ohm", spellings=("Ohm", "Ω", "\u2126")),
            Unit("F", "a capacitance", "22 pF"),
            Unit("H", "an inductance", "2.2 uH"),
            Unit("C", "a charge", "10 nC"),
            Unit("W", "a power", "50 mW"),
            Unit("J", "an energy", "2 nJ"),
            Unit("S", "a conductance", "20 mS"),
            Unit("m", "a length", "50 um"),
            Unit("V s", "a voltage-time area", "16.5 pV s", spellings=("Vs", "V*s")),
            Unit("eV", "an energy", "1.11 eV"),
            Unit("m^2/Vs", "a mobility", "0.18 m^2/Vs", False, ("m2/Vs", "m²/Vs", "m^2/(V s)", "m^2/V s")),
            Unit("m^2", "an area", "1e-8 m^2", False, ("m2", "m²")),
            Unit("dB", "a ratio", "40 dB", False),
            Unit("dBm", "a level", "-10 dBm", False),
            Unit("deg", "an angle", "2 deg", False, ("°",)),
            Unit("degC", "a temperature", "25 degC", False, ("°C",)),
            Unit("1/K", "a temperature coefficient", "0.002 1/K", False),
            Unit("1", "a plain number", "1.5"),
        )
    }
)


def _known(unit: str) -> Unit:
    if unit not in UNITS:
        raise QuantityError(f'"{unit}" is no unit that transim knows', expected=", ".join(UNITS), found=unit)
    return UNITS[unit]


def _split(text: str) -> tuple[str, int, str] | None:
    """Split into mantissa, power of ten and what follows the number."""
    if match := _LETTER_AS_POINT.fullmatch(text):
        whole, letter, fraction, rest = match.groups()
        return f"{whole}.{fraction}", _EXPONENTS[letter], f"{letter}{rest}"
    if match := _PLAIN.fullmatch(text):
        mantissa, exponent, rest = match.groups()
        return mantissa, int(exponent or 0), rest
    return None


def _suffix_exponent(suffix: str, unit: Unit, require_unit: bool) -> int | None:
    """Return the power of ten of a prefix and unit, None where the suffix is not this unit."""
    spellings = ("",) if unit.symbol == "1" else (unit.symbol, *unit.spellings)
    if suffix in spellings:
        return 0
    if unit.prefixed and suffix[:1] in _EXPONENTS and suffix[1:] in spellings:
        return _EXPONENTS[suffix[0]]
    if not require_unit:
        if not suffix:
            return 0
        if unit.prefixed and suffix in _EXPONENTS:
            return _EXPONENTS[suffix]
    return None


def _exponent(text: str, unit: Unit, require_unit: bool) -> tuple[str, int] | None:
    """Return mantissa and power of ten of a whole text, None where it is not of this unit."""
    parts = _split(text)
    if parts is None:
        return None
    mantissa, exponent, suffix = parts
    if _LETTER_AS_POINT.fullmatch(text):
        # The letter has given the power of ten already: a bare unit must follow.
        bare = _suffix_exponent(suffix[1:], unit, require_unit or unit.symbol == "1")
        return (mantissa, exponent) if bare == 0 and unit.prefixed else None
    more = _suffix_exponent(suffix, unit, require_unit)
    return None if more is None else (mantissa, exponent + more)


def _complaint(text: str, unit: Unit) -> str:
    """Say what is wrong with a text that is no quantity of the unit."""
    if re.match(r"[+-]?[0-9]+,[0-9]", text):
        return "write the decimal point as a point"
    parts = _split(text)
    if parts is None:
        return f"this is not {unit.quantity}"
    suffix = parts[2]
    if suffix[:3].lower() == "meg":
        return "write M for mega"
    if not suffix or (suffix in _EXPONENTS and unit.symbol != "1"):
        return "the unit is missing"
    spellings = {
        prefix + name
        for name in (unit.symbol, *unit.spellings)
        for prefix in (("", *_EXPONENTS) if unit.prefixed else ("",))
    }
    if unit.symbol != "1" and suffix.lower() in {spelling.lower() for spelling in spellings}:
        return "units and prefixes are case-sensitive (m is milli, M is mega)"
    for other in UNITS.values():
        if other.symbol != "1" and _exponent(text, other, True) is not None:
            return f"the unit is wrong: this is {other.quantity} in {other.symbol}"
    if unit.symbol == "1":
        return "this is not a plain number"
    return f'"{suffix[:20]}" is no unit of {unit.quantity}'


def parse_quantity(text: str, unit: str, *, require_unit: bool = True) -> float:
    """Read a quantity such as ``"22 pF"`` as a float in its SI unit.

    Parameters
    ----------
    text : str
        A number, an optional prefix (f p n u µ m k M G T, case-sensitive) and the unit. ``4k7 ohm`` is
        4700 ohm. dB, dBm, deg, degC and the mobility take no prefix.
    unit : str
        Unit that is wanted, a key of `UNITS`; "1" for a plain number.
    require_unit : bool
        Whether the unit symbol must be written; a prefix alone, as in ``22p``, is then refused.

    Returns
    -------
    float
        Value in `unit`, correctly rounded.

    Raises
    ------
    QuantityError
        If the text is no finite quantity of this unit.

    Examples
    --------
    >>> parse_quantity("22 pF", "F")
    2.2e-11
    >>> parse_quantity("4k7 ohm", "ohm")
    4700.0
    >>> parse_quantity("5 m", "m"), parse_quantity("50 um", "m")
    (5.0, 5e-05)
    """
    known = _known(unit)
    if not isinstance(text, str):
        raise QuantityError(f"this is not {known.quantity}", expected=known.expected, found=repr(text))
    found = f'"{text}"' if len(text) <= 40 else f'"{text[:40]}..."'
    if any(ord(character) < 32 and character != "\t" for character in text):
        raise QuantityError(
            "a quantity stands on one line, without control characters",
            expected=known.expected,
            found=repr(text[:40]),
        )
    plain = text.replace("\u2212", "-").replace("\u00a0", " ").replace("\u202f", " ").strip()
    number = _exponent(plain, known, require_unit)
    if number is None:
        raise QuantityError(_complaint(plain, known), expected=known.expected, found=found)
    mantissa, exponent = number
    # One conversion of the whole decimal text is correctly rounded; a product would not be.
    value = float(f"{mantissa}e{exponent}")
    if math.isinf(value) or (value == 0.0 and mantissa.strip("+-.0")):
        raise QuantityError("the number is out of what can be computed", expected=known.expected, found=found)
    return value + 0.0


def _digits_of(value: Decimal) -> str:
    return f"{value.normalize():f}"


def format_quantity(value: float, unit: str, digits: int = 4) -> str:
    """Write a quantity in engineering notation.

    Parameters
    ----------
    value : float
        Value in `unit`.
    unit : str
        Key of `UNITS`.
    digits : int
        Significant digits; trailing zeros are dropped.

    Returns
    -------
    str
        For example ``"4.7 kohm"``. Rounding comes before the choice of the prefix, so the number before
        a prefix is always below 1000.

    Raises
    ------
    QuantityError
        If the unit is not known.

    Examples
    --------
    >>> format_quantity(1.32402e-7, "s"), format_quantity(999.96e-9, "s"), format_quantity(-10, "dBm")
    ('132.4 ns', '1 us', '-10 dBm')
    """
    known = _known(unit)
    symbol = "" if unit == "1" else f" {unit}"
    value = float(value)
    if not math.isfinite(value):
        return f"{value}{symbol}"
    if value == 0.0:
        return f"0{symbol}"
    rounded = Decimal(f"{Decimal(repr(value)):.{max(digits, 1) - 1}e}")
    exponent = rounded.adjusted()
    if known.prefixed and unit != "1":
        thousands = 3 * (exponent // 3)
        if thousands in _PREFIXES:
            return f"{_digits_of(rounded.scaleb(-thousands))} {_PREFIXES[thousands]}{unit}"
    elif -5 < exponent < 7:
        return f"{_digits_of(rounded)}{symbol}"
    return f"{_digits_of(rounded.scaleb(-exponent))}e{exponent}{symbol}"


def format_range(unit: str, low: float, high: float, low_open: bool = False) -> str:
    """Write a permitted range, for example ``"> 0 F .. 1 nF"``.

    Parameters
    ----------
    unit : str
        Key of `UNITS`.
    low, high : float
        Ends in `unit`; infinite where the range has no such end.
    low_open : bool
        Whether the lower end itself is excluded.

    Returns
    -------
    str
        The range in engineering notation; ``"any"`` where both ends are open.
    """
    lower = None if math.isinf(low) else format_quantity(low, unit, 12)
    upper = None if math.isinf(high) else format_quantity(high, unit, 12)
    if lower is None:
        return "any" if upper is None else f"up to {upper}"
    if upper is None:
        return f"above {lower}" if low_open else f"{lower} or more"
    return f"{'> ' if low_open else ''}{lower} .. {upper}"


def deck_number(value: float) -> str:
    """Write a number for a deck: plain exponents, never a suffix.

    Parameters
    ----------
    value : float
        Finite value in SI units.

    Returns
    -------
    str
        The shortest text that reads back as the same float.

    Raises
    ------
    QuantityError
        If the value is no finite number: a deck would take it for a name.

    Examples
    --------
    >>> deck_number(2.2e-9), deck_number(50)
    ('2.2e-09', '50')
    """
    if isinstance(value, bool) or not math.isfinite(value):
        raise QuantityError("only a finite number can stand in a deck", found=repr(value))
    text = repr(float(value) + 0.0)
    return text.removesuffix(".0")


def decibels(ratio: complex) -> float:
    """Return 20 log10 of the magnitude of an amplitude ratio.

    Parameters
    ----------
    ratio : complex
        Ratio of two voltages or waves.

    Returns
    -------
    float
        Level [dB]; minus infinity for a ratio of zero.

    Examples
    --------
    >>> decibels(0.1)
    -20.0
    """
    magnitude = abs(ratio)
    return 20.0 * math.log10(magnitude) if magnitude > 0.0 else -math.inf


def dbm_to_peak_volts(level_dbm: float, impedance: float) -> float:
    """Return the peak voltage of a sine wave that delivers a level into a matched load.

    Parameters
    ----------
    level_dbm : float
        Power in the load [dBm].
    impedance : float
        Load resistance [ohm], above zero.

    Returns
    -------
    float
        Peak voltage across the load [V], sqrt(2 P Z0).

    Raises
    ------
    QuantityError
        If the impedance is not above zero.
    """
    if not impedance > 0.0:
        raise QuantityError(
            "the impedance must be above zero", expected=UNITS["ohm"].expected, found=f"{impedance} ohm"
        )
    return math.sqrt(2.0 * 10.0 ** (level_dbm / 10.0) * 1e-3 * impedance)
