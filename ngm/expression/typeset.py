r"""Tree -> LaTeX, in commands that KaTeX, pandoc and TeX all know.

Names and group labels are other people's text: whatever they hold comes out as letters to be shown, never as a command.
"""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Collection

from ngm.expression.decimals import NUMBER, decimal_text, fraction_texts
from ngm.expression.names import GREEK
from ngm.expression.parse import parse
from ngm.expression.tree import Add, Apply, Call, Multiply, Name, Negate, Node, Number, Power, Total, fold

__all__ = ["latex", "latex_of"]

# How tightly the outermost operator binds on the page. A fraction or a root is its own bracket.
_SUM, _SIGN, _TOTAL, _PRODUCT, _FRACTION, _FUNCTION, _ATOM = range(7)

_Piece = tuple[str, int]

#: Capitals that look like Latin letters have no command.
_LATIN_CAPITALS = {
    "Alpha": "A",
    "Beta": "B",
    "Epsilon": "E",
    "Zeta": "Z",
    "Eta": "H",
    "Iota": "I",
    "Kappa": "K",
    "Mu": "M",
    "Nu": "N",
    "Omicron": "O",
    "Rho": "P",
    "Tau": "T",
    "Chi": "X",
}
_COMMANDS = {spelling: f"\\{spelling}" for spelling in GREEK.values() if spelling not in _LATIN_CAPITALS}
_COMMANDS |= {spelling: rf"\mathrm{{{letter}}}" for spelling, letter in _LATIN_CAPITALS.items()}
_COMMANDS["omicron"] = "o"

#: What a label may hold that TeX would read as a command, as a command of mathematics.
_SPECIAL = {
    "\\": r"\backslash ",
    "{": r"\{",
    "}": r"\}",
    "$": r"\$",
    "&": r"\&",
    "#": r"\#",
    "%": r"\%",
    "_": r"\_",
    "^": r"\wedge ",
    "~": r"\sim ",
    "`": r"\prime ",
    "<": "<",
    ">": ">",
    "|": r"\vert ",
}

_STEM_AND_DIGITS = re.compile(r"([A-Za-z]+?)([0-9]+)")


def latex(node: Node) -> str:
    r"""Return the expression as LaTeX mathematics, without the dollar signs around it.

    Divisions are fractions. ``beta_1`` is a Greek letter with an index, a name of several letters stands upright, the
    groups of ``sigma[65+]`` are an index. ``C(x)`` is the product of a matrix and a vector, ``\left(C\,x\right)``, and
    ``sum(x, age)`` is ``\sum_{\text{age}} x``. A digit at the end of a single letter or Greek name is an index, too:
    ``I1`` and ``I_1`` look the same.

    Parameters
    ----------
    node : Node
        Any depth; nothing recurses.

    Returns
    -------
    str
        One line.

    Examples
    --------
    >>> latex(parse("beta_1*S/(gamma + mu)"))
    '\\frac{\\beta_{1}\\,S}{\\gamma + \\mu}'
    """
    return fold(node, _piece)[0]


def latex_of(text: str, *, items: bool = True, matrices: Collection[str] | None = None) -> str:
    """Return the LaTeX of an expression given as text, as results hold it; any name before a parenthesis is a matrix.

    Raises
    ------
    ExpressionError
        The text is no expression.
    """
    return latex(parse(text, items=items, matrices=matrices))


def _piece(node: Node, parts: list[_Piece]) -> _Piece:
    match node:
        case Number():
            return _number(node)
        case Name():
            return _name(node.name, node.groups), _ATOM
        case Add(terms=terms):
            return _sum([sign for sign, _ in terms], parts), _SUM
        case Multiply(factors=factors):
            above = [part for (side, _), part in zip(factors, parts, strict=True) if side > 0]
            below = [part for (side, _), part in zip(factors, parts, strict=True) if side < 0]
            if not below:
                return _product(above), _PRODUCT
            return rf"\frac{{{_product(above)}}}{{{_product(below)}}}", _FRACTION
        case Negate():
            return f"-{_within(parts[0], _TOTAL)}", _SIGN
        case Power():
            return f"{_within(parts[0], _ATOM)}^{{{parts[1][0]}}}", _FUNCTION
        case Call(function=function):
            return _call(function, [text for text, _ in parts])
        case Total(dimension=dimension):
            index = f"_{{{_label(dimension)}}}" if dimension else ""
            return rf"\sum{index} {_within(parts[0], _PRODUCT)}", _TOTAL
        case Apply(matrix=matrix):
            return rf"\left({_name(matrix)}\,{_within(parts[0], _FRACTION)}\right)", _ATOM


