"""The text of a scenario file as plain Python data: TOML, with a limit on everything that could run away.

Decimals stay decimals (`Decimal`), because bounds speak about the numbers of the file. What goes wrong here is told
with the line of the file; what the data means is decided in `read`.
"""

from __future__ import annotations

import re
import tomllib
from decimal import Decimal
from pathlib import Path
from typing import Any, NoReturn

from ngm.errors import Problem, ScenarioError

__all__ = ["LARGEST_FILE", "read_text", "to_data"]

#: bytes in a scenario file
LARGEST_FILE = 16_000_000
#: characters in one decimal number
LONGEST_NUMBER = 5_000
#: parts of one dotted key: the standard library's reader needs time quadratic in them
MOST_PARTS = 50

_PART = r"""(?:[A-Za-z0-9_-]+|"[^"\n]*"|'[^'\n]*')[ \t]*\.[ \t]*"""
_LONG_KEY = re.compile(rf"(?:^[ \t]*\[{{0,2}}|[{{,])[ \t]*(?:{_PART}){{{MOST_PARTS}}}", re.MULTILINE)
_PLACE = re.compile(r" \(at (?:line (\d+), column (\d+)|end of document)\)$")
_WORD = re.compile(r"[^\W\d_]\w*", re.UNICODE)
_POINT_FIRST = re.compile(r"[+-]?\.\d")
_FOREIGN_KEY = re.compile(r"^[ \t]*([^\W\d_][\w.]*)[ \t]*=", re.UNICODE)


def _refuse(message: str, where: str = "", text: str | None = None, position: int | None = None) -> NoReturn:
    raise ScenarioError(Problem(where, message, text, position))


def read_text(path: str | Path) -> str:
    """Return the text of a scenario file.

    Raises
    ------
    ScenarioError
        No such file, a directory, another extension than ``.toml``, more than 16 MB, or not UTF-8.
    """
    if not str(path):
        _refuse("the name of the file is empty. Name a scenario file (extension .toml).")
    # the end of a path tells more than its beginning
    where = str(path) if len(str(path)) <= 200 else "…" + str(path)[-200:]
    place = Path(path)
    try:
        if place.is_dir():
            _refuse("this is a directory. Name the scenario file in it (extension .toml).", where)
        if place.suffix.lower() != ".toml":
            _refuse("a scenario file has the extension .toml.", where)
        if not place.exists():
            _refuse("there is no such file.", where)
        if not place.is_file():
            _refuse("this is no ordinary file. Name a scenario file (extension .toml).", where)
        with place.open("rb") as stream:
            raw = stream.read(LARGEST_FILE + 1)
    except (OSError, ValueError) as error:
        _refuse(f"cannot be read: {getattr(error, 'strerror', None) or 'the path is not valid'}.", where)
    if len(raw) > LARGEST_FILE:
        _refuse("the file is larger than 16 MB. Put large matrices into CSV files (file = …).", where)
    try:
        # editors of some systems put a byte order mark before UTF-8
        return raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = raw.count(b"\n", 0, error.start) + 1
        _refuse(f"line {line} is not UTF-8. Save the file as UTF-8.", where)


def to_data(text: str) -> dict[str, Any]:
    """Return the TOML document: tables as dict, numbers as int or Decimal.

    Raises
    ------
    ScenarioError
        Not TOML, or past a limit (16 MB, nesting, digits of a number, parts of a key).
    """
    _check_characters(text)
    known: dict[str, Decimal] = {}

    def decimal(digits: str) -> Decimal:
        if len(digits) > LONGEST_NUMBER:
            raise _TooLong
        value = known.get(digits)
        if value is None:
            value = Decimal(digits)
            if len(digits) <= 6:
                known[digits] = value
        return value

    try:
        return tomllib.loads(text, parse_float=decimal)
    except tomllib.TOMLDecodeError as error:
        _syntax(text, str(error))
    except _TooLong:
        _refuse(f"a number has more than {LONGEST_NUMBER:,} digits. Round it.")
    except RecursionError:
        _refuse("lists or tables are nested too deeply. A scenario needs four levels at most.")
    except (ValueError, ArithmeticError):
        # int() refuses more than 4,300 digits, and dates such as 2024-02-31 come here too
        _refuse("a number has too many digits, or a date does not exist. Numbers stay below 1e300 in size.")


