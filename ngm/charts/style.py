"""Colours, ink and short numbers, the same in every picture.

The palette is Okabe & Ito's, told apart by people with the common forms of colour blindness; nothing is told by colour
alone all the same: line styles, shapes and words say it too.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

__all__ = ["DARK", "LIGHT", "PALETTE", "Ink", "ink", "short"]

#: Okabe & Ito (2008), "Color Universal Design": blue, vermillion, green, orange, sky blue, purple.
PALETTE = ("#0072B2", "#D55E00", "#009E73", "#E69F00", "#56B4E9", "#CC79A7")


@dataclass(frozen=True, slots=True)
class Ink:
    """The colours of a picture on one background.

    `text`: letters and lines; `faint`: rules and help lines; `first`: the plain mark; `strong`: what is pointed at;
    `fill`: the inside of a box.
    """

    text: str
    faint: str
    first: str
    strong: str
    fill: str


LIGHT = Ink(text="#1f2430", faint="#6b7280", first="#0072B2", strong="#B34700", fill="#eef3f8")
DARK = Ink(text="#f2f4f8", faint="#a7b0bd", first="#56B4E9", strong="#FF9A4D", fill="#1d2633")


def ink(dark: bool) -> Ink:
    """Return the ink for a dark or a light background."""
    return DARK if dark else LIGHT


def short(value: float | None, digits: int = 4) -> str:
    """Return a number for reading, with `digits` significant digits; a dash where there is none.

    A number that is not 1 is never rounded to "1": on which side of 1 a reproduction number lies is what it is read
    for, so digits are added until it shows.
    """
    if value is None or math.isnan(value):
        return "–"
    if math.isinf(value):
        return "∞" if value > 0 else "-∞"
    text = _rounded(value, digits)
    while float(text.replace(",", "")) == 1 and value != 1 and digits < 17:
        digits += 1
        text = _rounded(value, digits)
    return text


def _rounded(value: float, digits: int) -> str:
    size = abs(value)
    if 10**digits <= size < 1e9:
        return f"{value:,.0f}"
    text = f"{value:.{digits}g}"
    if "e" in text:
        head, tail = text.split("e")
        text = f"{head}e{int(tail)}"
    return text
