"""The one door between quantities with units and floats in SI units.

Text such as ``"10 K/min"`` comes in, a float in SI goes out, and back. Number and product of units
are taken apart here; `pint` is asked only what a single rare unit means, so none of its guesses on
whole texts can pass. The conversion is exact until the last rounding.
"""

from __future__ import annotations

import ast
import math
import re
from fractions import Fraction
from functools import cache, lru_cache
from typing import Any, Final, NoReturn

from spheru.errors import UnitError, nearest

__all__ = ["describe", "format_si", "from_si", "to_si", "unit_of"]

# The usual units, each by others; angles have a dimension of their own, so that none is a share.
_BASES: Final = ("m", "g", "s", "K", "mol", "rad")
_UNITS: Final = {
    "percent": "0.01",
    "permille": "1e-3",
    "ppm": "1e-6",
    "ppb": "1e-9",
    "phr": "0.01",
    "micron": "1e-6 m",
    "Å": "1e-10 m",
    "angstrom": "1e-10 m",
    "inch": "0.0254 m",
    "mil": "2.54e-5 m",
    "min": "60 s",
    "h": "3600 s",
    "d": "86400 s",
    "Hz": "1 1/s",
    "L": "1e-3 m^3",
    "l": "1e-3 m^3",
    "Da": "1.66053906660e-24 g",
    "N": "1e3 g m/s^2",
    "Pa": "1 N/m^2",
    "bar": "1e5 Pa",
    "atm": "101325 Pa",
    "J": "1 N m",
    "W": "1 J/s",
    "cal": "4.184 J",
    "erg": "1e-7 J",
    "dyn": "1e-5 N",
    "deg": "0.017453292519943295 rad",
    "degC": "1 K",
    "degF": "0.55555555555555555555 K",
}
_OFFSETS: Final = {"degC": Fraction("273.15"), "degF": Fraction("255.37222222222222222222")}
_PREFIXES: Final = {
    "p": "1e-12",
    "n": "1e-9",
    "u": "1e-6",
    "m": "1e-3",
    "c": "1e-2",
    "d": "1e-1",
    "h": "1e2",
    "k": "1e3",
    "M": "1e6",
    "G": "1e9",
}
_PREFIXED: Final = {"m", "g", "s", "K", "mol", "Hz", "L", "l", "N", "Pa", "bar", "J", "W", "cal"}

# SI unit -> what a quantity in it is called, an example as a user would write it.
_KINDS: Final = {
    "1": ("a share", "1000 ppm"),
    "K": ("a temperature", "130 degC"),
    "K/s": ("a rate", "10 K/min"),
    "s": ("a time", "5 min"),
    "1/s": ("a frequency", "0.1 1/s"),
    "m": ("a length", "1 um"),
    "m/s": ("a growth rate", "10 um/min"),
    "1/m^2": ("a number per area", "1e9 1/m^2"),
    "1/m^3": ("a number per volume", "1e12 1/m^3"),
    "1/(m^3 s)": ("a number per volume and time", "1e10 1/(m^3 s)"),
    "1/K": ("a slope per kelvin", "0.15 1/K"),
    "1/K^2": ("a curvature per square kelvin", "1.5e-3 1/K^2"),
    "K^2": ("a constant in square kelvins", "3.2e5 K^2"),
    "K/Pa": ("a shift per pressure", "0.3 K/MPa"),
    "Pa": ("a pressure", "10 MPa"),
    "kg/m^3": ("a density", "905 kg/m^3"),
    "kg/mol": ("a molar mass", "300 kg/mol"),
    "J/kg": ("a heat per mass", "207 J/g"),
    "J/mol": ("an energy per amount", "6270 J/mol"),
    "J/m^2": ("a surface energy", "11.5 mJ/m^2"),
    "J/m^3": ("an energy per volume", "1.96e8 J/m^3"),
    "rad": ("an angle", "60 deg"),
}