class _TooLong(Exception):  # noqa: N818 - not an error that leaves this module
    """A decimal number longer than `LONGEST_NUMBER`."""


def _check_characters(text: str) -> None:
    if len(text) > LARGEST_FILE:
        _refuse("the text is larger than 16 MB. Put large matrices into CSV files (file = …).")
    try:
        size = len(text.encode("utf-8"))
    except UnicodeEncodeError as error:
        _refuse(f"line {text.count(chr(10), 0, error.start) + 1} holds half a character. Save the file as UTF-8.")
    if size > LARGEST_FILE:
        _refuse("the text is larger than 16 MB. Put large matrices into CSV files (file = …).")
    long = _LONG_KEY.search(text)
    if long is not None:
        line = text.count("\n", 0, long.start()) + 1
        _refuse(f"a key has more than {MOST_PARTS} parts. Keys of a scenario have three at most.", f"line {line}")


def _syntax(text: str, told: str) -> NoReturn:
    """Raise the standard library's message in our form: line, what, the line with a caret."""
    lines = text.replace("\r\n", "\n").split("\n")
    place = _PLACE.search(told)
    what = told[: place.start()] if place else told
    if place is None or place.group(1) is None:
        number, column = len(lines), len(lines[-1]) + 1
        while number > 1 and not lines[number - 1].strip():
            number -= 1
            column = len(lines[number - 1]) + 1
    else:
        number, column = int(place.group(1)), int(place.group(2))
        if number > 1 and column == 1 and what == "Cannot overwrite a value":
            number, column = number - 1, 1
    line = lines[number - 1] if number <= len(lines) else ""
    _refuse(_advice(what, line, max(0, column - 1)), f"line {number}", line, max(0, column - 1))


def _advice(what: str, line: str, column: int) -> str:
    if what.startswith(("Cannot overwrite", "Duplicate inline table key")):
        return "this key stands twice in its table. Keep one of the two."
    if what.startswith(("Cannot declare", "Cannot mutate")):
        return "this table stands twice in the file. Put its lines under one heading."
    foreign = _FOREIGN_KEY.match(line)
    if what == "Invalid statement" and foreign is not None and not foreign.group(1).isascii():
        return f'a key with letters other than A to Z wants quotes: "{foreign.group(1)}" = …'
    what = what[:1].lower() + what[1:] if what else "cannot be read"
    return f"not valid TOML: {what}.{_hint(what, line, column)}"


def _hint(what: str, line: str, column: int) -> str:
    """Return what was most likely meant at this place of a line that is no TOML."""
    rest = line[column:]
    word = _WORD.match(rest)
    if word is not None and word.group().lower() in ("true", "yes", "on", "false", "no", "off"):
        return f" Write {'true' if word.group().lower() in ('true', 'yes', 'on') else 'false'}, without quotes."
    if _POINT_FIRST.match(rest):
        return " A number begins with a digit: 0.5, not .5."
    if rest[:1].isdigit() and line[:column].rstrip().endswith("0"):
        return " A number has no zeros in front: 0.5, not 00.5."
    if word is not None and line[:column].rstrip().endswith("="):
        return ' Text and expressions stand in quotes: rate = "beta * S".'
    if not rest and what.startswith("illegal character"):
        return " A text ends with a quote on the line on which it begins."
    if not rest and line.rstrip().endswith((",", "{")) and "{" in line:
        return " What stands between { and } stands on one line."
    return ""
