r"""A formula in simple LaTeX, as printed in a paper, to text in the expression syntax.

Reads fractions, roots, powers, subscripts, Greek letters, parentheses of any size and products written side by side:
``\frac{\beta \sigma}{(\sigma+\mu)(\gamma+\mu)}``. A name is matched with those that the scenario has, so that
``\beta_{1}`` finds ``beta_1`` or ``beta1``, and ``pr`` is the product of p and r unless the scenario knows ``pr``.
"""

from __future__ import annotations

import re
from collections.abc import Iterable

from ngm.errors import ExpressionError, Problem
from ngm.expression.names import GREEK

__all__ = ["from_latex", "is_latex", "left_power", "right_side"]

_MOST_CHARACTERS = 10_000
_MOST_LEVELS = 50
_TOKEN = re.compile(r"\s*(\\[A-Za-z]+|\\.|[0-9]+(?:\.[0-9]*)?|\.[0-9]+|[^\W\d_]|\S)")
_NOTHING = {
    *(r"\left", r"\right", r"\big", r"\Big", r"\bigg", r"\Bigg", r"\bigl", r"\bigr", r"\Bigl", r"\Bigr"),
    *(
        r"\displaystyle",
        r"\textstyle",
        r"\,",
        r"\;",
        r"\:",
        r"\!",
        r"\ ",
        r"\quad",
        r"\qquad",
        r"\limits",
        "$",
        "~",
        "&",
    ),
}
_OPEN, _CLOSE = {"(": ")", "[": "]", r"\{": r"\}"}, {")", "]", r"\}"}
_STYLES = {r"\mathrm", r"\mathcal", r"\mathit", r"\mathbf", r"\text", r"\textrm", r"\operatorname", r"\mathscr"}
#: What stands around a printed formula and is no part of it.
_FRAME = re.compile(
    r"\\(?:begin|end|label|tag|ref|eqref)\s*\*?\{[^{}]*\}|\\(?:nonumber|notag|displaystyle)\b|\\[\[\]()]|\\\\\s*|\$|&"
)
_EQUALS = re.compile(r":?=|≈|≃|\\(?:approx|simeq|equiv|coloneqq)\b")
_NO_FORMULA = re.compile(r"(?:\\?(?:rho|varrho)|ρ)\s*(?:\\left)?\s*\(|[0-9.\s\\,]*$")
_POWER = re.compile(r"(?:\^|\*\*)\s*\{?\s*([2-9])\s*\}?$")
_STAR = {"*", r"\ast", r"\star"}
_LETTERS = {"\\" + spelt for spelt in GREEK.values()}
_VARIANTS = {
    r"\varepsilon": "epsilon",
    r"\vartheta": "theta",
    r"\varphi": "phi",
    r"\varrho": "rho",
    r"\varsigma": "sigma",
}


def right_side(text: str) -> str:
    r"""Return the formula itself: what stands right of ``R_0 =``, without the signs around it.

    Of several equals signs the first side is taken that is neither ``\rho(...)`` nor a number; the whole text where there is
    none. Frames (``$``, ``\[``, ``equation``), labels and a full stop are left out.
    """
    first, *others = [_FRAME.sub("", side).strip().rstrip(".,;").strip() for side in _EQUALS.split(text)]
    formulas = [side for side in others if side and not _NO_FORMULA.match(side)]
    return next(iter([*formulas, *others, first]))


def left_power(text: str) -> int:
    r"""Return the power to which R0 stands left of the equals sign: 2 for ``R_0^2 = ...``, 1 as a rule."""
    first, *others = _EQUALS.split(text)
    found = _POWER.search(_FRAME.sub("", first).strip()) if others else None
    return int(found[1]) if found is not None else 1


def is_latex(text: str) -> bool:
    """Return whether a text is LaTeX and not the expression syntax: a backslash or a brace stands in it."""
    return "\\" in text or "{" in text or "}" in text


def from_latex(text: str, known: Iterable[str], states: Iterable[str] = ()) -> str:
    r"""Return a formula in the expression syntax.

    Parameters
    ----------
    text : str
        Simple LaTeX, at most 10,000 characters and 50 levels.
    known : iterable of str
        The names that may occur.
    states : iterable of str
        Those of numbers of hosts without infection: ``S_0``, ``S^0`` and ``S^*`` are S.

    Raises
    ------
    ExpressionError
        A command that is not read here, or a brace without its partner.

    Examples
    --------
    >>> from_latex(r"\sqrt{\frac{\beta_1 p}{\mu}}", ["beta1", "p", "mu"])
    'sqrt(((beta1*p)/(mu)))'
    """
    if len(text) > _MOST_CHARACTERS:
        raise _wrong(f"has {len(text):,} characters. At most {_MOST_CHARACTERS:,} are read.")
    return _Reader(text, set(known), set(states)).run()


def _wrong(message: str) -> ExpressionError:
    return ExpressionError(Problem("formula", message))


