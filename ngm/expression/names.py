"""Valid names, their Greek letters, and what a misspelt one may have meant."""

from __future__ import annotations

import re
from collections.abc import Iterable
from difflib import get_close_matches

__all__ = ["GREEK", "canonical", "is_reserved", "suggest"]

_LOWER = (
    ("α", "alpha"),
    ("β", "beta"),
    ("γ", "gamma"),
    ("δ", "delta"),
    ("ε", "epsilon"),
    ("ζ", "zeta"),
    ("η", "eta"),
    ("θ", "theta"),
    ("ι", "iota"),
    ("κ", "kappa"),
    ("λ", "lambda"),
    ("μ", "mu"),
    ("ν", "nu"),
    ("ξ", "xi"),
    ("ο", "omicron"),
    ("π", "pi"),
    ("ρ", "rho"),
    ("σ", "sigma"),
    ("τ", "tau"),
    ("υ", "upsilon"),
    ("φ", "phi"),
    ("χ", "chi"),
    ("ψ", "psi"),
    ("ω", "omega"),
)

#: Greek letter -> its English spelling; the capital of a letter is the capitalised spelling.
GREEK: dict[str, str] = {
    **dict(_LOWER),
    **{letter.upper(): spelling.capitalize() for letter, spelling in _LOWER},
    # Variant forms, by code point because they look like the letters above.
    "\u03d0": "beta",
    "\u03f5": "epsilon",
    "\u03d1": "theta",
    "\u03f0": "kappa",
    "\u00b5": "mu",  # the micro sign
    "\u03d6": "pi",
    "\u03f1": "rho",
    "\u03c2": "sigma",  # final sigma
    "\u03d5": "phi",
    "\u03d2": "Upsilon",
    "\u03f4": "Theta",
    "\u2126": "Omega",  # the ohm sign
}

_RESERVED = frozenset({"exp", "log", "sqrt", "sum", "max", "min"})
_LETTER = "A-Za-z" + "".join(GREEK)
#: A name as typed, before its Greek letters are spelt out.
NAME = re.compile(f"[{_LETTER}][{_LETTER}0-9_]*")
_SPELT = str.maketrans(GREEK)

# Comparing texts costs the product of their lengths: nobody is helped by a suggestion for a name of 10,000 letters.
_LONGEST_COMPARED = 60
_MOST_COMPARED = 2000


def canonical(text: str) -> str | None:
    """Return the name with its Greek letters spelt out (``β_1`` -> ``beta_1``), or None where it is no valid name.

    A name starts with a letter, ASCII or Greek, and goes on with letters, digits and underscores.

    Parameters
    ----------
    text : str
        The name as typed, without white space around it.

    Returns
    -------
    str or None
        ASCII only.

    Examples
    --------
    >>> canonical("Λ"), canonical("β_1"), canonical("2x")
    ('Lambda', 'beta_1', None)
    """
    if NAME.fullmatch(text) is None:
        return None
    return text if text.isascii() else text.translate(_SPELT)


def is_reserved(name: str) -> bool:
    """Return whether the name belongs to a function (exp, log, sqrt, sum, max, min) and can name nothing else."""
    return name in _RESERVED


def suggest(name: str, known: Iterable[str]) -> str | None:
    """Return the known name that `name` was most likely meant to be, or None where none comes near.

    A difference in capitals or underscores only is taken first, then the closest spelling. Names over 60 characters
    get no suggestion by spelling, and at most 2,000 names are compared, so that the cost stays bounded.

    Parameters
    ----------
    name : str
        What was typed; Greek letters count as their spelling.
    known : iterable of str
        Canonical names.

    Returns
    -------
    str or None
        One of `known`, never `name` itself.

    Examples
    --------
    >>> suggest("bata", ["alpha", "beta"]), suggest("IH", ["I_h", "S_h"]), suggest("q", ["beta"])
    ('beta', 'I_h', None)
    """
    wanted = (canonical(name) or name)[: _LONGEST_COMPARED + 1]
    if len(wanted) > _LONGEST_COMPARED:
        return None
    others = [other for other in known if other != wanted]
    folded = _folded(wanted)
    # the first letter rules most of them out, which matters where a file has 100,000 names
    starts = {"_", folded[:1], folded[:1].upper()}
    for other in others:
        if other[:1] in starts and len(other) <= 2 * _LONGEST_COMPARED and _folded(other) == folded:
            return other
    near = [other for other in others if abs(len(other) - len(wanted)) <= 3 + len(wanted) // 4][:_MOST_COMPARED]
    found = get_close_matches(wanted, near, n=1, cutoff=0.7)
    return found[0] if found else None


def _folded(name: str) -> str:
    return name.replace("_", "").lower()
