"""Units as people write them: one reader, one conversion, one printed form. pint does the converting.

pint takes a good third of a second to import, so it is imported when the first unit is read, and one registry is kept.
"""

from __future__ import annotations

import re
import threading
from functools import lru_cache
from typing import TYPE_CHECKING, Any, Final, overload

import numpy as np
import numpy.typing as npt

from app.catalogue.listing import PROPERTIES, find_property
from app.errors import InputError
from app.tensor.printing import print_superscript, print_value, replace_minus_signs

if TYPE_CHECKING:
    import pint

FloatArray = npt.NDArray[np.float64]

UNIT_LIMIT: Final = 100

_LOCK: Final = threading.Lock()
_EXAMPLES: Final = "Write for example W/(m·K), mW/(cm K), 1e-6/K, µV/K, S/m, ohm cm, mm^2/s; 1 for a bare number."
_SUSCEPTIBILITY: Final = "In SI a susceptibility of unit volume has the unit 1; it is 4π times the cgs number."
_CELSIUS_NAMES: Final = frozenset({"°C", "degC", "celsius", "°F", "degF", "fahrenheit"})
_SAME_CHARACTER: Final = str.maketrans(
    {
        **dict.fromkeys("\u00b7\u22c5\u2022\u00d7\u2219\u2217", "*"),
        **dict.fromkeys("\u2044\u2215\u00f7", "/"),
        **dict.fromkeys("\u00a0\u2009\u202f\u2002\u2003\t", " "),
        "\u2126": "Ω",
        "\u03bc": "µ",
        "\u212a": "K",
        "\u212b": "Å",
        "\u2103": "°C",
    }
)
_RAISED: Final = re.compile("[⁺⁻]?[⁰¹²³⁴⁵⁶⁷⁸⁹]+")
_RAISED_TO_PLAIN: Final = str.maketrans("⁰¹²³⁴⁵⁶⁷⁸⁹⁻⁺", "0123456789-+")
_TOKEN: Final = re.compile(
    r"\s*(?:(?P<number>[0-9]{1,15}(?:\.[0-9]{0,20})?(?:[eE][+-]?[0-9]{1,2})?(?![0-9.]|[eE][+-]?[0-9]))"
    r"|(?P<name>Δ?°[CF](?![A-Za-z])|[°%‰]|[A-Za-zµΩÅΔ_]+)(?P<raised>[+-]?[0-9]{1,2}(?![0-9.]))?"
    r"|(?P<power>(?:\*\*|\^)\s*(?:\(\s*[+-]?[0-9]{1,2}\s*\)|[+-]?[0-9]{1,2}(?![0-9.])))"
    r"|(?P<sign>\*(?!\*)|[/()]))"
)
_WORD: Final = re.compile(r"(?<![0-9.])(?:Δ?°[CF]|[A-Za-zµΩÅΔ_]+)")
_READABLE_SIGNS: Final = {"degree": "°", "percent": "%", "permille": "‰"}
_OTHER_SPELLING: Final = {"dimensionless": "1.0", "unitless": "1.0", "°": "degree", "%": "percent", "‰": "permille"}


def print_unit(text: str) -> str:
    """The one printed form of a unit: ``W m^-1 K^-1``, ``W/m/K`` and ``W/(m K)`` give ``W/(m·K)``.

    Raises:
        InputError: the unit cannot be read, is unknown, or has a zero of its own (like °C).
    """
    # What the catalogue spells it also prints, and the first page then need not wait for pint.
    return _list_printed().get(text) or compose_unit(text)


@lru_cache(maxsize=1)
def _list_printed() -> dict[str, str]:
    """The printed form of every unit of the catalogue, by either of its spellings."""
    units = [unit for entry in PROPERTIES if not entry.own_unit for unit in (entry.unit, *entry.units)]
    return {spelling: unit.printed for unit in units for spelling in (unit.text, unit.printed)}


def compose_unit(text: str) -> str:
    """The printed form of a unit, read and put together anew; otherwise as ``print_unit``."""
    return _compose(_read_unit(text), _WORD.findall(_spell_for_library(text)))


def find_factor(source: str, target: str) -> float:
    """The factor f of value_target = f · value_source, exact to 15 digits.

    Raises:
        InputError: a unit cannot be read, or the two measure different things.
    """
    return _find_factor(source.strip(), target.strip())


