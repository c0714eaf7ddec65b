"""Numbers with their uncertainty, as people print and write them: ``12.48(8)``, and back.

The digits in parentheses are the standard deviation in units of the last digit shown. It is rounded to one digit, or
to two where these would be 10 to 19, and the value to the same place ("rule of 19"; common practice in
crystallography). Rounding is to even at a tie. The sign is a true minus, U+2212.
"""

from __future__ import annotations

import math
import re
from decimal import ROUND_HALF_EVEN, Context, Decimal
from typing import Final

from app.errors import InputError

MINUS: Final = "\u2212"
DEFAULT_DIGITS: Final = 6
TEXT_LIMIT: Final = 100

# Plain notation while the first digit stands between these powers of ten; a power of ten beside the number elsewhere.
_LOWEST_PLAIN: Final = -4
_HIGHEST_PLAIN: Final = 5
# Where value and uncertainty are further apart than a double holds, the zeros between them would say nothing.
_WIDEST_PARENTHESES: Final = 16
# Wide enough for every double with every place down to the smallest one.
_CONTEXT: Final = Context(prec=1400, rounding=ROUND_HALF_EVEN, Emin=-99999, Emax=99999)

_SUPERSCRIPTS: Final = str.maketrans("0123456789-", "⁰¹²³⁴⁵⁶⁷⁸⁹⁻")
_FROM_SUPERSCRIPTS: Final = str.maketrans("⁰¹²³⁴⁵⁶⁷⁸⁹⁻⁺", "0123456789-+")
_MINUS_SIGNS: Final = str.maketrans(dict.fromkeys("\u2212\u2013\u2010\u2011\ufe63\uff0d", "-"))

_UNSIGNED: Final = r"(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)"
_POWER: Final = r"(?:[eE]([+-]?[0-9]{1,4})|\s*[×xX*·]\s*10(?:\^|\*\*)?\(?([+-]?[0-9]{1,4})\)?)"
_PARENTHESES: Final = re.compile(rf"([+-]?)\s?({_UNSIGNED})(?:\(({_UNSIGNED})\))?{_POWER}?")
_PLUS_MINUS: Final = re.compile(rf"([+-]?)\s?({_UNSIGNED}){_POWER}?\s*(?:±|\+/-|\+-)\s*({_UNSIGNED}){_POWER}?")
_SHARED_POWER: Final = re.compile(rf"\(\s*([+-]?)\s?({_UNSIGNED})\s*(?:±|\+/-|\+-)\s*({_UNSIGNED})\s*\)\s*{_POWER}?")
_EXPONENT_INSIDE: Final = re.compile(rf"[+-]?\s?{_UNSIGNED}{_POWER}\(.*\)")
_EXAMPLES: Final = "Write 12.3, 12.3(4), 12.3 ± 0.4, 1.2e-6 or 1.2(3)e-6."


def print_superscript(number: int) -> str:
    """An integer in raised digits: −6 gives ``⁻⁶``."""
    return str(number).translate(_SUPERSCRIPTS)


def replace_minus_signs(text: str) -> str:
    """The text with every sign that people use for a minus turned into the hyphen-minus that programs read."""
    return text.translate(_MINUS_SIGNS)


def print_value(value: float, sigma: float | None = None, digits: int = DEFAULT_DIGITS) -> str:
    """One printed form of a number and its standard deviation.

    Args:
        value: any finite number.
        sigma: its standard deviation in the same unit, not negative. None is unknown and 0 is exact (a cell that
            symmetry holds at zero, say): both print the value alone.
        digits: significant digits where there is no sigma, 1 to 17; zeros at the end are dropped.

    Returns:
        ``12.48(8)``, ``23.34(17)``, ``1300(200)``, ``3.2(4)×10⁻⁶``; ``13.1955`` without sigma. Where sigma is more
        than sixteen places below the value's first digit, ``1 ± 1×10⁻³⁰``.

    Raises:
        InputError: the value or sigma is not finite, sigma is negative, or digits is out of range.
    """
    if not math.isfinite(value):
        raise InputError("Only a finite number can be printed.", field="value")
    if sigma is not None and not (math.isfinite(sigma) and sigma >= 0):
        raise InputError("A standard deviation is a finite number that is not negative.", field="sigma")
    if not 1 <= digits <= 17:
        raise InputError("A number is printed with 1 to 17 significant digits.", field="digits")
    exact = Decimal(repr(float(value)))
    if not sigma:
        return _print_alone(exact, digits)
    spread = Decimal(repr(float(sigma)))
    place = _find_last_place(spread)
    rounded, rounded_spread = _round_to(exact, place), _round_to(spread, place)
    first = max(number.adjusted() for number in (rounded, rounded_spread) if number)
    if first - place > _WIDEST_PARENTHESES:
        return f"{_print_alone(exact, 17)} ± {_print_alone(rounded_spread, 2)}"
    scale = 0 if _LOWEST_PLAIN <= first <= _HIGHEST_PLAIN else first
    places = max(scale - place, 0)
    mantissa = _print_plain(rounded.scaleb(-scale, _CONTEXT), places)
    units = int(rounded_spread.scaleb(places - scale, _CONTEXT))
    return f"{mantissa}({units}){_print_power(scale)}"