def _within(part: _Piece, least: int) -> str:
    text, binding = part
    return text if binding >= least else rf"\left({text}\right)"


def _sum(signs: list[int], parts: list[_Piece]) -> str:
    text = ""
    for place, (sign, part) in enumerate(zip(signs, parts, strict=True)):
        first, last = place == 0, place == len(parts) - 1
        # a + (b + c) needs no parentheses, a - (b + c) and a + (-b) do; a sum over groups swallows what comes after it.
        fits = part[1] >= _PRODUCT or (part[1] == _TOTAL and last) or (part[1] == _SIGN and first and sign > 0)
        fits = fits or (
            part[1] == _SUM and sign > 0 and (first or not part[0].startswith("-")) and r"\sum" not in part[0]
        )
        shown = part[0] if fits else rf"\left({part[0]}\right)"
        text += shown if first and sign > 0 else f"-{shown}" if first else f" {'+' if sign > 0 else '-'} {shown}"
    return text or "0"


def _product(parts: list[_Piece]) -> str:
    if len(parts) == 1:
        return parts[0][0]
    text = ""
    for part in parts:
        shown = _within(part, _PRODUCT)
        # "2 1/2" would read as two and a half, "x 2" as a name.
        numeric = shown[:1].isdigit() or (shown.startswith(r"\frac") and text[-1:].isdigit())
        text += shown if not text else rf" \cdot {shown}" if numeric else rf"\,{shown}"
    return text or "1"


def _call(function: str, arguments: list[str]) -> _Piece:
    if function == "sqrt":
        return rf"\sqrt{{{arguments[0]}}}", _FRACTION
    command = {"exp": r"\exp", "log": r"\ln", "max": r"\max", "min": r"\min"}[function]
    return rf"{command}\left({', '.join(arguments)}\right)", _FUNCTION


def _number(node: Number) -> _Piece:
    text = node.text if NUMBER.fullmatch(node.text) else decimal_text(abs(node.value))
    if text is None:
        above, below = fraction_texts(node.value)
        shown, binding = rf"\frac{{{above}}}{{{below}}}", _FRACTION
    else:
        shown, binding = _decimal(text)
    return (shown, binding) if node.value >= 0 else (f"-{shown}", _SIGN)


def _decimal(text: str) -> _Piece:
    mantissa, _, exponent = text.lower().partition("e")
    whole, _, part = mantissa.partition(".")
    plain = f"{whole or '0'}.{part}" if part else whole
    if not exponent:
        return plain, _ATOM
    power = f"10^{{{exponent.lstrip('+')}}}"
    return (power, _FUNCTION) if plain == "1" else (rf"{plain} \cdot {power}", _PRODUCT)


def _name(name: str, groups: tuple[str, ...] = ()) -> str:
    stem, *indices = name.split("_")
    if not all([stem, *indices]):
        # Two underscores in a row or one at the end: nothing to make an index of.
        escaped = name.replace("_", r"\_")
        shown: str = rf"\mathrm{{{escaped}}}"
        indices = []
    else:
        found = _STEM_AND_DIGITS.fullmatch(stem)
        if found and (len(found.group(1)) == 1 or found.group(1) in _COMMANDS):
            stem, digits = found.groups()
            indices.insert(0, digits)
        shown = _word(stem)
    below = [*(_word(index) for index in indices), *(_label(group) for group in groups)]
    return f"{shown}_{{{','.join(below)}}}" if below else shown


def _word(word: str) -> str:
    if word in _COMMANDS:
        return _COMMANDS[word]
    return word if len(word) == 1 or word.isdigit() else rf"\mathrm{{{word}}}"


def _label(label: str) -> str:
    r"""Return a label as upright text: ``\text{…}``, what TeX would take for a command written between such pieces."""
    pieces: list[str] = []
    plain = ""
    for character in label:
        command = _SPECIAL.get(character) or _COMMANDS.get(GREEK.get(character, ""))
        if command is None:
            # No line ends and no invisible characters: they end a formula, or turn the direction of the text.
            plain += character if unicodedata.category(character)[0] != "C" and character not in "\u2028\u2029" else " "
            continue
        if plain:
            pieces.append(rf"\text{{{plain}}}")
            plain = ""
        pieces.append(f"{{{command}}}")
    if plain or not pieces:
        pieces.append(rf"\text{{{plain}}}")
    return "".join(pieces)