@overload
def convert_unit(values: float, source: str, target: str) -> float: ...
@overload
def convert_unit(values: npt.ArrayLike, source: str, target: str) -> float | FloatArray: ...
def convert_unit(values: npt.ArrayLike, source: str, target: str) -> float | FloatArray:
    """Values of one unit in another.

    Args:
        values: a number or an array of any shape; differences and standard deviations convert alike, since no unit
            with a zero of its own is taken.
        source: the unit that the values have.
        target: the unit that is wanted.

    Returns:
        A float for a number, else a new array of the same shape.

    Raises:
        InputError: a unit cannot be read or has a zero of its own; the two measure different things; a value is not
            finite, or would not be.
    """
    factor = find_factor(source, target)
    numbers = np.asarray(values, dtype=np.float64)
    # Dividing by 10 is exact where multiplying by 0.1 is not.
    with np.errstate(over="ignore"):
        converted = numbers * factor if factor >= 1 else numbers / float(f"{1 / factor:.15g}")
    if not np.all(np.isfinite(converted)):
        raise InputError("Only finite values can be converted, to finite values.", field="values")
    return float(converted) if converted.ndim == 0 else converted


def check_unit(property_key: str, unit: str) -> None:
    """Make sure that a unit measures the property; the user's own unit of ``other`` is not read at all.

    Raises:
        InputError: the unit is unknown or measures something else; or there is no such property.
    """
    entry = find_property(property_key)
    if entry.own_unit:
        if len(unit) > UNIT_LIMIT:
            raise InputError(f"A unit has at most {UNIT_LIMIT} characters.", field="unit")
        return
    try:
        find_factor(unit, entry.unit.text)
    except InputError as error:
        known = ", ".join(known.printed for known in entry.units)
        hint = f"Units of {entry.name}: {known}."
        raise InputError(error.message, field="unit", hint=f"{error.hint} {hint}" if error.hint else hint) from None


@lru_cache(maxsize=1)
def _make_registry() -> pint.UnitRegistry[float]:
    import pint

    return pint.UnitRegistry()


def _get_registry() -> pint.UnitRegistry[float]:
    with _LOCK:
        return _make_registry()


def _spell_for_library(text: str) -> str:
    """The unit with every operator written out: ``W m⁻¹ K-1`` gives ``W*m**(-1)*K**(-1)``."""
    if len(text) > UNIT_LIMIT:
        raise InputError(f"A unit has at most {UNIT_LIMIT} characters.", field="unit", hint=_EXAMPLES)
    plain = replace_minus_signs(text.translate(_SAME_CHARACTER).strip())
    plain = _RAISED.sub(lambda found: f"^({found.group().translate(_RAISED_TO_PLAIN)})", plain)
    plain = re.sub(r"^[*xX]\s*(?=10\s*\^)", "", plain)
    if not plain:
        raise InputError("The unit is empty.", field="unit", hint="Write 1 for a bare number.")
    pieces: list[str] = []
    position, follows_operand = 0, False
    while position < len(plain):
        found = _TOKEN.match(plain, position)
        if found is None:
            raise InputError(
                f"The unit “{text.strip()}” cannot be read from “{plain[position:].strip()}” on.",
                field="unit",
                hint=_EXAMPLES,
            )
        position = found.end()
        token = found.group().strip()
        if found["power"]:
            if pieces and pieces[-1].startswith("**"):
                raise InputError(f"The unit “{text.strip()}” has a power of a power.", field="unit", hint=_EXAMPLES)
            pieces.append(f"**({token.lstrip('*^').strip(' ()')})")
            follows_operand = True
            continue
        starts_operand = bool(found["number"] or found["name"] or token == "(")
        if starts_operand and follows_operand:
            pieces.append("*")
        if found["name"]:
            pieces.append(_OTHER_SPELLING.get(found["name"], found["name"]))
            pieces.extend([f"**({found['raised']})"] if found["raised"] else [])
        elif found["number"]:
            # As a float a huge power overflows at once; as an integer it would be worked out digit by digit.
            pieces.append(repr(float(token)))
        else:
            pieces.append(token)
        follows_operand = token not in {"*", "/", "("}
    return "".join(pieces)


def _read_unit(text: str) -> pint.Quantity[float]:
    """The unit as one quantity, checked to be a finite positive multiple of a unit without a zero of its own."""
    return _read_spelling(_spell_for_library(text), text.strip())


