"""Tables as CSV that a spreadsheet program opens as data: no text in them becomes a formula there."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    import pandas

__all__ = ["csv_rows", "csv_text", "safe"]

#: What a spreadsheet program takes for the beginning of a formula.
FORMULA = ("=", "+", "-", "@", "\t", "\r")


def safe(cell: Any) -> Any:
    """Return a cell as it may stand in a CSV file: a text that begins like a formula gets an apostrophe before it.

    A carriage return becomes a blank: some readers end the row there.

    Examples
    --------
    >>> safe("=HYPERLINK(1)"), safe("S -> E"), safe(-0.5)
    ("'=HYPERLINK(1)", 'S -> E', -0.5)
    """
    if not isinstance(cell, str):
        return cell
    text = cell.replace("\r", " ")
    return f"'{text}" if cell.startswith(FORMULA) else text


def csv_text(frame: pandas.DataFrame, *, index: bool = False) -> str:
    """Return a table as CSV, numbers at full precision, every text and heading `safe`.

    `index`: with the labels of the rows as the first column.
    """
    out = frame.reset_index() if index else frame.copy()
    for name in out.columns:
        if out[name].dtype.kind not in "iufb":
            out[name] = out[name].map(safe)
    out.columns = [safe(str(name)) for name in out.columns]
    return str(out.to_csv(index=False))


def csv_rows(rows: Iterable[Iterable[object]]) -> str:
    """Return rows as CSV, numbers at full precision, every text `safe`; None is an empty cell."""
    out = io.StringIO()
    csv.writer(out, lineterminator="\n").writerows([[_cell(value) for value in row] for row in rows])
    return out.getvalue()


def _cell(value: object) -> str:
    if isinstance(value, bool) or not isinstance(value, float | int):
        return str(safe("" if value is None else str(value)))
    return repr(value)
