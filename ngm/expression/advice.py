"""What to write instead of a character or a function that the expression syntax does not have."""

from __future__ import annotations

import unicodedata

from ngm.expression.names import GREEK

__all__ = ["FOREIGN_FUNCTIONS", "advice", "quoted"]

#: Functions that people are used to, and what gives the same here.
FOREIGN_FUNCTIONS: dict[str, str] = {
    "ln": "Write log(x), the natural logarithm.",
    "log10": "Write log(x)/log(10).",
    "log2": "Write log(x)/log(2).",
    "pow": "Write x^y.",
    "power": "Write x^y.",
    "abs": "Write sqrt(x^2).",
    "total": "Write sum(x).",
}

_MULTIPLY = "Write * to multiply."
_MINUS = "Write - (the hyphen of the keyboard) to subtract."
_DIVIDE = "Write / to divide."
_COMPARE = "An expression holds no comparison."

#: Character -> advice.
_CHARACTERS: dict[str, str] = {
    **dict.fromkeys("×·⋅∙•∗✕✖", _MULTIPLY),
    **dict.fromkeys("−–—‐‑‒―", _MINUS),
    **dict.fromkeys("÷∕⁄", _DIVIDE),
    **dict.fromkeys("<>≤≥≠!", _COMPARE),
    "=": "Write only what stands on the right of the equals sign; an expression holds no comparison.",
    "√": "Write sqrt(x).",
    "∑": "Write sum(x).",
    "∞": "A number is below 1e300.",
    ".": "A name has no parts after a point, and a number starts with a digit or with a point and a digit.",
    "[": "Index and list are not part of the syntax; a bare name stands for its value in the flow's own group.",
    "]": "Index and list are not part of the syntax; a bare name stands for its value in the flow's own group.",
    "{": "Write round parentheses: ( ).",
    "}": "Write round parentheses: ( ).",
    ";": "Write one expression.",
    ":": "Write one expression.",
    "%": "For 5 % write 0.05.",
    "_": "A name starts with a letter.",
    "\\": "Write names without a backslash: beta or β.",
    "#": "Write comments outside the expression.",
    **dict.fromkeys("'\"`´‘’“”", "Write names and numbers without quotes."),
}


def quoted(text: str, most: int = 40) -> str:
    """Return the text in quotes, cut to `most` characters, with what cannot be printed as its code point."""
    cut = text if len(text) <= most else text[: most - 1] + "…"
    return "'" + "".join(c if c.isprintable() else f"U+{ord(c):04X}" for c in cut) + "'"


def advice(text: str, position: int) -> tuple[str, str]:
    """Return what is wrong with the character at `position`, which no token starts with, and what to write instead."""
    character = text[position]
    if character == "_":
        stop = position
        while stop < min(len(text), position + 40) and (text[stop].isalnum() or text[stop] == "_"):
            stop += 1
        return f"{quoted(text[position:stop])} starts with '_'", _CHARACTERS["_"]
    if character in _CHARACTERS:
        return f"{quoted(character)} is not part of the syntax", _CHARACTERS[character]
    plain = unicodedata.normalize("NFKC", character)
    category = unicodedata.category(character)
    code = f"U+{ord(character):04X}"
    if not character.isprintable() or category == "Zs":
        name = unicodedata.name(character, "a control character").lower()
        return f"the character {code} ({name}) is not part of the syntax", "Write a plain space, or remove it."
    if "SUPERSCRIPT" in unicodedata.name(character, ""):
        return f"{quoted(character)} is not part of the syntax", f"Write ^{plain}."
    if "SUBSCRIPT" in unicodedata.name(character, ""):
        return f"{quoted(character)} is not part of the syntax", f"Write it after an underscore: x_{plain}."
    if plain != character and plain.isascii():
        return f"{quoted(character)} ({code}) is not part of the syntax", f"Write {plain} as on a keyboard."
    if plain.replace("⁄", "").isdecimal() and "⁄" in plain:
        return f"{quoted(character)} is not part of the syntax", f"Write {plain.replace('⁄', '/')}."
    if category.startswith("N"):
        return f"{quoted(character)} is not part of the syntax", "Write the digits 0 to 9."
    if plain in GREEK:
        return f"{quoted(character)} ({code}) is not part of the syntax", f"Write {plain} or {GREEK[plain]}."
    if category[0] in "LM":
        return (
            f"{quoted(character)} cannot stand in a name",
            "Its letters are A to Z and a to z and the Greek ones, bare.",
        )
    return f"{quoted(character)} is not part of the syntax", ""