@lru_cache(maxsize=512)
def _read_spelling(spelling: str, shown: str) -> pint.Quantity[float]:
    import pint

    registry = _get_registry()
    names = set(_WORD.findall(spelling))
    if names & _CELSIUS_NAMES:
        raise InputError(
            f"The unit “{shown}” has a temperature scale with a zero of its own.",
            field="unit",
            hint="Write K: a difference of 1 °C is 1 K.",
        )
    try:
        quantity: pint.Quantity[float] = registry.Quantity(registry.parse_expression(spelling))
        magnitude = float(quantity.to_base_units().magnitude)
        multiplies = bool(quantity._is_multiplicative)
    except pint.UndefinedUnitError as error:
        names_given: Any = error.unit_names
        unknown = names_given if isinstance(names_given, str) else ", ".join(names_given)
        hint = _SUSCEPTIBILITY if "emu" in names else _EXAMPLES
        raise InputError(f"The unit “{unknown}” in “{shown}” is not known.", field="unit", hint=hint) from None
    except Exception:
        # pint's reader of expressions fails in many ways on text like "m*" or "1/0"; to the user they are all one.
        raise InputError(f"The unit “{shown}” cannot be read.", field="unit", hint=_EXAMPLES) from None
    if not multiplies:
        raise InputError(
            f"The unit “{shown}” is not a plain multiple: its zero or its scale is its own.",
            field="unit",
            hint="Convert the values to a linear unit first; of temperatures that is K.",
        )
    largest_power = max((abs(float(str(power))) for _, power in quantity.unit_items()), default=0.0)
    if not (0 < magnitude < np.inf and 1e-99 < float(quantity.magnitude) < 1e99 and largest_power < 100):
        raise InputError(f"The unit “{shown}” is zero, or out of all measure.", field="unit", hint=_EXAMPLES)
    return quantity


@lru_cache(maxsize=1024)
def _find_factor(source: str, target: str) -> float:
    given, wanted = _read_unit(source), _read_unit(target)
    if given.dimensionality != wanted.dimensionality:
        raise InputError(
            f"“{source}” and “{target}” measure different things, so values cannot be converted.",
            field="unit",
            hint=_explain_mismatch(source),
        )
    factor = float(given.to(wanted.units).magnitude) / float(wanted.magnitude)
    return float(f"{factor:.15g}")


def _explain_mismatch(source: str) -> str:
    spelling = _spell_for_library(source)
    if re.search(r"/[^()/]+\*[^()]", spelling):
        return "What follows a slash belongs below it only in parentheses: W/(m·K), or W/m/K."
    if "C" in _WORD.findall(spelling):
        return "C is the coulomb; write K for a difference of temperature."
    return "Mend the unit, or choose the property that it measures."


def _compose(quantity: pint.Quantity[float], written: list[str]) -> str:
    registry = _get_registry()
    order: list[str] = []
    for word in written:
        name = str(registry.get_name(word))
        if name not in order:
            order.append(name)
    powers = {str(name): round(float(str(power))) for name, power in quantity.unit_items()}
    # In the order in which it was written, the kelvin last: W/(m·K), whichever way it was typed.
    names = sorted(powers, key=lambda name: (name == "kelvin", order.index(name) if name in order else len(order)))
    above = [_print_factor(registry, name, powers[name]) for name in names if powers[name] > 0]
    below = [_print_factor(registry, name, -powers[name]) for name in names if powers[name] < 0]
    amount = _print_amount(float(quantity.magnitude))
    top = " ".join(part for part in (amount, "·".join(above)) if part) or "1"
    if not below:
        return top
    return f"{top}/({'·'.join(below)})" if len(below) > 1 else f"{top}/{below[0]}"


def _print_factor(registry: pint.UnitRegistry[float], name: str, power: int) -> str:
    symbol = str(registry.get_symbol(name))
    if name in _READABLE_SIGNS:
        symbol = _READABLE_SIGNS[name]
    elif not _WORD.fullmatch(symbol):
        symbol = name  # a symbol like π or R_∞, which the reader would not take back
    return symbol if power == 1 else f"{symbol}{print_superscript(power)}"


def _print_amount(magnitude: float) -> str:
    """A number before a unit: empty for 1, ``10⁻⁶`` for a power of ten."""
    if magnitude == 1:
        return ""
    printed = print_value(magnitude, digits=12)
    exponent = round(float(np.log10(magnitude)))
    if abs(magnitude / 10.0**exponent - 1) < 1e-14 and not 0 <= exponent <= 3:
        return f"10{print_superscript(exponent)}"
    return printed