class _Reader:
    def __init__(self, text: str, known: set[str], states: set[str]) -> None:
        found = [match.group(1) for match in _TOKEN.finditer(text)]
        self.tokens = [token for token in found if token not in _NOTHING]
        self.known, self.states = known, states
        self.at = 0
        self.level = 0

    def peek(self) -> str:
        return self.tokens[self.at] if self.at < len(self.tokens) else ""

    def take(self) -> str:
        token = self.peek()
        self.at += 1
        return token

    def run(self) -> str:
        out = self.many("")
        if self.peek():
            raise _wrong(f"'{self.peek()}' has no partner.")
        return out

    def many(self, end: str) -> str:
        """Read up to the closing token; put a product sign between factors that stand side by side."""
        self.level += 1
        if self.level > _MOST_LEVELS:
            raise _wrong(f"is nested more than {_MOST_LEVELS} deep.")
        out: list[str] = []
        factor = False  # whether the last piece ends a factor
        while self.peek() and self.peek() != end:
            token = self.peek()
            if token in "+-*/^," or token in (r"\cdot", r"\times", r"\div"):
                self.take()
                out.append({r"\cdot": "*", r"\times": "*", r"\div": "/"}.get(token, token))
                if token == "^":
                    out.append(self.argument())
                    factor = True
                else:
                    factor = False
                continue
            if token in _CLOSE or token == "}":
                break
            piece = self.atom()
            if factor:
                out.append("*")
            out.append(piece)
            factor = True
        if end:
            if self.peek() != end:
                raise _wrong(f"'{end}' is missing.")
            self.take()
        self.level -= 1
        return "".join(out)

    def argument(self) -> str:
        """Read what a command or a raised sign applies to: a group in braces or one atom."""
        if self.peek() == "{":
            self.take()
            return f"({self.many('}')})"
        if self.peek() == "-":
            self.take()
            return f"(-{self.atom()})"
        if self.peek()[:1].isdigit():  # 'x^12' raises to 1 alone in LaTeX; nobody means that
            return self.take()
        return self.atom()

    def atom(self) -> str:
        token = self.peek()
        if token in _OPEN:
            self.take()
            return f"({self.many(_OPEN[token])})"
        if token == "{":
            self.take()
            return f"({self.many('}')})"
        if token in (r"\frac", r"\dfrac", r"\tfrac"):
            self.take()
            above = self.argument()
            return f"({above}/{self.argument()})"
        if token == r"\sqrt":
            self.take()
            degree = None
            if self.peek() == "[":
                self.take()
                degree = self.many("]")
            inside = self.argument()
            inside = inside if inside.startswith("(") else f"({inside})"
            return f"sqrt{inside}" if degree in (None, "2") else f"{inside}^(1/({degree}))"
        if token in (r"\exp", r"\ln", r"\log"):
            self.take()
            inside = self.argument()
            return (
                f"{'exp' if token == chr(92) + 'exp' else 'log'}{inside if inside.startswith('(') else f'({inside})'}"
            )
        if token in (r"\max", r"\min"):
            self.take()
            opened = self.take()
            if opened not in _OPEN:
                raise _wrong(f"expected a parenthesis or brace after {token}.")
            return f"{token[1:]}({self.many(_OPEN[opened])})"
        if token[:1].isdigit() or token[:1] == ".":
            return self.take()
        return self.name()

    def name(self) -> str:
        """Read one name: the longest run of letters that the scenario knows, with its subscript."""
        token = self.take()
        if not token:
            raise _wrong("ends where a name, a number or a group in braces is due.")
        if token in _STYLES:
            base = self.word()
        elif token in _LETTERS or token in _VARIANTS:
            base = _VARIANTS.get(token, token[1:])
        elif token.isalpha():
            base = GREEK.get(token) or self.longest(token)
        else:
            raise _wrong(f"'{token[:30]}' is not read here. Write the formula in the scenario's own syntax instead.")
        starred = self.is_starred(base)
        if self.peek() == "_":
            self.take()
            below = self.word()
            tries = (f"{base}_{below}", f"{base}{below}")
            free = base if base in self.states and below in ("0", "*", "ast") else tries[0]
            base = next((name for name in tries if name in self.known), free)
        if not starred:
            self.is_starred(base)
        return base

    def is_starred(self, base: str) -> bool:
        """Take a raised star, or for a state a raised 0: it says at which state, and raises to no power."""
        if self.peek() != "^":
            return False
        braces = self.tokens[self.at + 1 : self.at + 2] == ["{"]
        raised = self.tokens[self.at + 1 + braces : self.at + 2 + braces]
        closed = not braces or self.tokens[self.at + 3 : self.at + 4] == ["}"]
        if closed and raised and (raised[0] in _STAR or (raised[0] == "0" and base in self.states)):
            self.at += 4 if braces else 2
            return True
        return False

    def longest(self, first: str) -> str:
        letters, ahead = first, self.at
        best, stop = first, ahead
        while ahead < len(self.tokens) and (self.tokens[ahead].isalnum() or self.tokens[ahead] == "_"):
            letters += self.tokens[ahead]
            ahead += 1
            if letters in self.known:
                best, stop = letters, ahead
        self.at = stop
        return best

    def word(self) -> str:
        """Read a subscript or a styled word as letters and digits."""
        if self.peek() != "{":
            return self.take().lstrip("\\")
        self.take()
        out = ""
        while self.peek() and self.peek() != "}":
            token = self.take()
            if token not in _STYLES and token not in ("{", ","):
                out += token.lstrip("\\")
        if self.take() != "}":
            raise _wrong("'}' is missing.")
        while "{" in out:
            out = out.replace("{", "")
        return out