_NUMBER: Final = re.compile(r"[+-]?(?:\d{1,40}\.?\d{0,40}|\.\d{1,40})(?:[eE][+-]?\d{1,3})?")
# A power: ^3, **3 or plain 3 after a unit's letters, -3 likewise.
_POWER: Final = re.compile(r"(?<=[A-Za-zÅ])\s*(?:\^|\*\*)?(?:\((-?[1-9])\)|(-?[1-9]))(?![\d.])")
_PARTS: Final = {
    "\u00a0": " ",
    "\u2009": " ",
    "\u202f": " ",
    "°C": "degC",
    "℃": "degC",
    "°F": "degF",
    "℉": "degF",
    "°": "deg",
    "\u212b": "Å",
    "µ": "u",
    "μ": "u",
    "−": "-",
    "·": "*",
    "⋅": "*",
    "×": "*",
    "‰": "permille",
    "wt.%": "percent",
    "wt%": "percent",
    "wt-%": "percent",
    "wt %": "percent",
    "%": "percent",
}
_MEANT: Final = {"C": "degC", "F": "degF", "celsius": "degC", "Celsius": "degC"}
_PINT: Final = {
    "[length]": "m",
    "[mass]": "g",
    "[time]": "s",
    "[temperature]": "K",
    "[substance]": "mol",
}
_RAISED: Final = re.compile("[⁻⁰¹²³⁴⁵⁶⁷⁸⁹]+")
_PLAIN: Final = str.maketrans("⁻⁰¹²³⁴⁵⁶⁷⁸⁹", "-0123456789")


class _Fault(Exception):  # noqa: N818 (it never leaves this module)
    """Why a unit cannot be read."""


def describe(unit: str, *, difference: bool = False) -> tuple[str, str]:
    """Return what a quantity in an SI unit is called, and an example of one.

    Parameters
    ----------
    unit : str
        SI unit, ``"1"`` for a share.
    difference : bool, optional
        Whether a temperature is meant as a difference.

    Returns
    -------
    kind : str
        What it is, with its article.
    example : str
        How it may be written in a file.

    Examples
    --------
    >>> describe("K/s")
    ('a rate', '10 K/min')
    """
    if unit == "K" and difference:
        return "a temperature difference", "20 K"
    return _KINDS.get(unit, (f"a quantity in {unit}", f"1 {unit}"))


def to_si(text: str, unit: str, *, difference: bool = False) -> float:
    """Return the value of a quantity in an SI unit.

    Parameters
    ----------
    text : str
        Number and unit, such as ``"10 K/min"``. Degrees Celsius inside a compound unit are
        differences. ``phr`` counts as a hundredth.
    unit : str
        The SI unit wanted, ``"1"`` for a share.
    difference : bool, optional
        Whether a temperature is meant as a difference; ``"20 degC"`` is refused then.

    Returns
    -------
    value : float
        The value [`unit`], finite.

    Raises
    ------
    UnitError
        If there is no unit, an unknown or an ambiguous one, a wrong dimension, a decimal comma, a
        number that is not finite, or a temperature below absolute zero.

    Examples
    --------
    By hand: 12 K/min = 12 K / 60 s = 0.2 K/s; 130 degC = 130 + 273.15 K.

    >>> to_si("12 K/min", "K/s")
    0.2
    >>> to_si("130 degC", "K")
    403.15
    >>> to_si("10 C", "K/s")
    Traceback (most recent call last):
    ...
    spheru.errors.UnitError: expected a rate like '10 K/min', got '10 C'; 'C' is ...
    """
    if not isinstance(text, str):
        _refuse(text, unit, difference, "a number needs its unit, in quotes")
    number, rest = _split(text)
    if number is None:
        _refuse(text, unit, difference, "")
    if re.match(r",\d", rest):
        _refuse(text, unit, difference, "write a decimal point, not a comma")
    if not rest.strip():
        _refuse(text, unit, difference, "a number needs its unit")
    try:
        factor, offset = _scale(rest, unit, difference)
        value = float(Fraction(number) * factor + offset)
    except _Fault as fault:
        _refuse(text, unit, difference, str(fault))
    except OverflowError:
        value = math.inf
    if not math.isfinite(value):
        _refuse(text, unit, difference, "the number is too large")
    if unit == "K" and not difference and value < 0:
        _refuse(text, unit, difference, "that lies below absolute zero")
    return value


