r"""Letters that pdfTeX does not know by itself, declared for it; engines that read Unicode need nothing."""

from __future__ import annotations

from ngm.expression.names import GREEK

__all__ = ["declarations"]

#: From here on the usual fonts of TeX have next to nothing.
_FIRST = 0x180

#: Punctuation that every TeX of today knows.
_KNOWN = frozenset("–—‘’‚“”„†‡•…‰‹›€™")

_SIGNS = {
    "→": r"\rightarrow",
    "←": r"\leftarrow",
    "−": "-",
    "↪": r"\hookrightarrow",
    "≤": r"\leq",
    "≥": r"\geq",
    "≠": r"\neq",
    "≈": r"\approx",
    "∞": r"\infty",
    "⁻": "{}^{-}",
    "√": r"\surd",
    "′": r"{}^{\prime}",
    "∑": r"\sum",
}

#: Greek capitals that look like Latin letters have no command.
_LATIN = {
    "Alpha": "A",
    "Beta": "B",
    "Epsilon": "E",
    "Zeta": "Z",
    "Eta": "H",
    "Iota": "I",
    "Kappa": "K",
    "Mu": "M",
    "Nu": "N",
}
_LATIN |= {"Omicron": "O", "Rho": "P", "Tau": "T", "Chi": "X", "omicron": "o"}


def declarations(text: str) -> str:
    r"""Return LaTeX that tells pdfTeX how to show each sign of a text that it does not know.

    Greek letters and signs of mathematics are shown as they are; whatever else there is, as its number: ``[U+4E2D]``.

    Examples
    --------
    >>> declarations("plain")
    ''
    """
    lines = []
    for sign in sorted(set(text)):
        if ord(sign) < _FIRST or sign in _KNOWN:
            continue
        lines.append(rf"\DeclareUnicodeCharacter{{{ord(sign):04X}}}{{{_shown(sign)}}}")
    return "" if not lines else "\\ifPDFTeX\n" + "\n".join(lines) + "\n\\fi\n"


def _shown(sign: str) -> str:
    if sign in _SIGNS:
        return rf"\ensuremath{{{_SIGNS[sign]}}}"
    name = GREEK.get(sign)
    if name in _LATIN:
        return _LATIN[name]
    if name is not None:
        return rf"\ensuremath{{\{name}}}"
    return rf"\texttt{{[U+{ord(sign):04X}]}}"