def _find_last_place(spread: Decimal) -> int:
    """The power of ten of the last digit that an uncertainty deserves."""
    first = spread.adjusted()
    two_digits = int(_round_to(spread, first - 1).scaleb(1 - first, _CONTEXT))
    return first - 1 if two_digits <= 19 else first


def _round_to(number: Decimal, place: int) -> Decimal:
    return number.quantize(Decimal(1).scaleb(place, _CONTEXT), context=_CONTEXT)


def _print_alone(number: Decimal, digits: int) -> str:
    if not number:
        return "0"
    rounded = _round_to(number, number.adjusted() - digits + 1)
    first = rounded.adjusted()
    scale = 0 if _LOWEST_PLAIN <= first <= _HIGHEST_PLAIN else first
    shortest = rounded.scaleb(-scale, _CONTEXT).normalize(_CONTEXT)
    exponent = shortest.as_tuple().exponent
    places = max(-exponent, 0) if isinstance(exponent, int) else 0
    return f"{_print_plain(shortest, places)}{_print_power(scale)}"


def _print_plain(number: Decimal, places: int) -> str:
    text = f"{_round_to(abs(number), -places):f}"
    return f"{MINUS}{text}" if number < 0 else text


def _print_power(scale: int) -> str:
    return f"×10{print_superscript(scale)}" if scale else ""


def parse_value(text: str, *, decimal_comma: bool = False) -> tuple[float, float | None]:
    """Read a number and, where it is written, its standard deviation.

    Args:
        text: ``15.92(9)``, ``-5.6 ± 0.2``, ``12.4(1.2)``, ``3.2(4)×10⁻⁶``, ``3.2(4)e-6``, ``(3.2 ± 0.4)e-6`` or a
            number alone. Digits in parentheses count in units of the value's last place, unless they carry a point
            of their own; then they are the standard deviation as it stands.
        decimal_comma: whether the comma is the decimal sign; then a point is refused, since it may part thousands.

    Returns:
        (value, standard deviation or None).

    Raises:
        InputError: the text is no number, is not finite as a double, has the wrong decimal sign, or has its
            parentheses after the power of ten, where it is unclear which digits they count.
    """
    if len(text) > TEXT_LIMIT:
        raise InputError(f"A number has at most {TEXT_LIMIT} characters.", hint=_EXAMPLES)
    plain = replace_minus_signs(text.strip()).translate(_FROM_SUPERSCRIPTS)
    if decimal_comma:
        if "." in plain:
            raise InputError(f"“{text.strip()}” has a decimal point where decimal commas are used.")
        plain = plain.replace(",", ".")
    elif "," in plain:
        raise InputError(f"“{text.strip()}” has a comma; the decimal sign here is the point.", hint=_EXAMPLES)
    numbers = _match_value(plain)
    if numbers is None:
        if _EXPONENT_INSIDE.fullmatch(plain):
            raise InputError(
                f"In “{text.strip()}” it is unclear which digits the parentheses count.",
                hint="Put the power of ten last: 1.2(3)e-6.",
            )
        raise InputError(f"“{text.strip()}” is not a number.", hint=_EXAMPLES)
    value, sigma = (None if number is None else float(number) for number in numbers)
    if value is None or not math.isfinite(value) or (sigma is not None and not math.isfinite(sigma)):
        raise InputError(f"“{text.strip()}” is too large a number.")
    if any(number and not float(number) for number in numbers):
        raise InputError(f"“{text.strip()}” is too small a number.", hint="Write 0, or use a larger unit.")
    return value, sigma


def _match_value(plain: str) -> tuple[Decimal, Decimal | None] | None:
    if match := _PARENTHESES.fullmatch(plain):
        sign, digits, spread, *power = match.groups()
        return _scale(sign, digits, power), None if spread is None else _read_spread(digits, spread, power)
    if match := _PLUS_MINUS.fullmatch(plain):
        sign, digits, *rest = match.groups()
        return _scale(sign, digits, rest[:2]), _scale("", rest[2], rest[3:])
    if match := _SHARED_POWER.fullmatch(plain):
        sign, digits, spread, *power = match.groups()
        return _scale(sign, digits, power), _scale("", spread, power)
    return None


def _scale(sign: str, digits: str, power: list[str | None]) -> Decimal:
    exponent = next((int(part) for part in power if part is not None), 0)
    return Decimal(f"{sign}{digits}").scaleb(exponent, _CONTEXT)


def _read_spread(digits: str, spread: str, power: list[str | None]) -> Decimal:
    if "." in spread:
        return _scale("", spread, power)
    places = len(digits.partition(".")[2])
    return _scale("", spread, power).scaleb(-places, _CONTEXT)