def from_si(value: float, unit: str) -> float:
    """Return the value of an SI quantity in another unit.

    Parameters
    ----------
    value : float
        The value in SI units.
    unit : str
        The unit wanted; ``"degC"`` alone is a temperature, in a compound a difference.

    Returns
    -------
    value : float
        The value [`unit`]; nan and infinities are handed on.

    Raises
    ------
    UnitError
        If the unit is not known.

    Examples
    --------
    By hand: 403.15 K - 273.15 K = 130 degC; 0.2 K/s x 60 s/min = 12 K/min.

    >>> from_si(403.15, "degC"), from_si(0.2, "K/min")
    (130.0, 12.0)
    """
    value = float(value)
    if not math.isfinite(value):
        return value
    try:
        factor, offset = _scale(unit, None, False)
    except _Fault as fault:
        raise UnitError(f"expected a unit such as 'um', got '{unit}'; {fault}") from None
    return float((Fraction(repr(value)) - offset) / factor)


def format_si(value: float, unit: str, digits: int = 6) -> str:
    """Return an SI quantity as text with a unit.

    Parameters
    ----------
    value : float
        The value in SI units.
    unit : str
        The unit to show.
    digits : int, optional
        Significant digits.

    Returns
    -------
    text : str
        Number and unit, which `to_si` reads back.

    Examples
    --------
    >>> format_si(403.15, "degC")
    '130 degC'
    """
    return f"{from_si(value, unit):.{digits}g} {unit}"


def _split(text: str) -> tuple[str | None, str]:
    """Take number and unit apart, in plain letters; None where no number leads."""
    for part, meaning in _PARTS.items():
        text = text.replace(part, meaning)
    text = text.strip()
    number = _NUMBER.match(text)
    return (number[0], text[number.end() :]) if number else (None, text)


def unit_of(text: str) -> str:
    """Return the unit of a quantity that `to_si` has read.

    Parameters
    ----------
    text : str
        Number and unit.

    Returns
    -------
    unit : str
        The unit in plain letters.

    Examples
    --------
    >>> unit_of("1.5 µm")
    'um'
    """
    return _split(text)[1].strip()


def _refuse(text: object, unit: str, difference: bool, why: str) -> NoReturn:
    kind, example = describe(unit, difference=difference)
    shown = repr(text if not isinstance(text, str) or len(text) <= 60 else f"{text[:57]}...")
    raise UnitError(f"expected {kind} like '{example}', got {shown}" + (f"; {why}" if why else ""))


_Meaning = tuple[Fraction, dict[str, int]]  # factor to the base units, and their powers


@lru_cache(512)
def _scale(text: str, unit: str | None, difference: bool) -> tuple[Fraction, Fraction]:
    """Return factor and offset that lead from a unit to SI, or say what is wrong with it."""
    powers = _powers(text)
    bare = next(iter(powers)) if list(powers.values()) == [1] else ""
    if bare in _OFFSETS and difference:
        raise _Fault(f"{bare} is a point on a scale: write the difference in K")
    factor, dimension = _product(powers)
    if unit is not None and dimension != _product(_powers(unit))[1]:
        raise _Fault("")
    factor /= Fraction(1000) ** dimension.get("g", 0)  # the mass of SI is the kilogram
    return factor, _OFFSETS.get(bare, Fraction(0))


def _product(powers: dict[str, int]) -> _Meaning:
    factor, dimension = Fraction(1), dict.fromkeys(_BASES, 0)
    for name, power in powers.items():
        one, bases = _meaning(name)
        factor *= one**power
        for base, times in bases.items():
            dimension[base] = dimension.get(base, 0) + times * power
    return factor, {base: power for base, power in dimension.items() if power}


