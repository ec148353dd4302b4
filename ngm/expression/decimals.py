"""Exact numbers from and to text, without ever building a huge integer."""

from __future__ import annotations

import re
from decimal import Decimal
from fractions import Fraction

__all__ = ["NUMBER", "decimal_text", "exact_value", "fraction_texts", "magnitude"]

#: A number as it may be typed: digits with at most one point, and an exponent.
NUMBER = re.compile(
    r"(?:(?P<whole>[0-9]+)(?:\.(?P<part>[0-9]*))?|\.(?P<only>[0-9]+))(?:[eE](?P<exponent>[+-]?[0-9]+))?"
)

#: A decimal of more digits than this is no short one.
_SHORT = 17


def magnitude(text: str) -> int | None:
    """Return the power of ten of a number's first digit (``0.05`` -> -2), or None for zero.

    Costs no more than the length of the text: an exponent of seven digits or more gives ±10,000,000 whatever it is, as
    no mantissa that fits into an expression brings it back into range.
    """
    found = NUMBER.fullmatch(text)
    if found is None:
        raise ValueError(f"{text!r} is not a number")
    mantissa = (found.group("whole") or "") + (found.group("part") or found.group("only") or "")
    if not mantissa.strip("0"):
        return None
    exponent = found.group("exponent") or "0"
    if len(exponent.lstrip("+-").lstrip("0")) > 6:
        return -(10**7) if exponent.startswith("-") else 10**7
    return Decimal(text).adjusted()


def exact_value(text: str) -> Fraction:
    """Return the value of a number; ask `magnitude` first, since the fraction has that many digits."""
    # Not Fraction(text): int() refuses texts of more than 4,300 digits, Decimal does not.
    return Fraction(0) if magnitude(text) is None else Fraction(Decimal(text))


def decimal_text(value: Fraction) -> str | None:
    """Return a number as a decimal where that is exact and at most 17 digits long, else None.

    Examples
    --------
    >>> decimal_text(Fraction(1, 8)), decimal_text(Fraction(1, 3)), decimal_text(Fraction(1, 10**7))
    ('0.125', None, '1e-7')
    """
    exact = _exact_decimal(value)
    if exact is None or len(exact.as_tuple().digits) > _SHORT:
        return None
    return _shortest(exact)


def fraction_texts(value: Fraction) -> tuple[str, str]:
    """Return the sizes of numerator and denominator as texts that can be read back; their quotient is exact."""
    above, below = abs(value.numerator), value.denominator
    size = max(Decimal(above).adjusted(), Decimal(below).adjusted())
    if size < 300:
        return format(Decimal(above), "f"), format(Decimal(below), "f")
    # Too large for a number of the syntax: both as decimals below 1, divided by the same power of ten.
    numerator, denominator = (f"0.{format(Decimal(part), 'f').zfill(size + 1)}" for part in (above, below))
    return numerator, denominator


def _exact_decimal(value: Fraction) -> Decimal | None:
    """Return the value as a decimal, or None where its denominator has other factors than 2 and 5, or many of them."""
    below = value.denominator
    if below.bit_length() > 2000:
        return None
    twos = (below & -below).bit_length() - 1
    below >>= twos
    fives = 0
    while below % 5 == 0:
        below //= 5
        fives += 1
    if below != 1:
        return None
    places = max(twos, fives)
    scaled = value.numerator * 2 ** (places - twos) * 5 ** (places - fives)
    sign, digits, _ = Decimal(scaled).as_tuple()
    zeros = 0
    while len(digits) - zeros > 1 and digits[-1 - zeros] == 0:
        zeros += 1
    return Decimal((sign, digits[: len(digits) - zeros], zeros - places))


def _shortest(exact: Decimal) -> str:
    plain = format(exact, "f")
    _, digits, exponent = exact.as_tuple()
    if not isinstance(exponent, int) or exact == 0:
        return "0"
    head = "".join(map(str, digits))
    power = exponent + len(head) - 1
    sign = "-" if exact < 0 else ""
    scientific = f"{sign}{head[0]}{'.' + head[1:] if len(head) > 1 else ''}e{power}"
    # People write 1000 and 0.0005; 1e3 and 5e-4 are shorter but no easier.
    return scientific if len(scientific) + 2 < len(plain) else plain
