"""What the page on mixing writes into a scenario's text, as edits; and what is typed there, read. No Streamlit here."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from decimal import Decimal, InvalidOperation
from typing import Any

from ngm.scenario.csvfile import LARGEST_MATRIX_FILE, MatrixFileError, values_of
from ngm.screens.forms import Edit

__all__ = [
    "balance",
    "decoded",
    "entered_sizes",
    "factor",
    "free_name",
    "grouped_parameters",
    "intervention",
    "is_brought_by_group",
    "matrix_taken",
    "population_of",
    "scaled",
    "sizes_taken",
]

Block = Sequence[Sequence[Decimal]]


# -- what is typed or brought ----------------------------------------------------------------------------------------


def factor(text: str) -> Decimal | str:
    """Return a factor as typed, or what is wrong with it, in words."""
    typed = text.strip()
    try:
        value = Decimal(typed)
    except InvalidOperation:
        hint = (
            f" Write {typed.replace(',', '.')}." if _is_number(typed.replace(",", ".")) else " Write 0.6 for 40 % less."
        )
        if typed.endswith("%") and _is_number(typed[:-1].strip()):
            hint = f" Write {_plain(Decimal(typed[:-1].strip()) / 100)}."
        return f"'{typed[:20]}' is no number.{hint}"
    if not value.is_finite() or value < 0 or value > 1000:
        return f"{typed[:20]} is no factor: it lies between 0 and 1000. Write 0.6 for 40 % less."
    return value


def decoded(content: bytes) -> str | None:
    """Return the text of a CSV file, or None where it is no text or too large."""
    if len(content) > LARGEST_MATRIX_FILE:
        return None
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError:
        return None
    return None if "\x00" in text else text


def entered_sizes(text: str, groups: Sequence[str]) -> tuple[Decimal, ...] | str:
    """Return members by group from lines of group and value, or what is wrong with them, in words."""
    try:
        sizes = values_of(text, groups)
    except MatrixFileError as error:
        return str(error)
    for group, size in zip(groups, sizes, strict=True):
        if size == 0:
            return f"{group} has no members. Every group needs some for its contacts to be balanced."
    return sizes


def _is_number(text: str) -> bool:
    try:
        return Decimal(text).is_finite()
    except InvalidOperation:
        return False


def _plain(value: Decimal) -> str:
    """Return a decimal without an exponent and without zeros at its end."""
    text = format(value, "f")
    return text.rstrip("0").rstrip(".") if "." in text else text


# -- what the document holds -----------------------------------------------------------------------------------------


def _table(document: Mapping[str, Any], *path: str) -> Mapping[str, Any]:
    found: Any = document
    for name in path:
        found = found.get(name) if isinstance(found, Mapping) else None
    return found if isinstance(found, Mapping) else {}


def grouped_parameters(document: Mapping[str, Any], dimension: str) -> list[str]:
    """Return the parameters that have one value for each group of this dimension alone."""
    return [
        name
        for name, entry in _table(document, "parameters").items()
        if isinstance(entry, Mapping) and entry.get("by") == [dimension]
    ]


def population_of(document: Mapping[str, Any], matrix: str) -> str:
    """Return what the matrix is balanced with, as typed; empty where nothing is said."""
    held = _table(document, "matrices", matrix).get("population")
    return held if isinstance(held, str) else ""


def is_brought_by_group(document: Mapping[str, Any], matrix: str) -> bool:
    """Return whether the tables of a matrix come from one file for each group of another dimension."""
    return isinstance(_table(document, "matrices", matrix).get("file"), list)


def free_name(document: Mapping[str, Any], wanted: Sequence[str]) -> str:
    """Return the first of some names that nothing in the document has yet."""
    sections = ("dimensions", "compartments", "parameters", "matrices", "definitions")
    taken = {name for section in sections for name in _table(document, section)}
    for name in wanted:
        if name not in taken:
            return name
    number = 2
    while f"{wanted[0]}{number}" in taken:
        number += 1
    return f"{wanted[0]}{number}"


# -- edits -----------------------------------------------------------------------------------------------------------


def balance(document: Mapping[str, Any], matrix: str, population: str) -> list[Edit]:
    """Return the edits that have a matrix balanced with these sizes."""
    out = []
    if population_of(document, matrix) != population:
        out.append(Edit("set", ("matrices", matrix, "population"), population))
    return [*out, Edit("set", ("matrices", matrix, "reciprocal"), True)]


def sizes_taken(
    document: Mapping[str, Any], matrix: str, dimension: str, sizes: Sequence[Decimal], parameter: str
) -> list[Edit]:
    """Return the edits that put members by group into a parameter, old or new, and name it as the matrix's population."""
    values = [_number(size) for size in sizes]
    if parameter in _table(document, "parameters"):
        out = [Edit("set", ("parameters", parameter, "value"), values)]
    else:
        entry = {"value": values, "by": [dimension], "unit": "person", "label": "People in each group"}
        out = [Edit("set", ("parameters", parameter), entry)]
    if population_of(document, matrix) == "":
        out.append(Edit("set", ("matrices", matrix, "population"), parameter))
    return out


def matrix_taken(
    document: Mapping[str, Any], matrix: str, block: int | None, table: Block, source: str, *, balanced: bool
) -> list[Edit]:
    """Return the edits that put a brought table in place of a matrix, of one of its tables where it has several.

    It is balanced from then on or not, as is asked for: the one before may have been.
    """
    held = _table(document, "matrices", matrix)
    values = [[_number(value) for value in row] for row in table]
    out = [Edit("delete", ("matrices", matrix, "file"))] if "file" in held else []
    out.append(Edit("set", ("matrices", matrix, "values", *(() if block is None else (block,))), values))
    if source:
        out.append(Edit("set", ("matrices", matrix, "source"), source))
    if "reciprocal" in held and held["reciprocal"] is not balanced:
        out.append(
            Edit("set", ("matrices", matrix, "reciprocal"), True)
            if balanced
            else Edit("delete", ("matrices", matrix, "reciprocal"))
        )
    elif balanced and "reciprocal" not in held:
        out.append(Edit("set", ("matrices", matrix, "reciprocal"), True))
    return out


def intervention(name: str, factors: Mapping[str, Decimal]) -> list[Edit]:
    """Return the edit that adds an intervention which multiplies matrices of contacts."""
    change = [{"matrix": matrix, "multiply": _number(value)} for matrix, value in factors.items()]
    return [Edit("append", ("intervention",), {"name": name, "change": change})]


def scaled(
    document: Mapping[str, Any], factors: Mapping[str, Decimal], given: Mapping[str, Sequence[Sequence[float]]]
) -> list[Edit]:
    """Return the edits that multiply the entries of matrices in the text; `given` holds them as the files have them."""
    out: list[Edit] = []
    for matrix, value in factors.items():
        # The shortest decimal that reads as a double is what the file says.
        table = [[_number(Decimal(repr(float(entry))) * value) for entry in row] for row in given[matrix]]
        if "file" in _table(document, "matrices", matrix):
            out.append(Edit("delete", ("matrices", matrix, "file")))
        out.append(Edit("set", ("matrices", matrix, "values"), table))
    return out


def _number(value: Decimal) -> int | Decimal:
    """Return a decimal as the text is to have it: whole numbers without a point, no zeros at the end."""
    return int(value) if value == value.to_integral_value() and abs(value) < 10**15 else Decimal(_plain(value))