@lru_cache(512)
def _meaning(name: str) -> _Meaning:
    """Return what the name of a single unit stands for."""
    if name in _BASES:
        return Fraction(1), {name: 1}
    if name in _UNITS:
        number, rest = _split(_UNITS[name])
        factor, dimension = _product(_powers(rest)) if rest else (Fraction(1), {})
        return Fraction(number or 1) * factor, dimension
    if name[0] in _PREFIXES and name[1:] in _PREFIXED:
        factor, dimension = _meaning(name[1:])
        return Fraction(_PREFIXES[name[0]]) * factor, dimension
    return _rare_meaning(name)


@cache
def _library() -> tuple[Any, type[Exception]]:
    import pint  # noqa: PLC0415 (it costs 0.3 s, and only a rare unit needs it)

    return pint.UnitRegistry(), pint.PintError


def _rare_meaning(name: str) -> _Meaning:
    """Return what pint knows under a name that is not in the table above."""
    registry, library_fault = _library()
    try:
        found, nothing = (registry.Quantity(n, name).to_base_units() for n in (1.0, 0.0))
        dimension = {_PINT.get(base, base): int(n) for base, n in found.dimensionality.items()}
    except (library_fault, ValueError, TypeError, AttributeError):
        dimension = {}
    if dimension and nothing.magnitude != 0:  # a scale with a zero of its own
        dimension = {}
    if not dimension or name in _MEANT:
        close = _MEANT.get(name) or nearest(name, (*_BASES, *_UNITS))
        hint = f", did you mean {close}?" if close else ""
        raise _Fault(f"'{name}' is no known unit{hint}") from None
    thousand = Fraction(1000) ** dimension.get("g", 0)  # pint counts in kilograms
    return Fraction(repr(float(found.magnitude))) * thousand, dimension


def _powers(text: str) -> dict[str, int]:
    """Return the power of every unit in a product such as ``1/(m^3 s)``."""
    product = _RAISED.sub(lambda digits: "^" + digits[0].translate(_PLAIN), text.strip())
    product = _POWER.sub(lambda power: f"**{power[1] or power[2]}", product)
    product = re.sub(r"(?<=[\w)])\s+(?=[\w(])", "*", product)
    if product.startswith("/"):
        product = f"1{product}"
    if not re.fullmatch(r"[A-Za-zÅ\d*/()\s-]{1,80}", product) or re.search(r"\d[A-Za-zÅ]", product):
        raise _Fault(f"'{text.strip()}' is no unit")
    try:
        return _collect(ast.parse(product, mode="eval").body)
    except (SyntaxError, ValueError, MemoryError, RecursionError):
        raise _Fault(f"'{text.strip()}' is no unit") from None


def _collect(node: ast.expr) -> dict[str, int]:
    match node:
        case ast.Constant(value=value) if value == 1 and value is not True:
            return {}
        case ast.Name(id=name):
            return {name: 1}
        case ast.BinOp(left=ast.Name(id=name), op=ast.Pow(), right=ast.Constant(value=int(power))):
            return {name: power}
        case ast.BinOp(
            left=ast.Name(id=name),
            op=ast.Pow(),
            right=ast.UnaryOp(op=ast.USub(), operand=ast.Constant(value=int(power))),
        ):
            return {name: -power}
        case ast.BinOp(left=ast.BinOp(op=ast.Div()), op=ast.Mult()):
            raise _Fault("that is ambiguous, bracket what stands below the line")
        case ast.BinOp(left=left, op=ast.Mult() | ast.Div() as op, right=right):
            powers, sign = _collect(left), 1 if isinstance(op, ast.Mult) else -1
            for name, power in _collect(right).items():
                powers[name] = powers.get(name, 0) + sign * power
            return powers
    raise ValueError
