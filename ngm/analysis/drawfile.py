"""Joint draws from a file: CSV or Parquet, a column a parameter, a row a draw, in each parameter's own unit."""

from __future__ import annotations

import csv
import io
import math
from pathlib import Path
from typing import Any

import numpy as np

from ngm.errors import Problem, ScenarioError
from ngm.expression.names import canonical, suggest
from ngm.scenario.model import Scenario

__all__ = ["MOST_BYTES", "draws_of_text", "read_draws"]

MOST_BYTES = 512 * 2**20
MOST_TOLD = 10


def read_draws(scenario: Scenario, source: str | Path | bytes, name: str = "draws.csv") -> dict[str, Any]:
    """Return the joint draws of a file, by parameter (or ``sigma[65+]`` for one group).

    Parameters
    ----------
    scenario : Scenario
    source : path or bytes
        The file, or what is in it; then `name` is its name, which tells CSV (in UTF-8) from Parquet.

    Raises
    ------
    ngm.ScenarioError
        The file cannot be read; a column is no parameter; a cell is no number: with row and column, up to ten of them.
    """
    path = Path(name) if isinstance(source, bytes) else Path(source)
    try:
        if (len(source) if isinstance(source, bytes) else path.stat().st_size) > MOST_BYTES:
            raise ScenarioError(Problem(path.name, f"is larger than {MOST_BYTES // 2**20} MB. Take fewer draws."))
        content = source if isinstance(source, bytes) else path.read_bytes()
        if path.suffix.lower() in (".parquet", ".pq"):
            return _of_table(scenario, _parquet(content, path.name), path.name)
        text = content.decode("utf-8-sig")
    except OSError as error:
        raise ScenarioError(Problem(str(path), f"cannot be read ({error.strerror or error}).")) from None
    except UnicodeDecodeError:
        raise ScenarioError(Problem(path.name, "is not UTF-8 text. Save it as CSV in UTF-8, or as .parquet.")) from None
    return draws_of_text(scenario, text, path.name)


def _parquet(content: bytes, name: str) -> dict[str, list[Any]]:
    import pandas

    try:
        frame = pandas.read_parquet(io.BytesIO(content))
    except (ValueError, OSError, ImportError) as error:
        raise ScenarioError(Problem(name, f"is no Parquet file that can be read ({str(error)[:120]}).")) from None
    return {str(name): frame[name].tolist() for name in frame.columns}


def draws_of_text(scenario: Scenario, text: str, name: str = "draws") -> dict[str, Any]:
    """Return the joint draws of a CSV text: a header of parameters, then a draw a line; `,` `;` or tab between columns."""
    head = text.split("\n", 1)[0]
    separator = max(";\t,", key=head.count)
    try:
        rows = [
            row for row in csv.reader(io.StringIO(text, newline=""), delimiter=separator) if any(c.strip() for c in row)
        ]
    except csv.Error as error:
        raise ScenarioError(Problem(name, f"is no table that can be read ({error}).")) from None
    if len(rows) < 2:
        raise ScenarioError(
            Problem(name, "holds no draws: expected a line with the parameters' names and a line a draw.")
        )
    header = [cell.strip() for cell in rows[0]]
    problems: list[Problem] = [
        Problem(f"{name}, column {column!r}", "stands twice. Keep one.")
        for k, column in enumerate(header)
        if column in header[:k]
    ]
    for number, row in enumerate(rows[1:], 2):
        if len(row) != len(header) and len(problems) < MOST_TOLD:
            problems.append(
                Problem(f"{name}, row {number}", f"{len(row)} cells for the {len(header)} columns of the header.")
            )
    if problems:
        raise ScenarioError(problems)
    return _of_table(scenario, {column: [row[k] for row in rows[1:]] for k, column in enumerate(header)}, name)


def _of_table(scenario: Scenario, table: dict[str, list[Any]], name: str) -> dict[str, Any]:
    known = {p: p for p in scenario.parameters}
    for parameter in scenario.parameters.values():
        known |= {item: item for item in scenario.items(parameter.name, parameter.by)}
    out: dict[str, Any] = {}
    problems: list[Problem] = []
    for column, cells in table.items():
        base, bracket, groups = column.partition("[")
        target = known.get((canonical(base.strip()) or base.strip()) + bracket + groups)
        if target is None:
            near = suggest(column, list(known))
            hint = f" Did you mean '{near}'?" if near else f" Parameters: {', '.join(list(scenario.parameters)[:12])}."
            problems.append(Problem(f"{name}, column {column[:40]!r}", f"is not a parameter of the scenario.{hint}"))
        elif target in out:
            problems.append(Problem(f"{name}, column {column!r}", "stands twice."))
        else:
            out[target] = _numbers(cells, f"{name}, column {column!r}", problems)
    if problems:
        raise ScenarioError(problems[: 5 * MOST_TOLD])
    return out


def _numbers(cells: list[Any], where: str, problems: list[Problem]) -> Any:
    values = np.empty(len(cells))
    told = 0
    for k, cell in enumerate(cells):
        try:
            values[k] = float(cell)
            good = math.isfinite(values[k])
        except (TypeError, ValueError):
            good = False
        if not good and told < MOST_TOLD:
            told += 1
            shown = str(cell).strip()[:30]
            what = "is empty" if not shown else f"{shown!r} is no number"
            hint = " Write 0.5 with a point." if "," in shown else ""
            problems.append(Problem(f"{where}, row {k + 2}", f"{what}.{hint}"))
    return values
