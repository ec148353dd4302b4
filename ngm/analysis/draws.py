"""Draws of parameters as they are handed in: names matched, shapes and every number looked at."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
import numpy.typing as npt

from ngm.errors import Problem, ScenarioError
from ngm.expression.names import canonical
from ngm.scenario.fields import closest, short
from ngm.scenario.model import Parameter, Scenario

__all__ = ["read_draws"]

FloatArray = npt.NDArray[np.float64]

#: Numbers stay below this, in draws as in files.
LARGEST = 1e300
#: Read as whole numbers, the bits of doubles that are not negative have the order of the doubles; those of negative ones,
#: infinity and nan lie above. So one pass over the draws tells whether all is well.
_BITS_OF_LARGEST = np.float64(LARGEST).view(np.uint64)


def read_draws(
    scenario: Scenario, draws: Mapping[str, Any]
) -> tuple[dict[str, tuple[int | None, ...]], list[FloatArray]]:
    """Return for each drawn parameter which array each of its copies is read from (None: as in the file), and the arrays.

    Parameters
    ----------
    draws : mapping of str to array
        Parameter -> (N,), or (groups, N) for a grouped one; ``sigma[65+]`` -> (N,) for one group.

    Raises
    ------
    ScenarioError
        With every problem found: unknown names, wrong shapes, and of each parameter the first draw that is no number,
        not finite or negative without ``sign = "any"``, counted from 1.
    """
    problems: list[Problem] = []
    columns: dict[str, list[int | None]] = {}
    arrays: list[FloatArray] = []
    lengths: dict[str, int] = {}
    for typed in draws:
        values = draws[typed]
        found = _find(scenario, typed)
        if isinstance(found, Problem):
            problems.append(found)
            continue
        parameter, copies = found
        table = _table(parameter, typed, values, len(copies))
        if isinstance(table, Problem):
            problems.append(table)
            continue
        lengths[typed] = table.shape[-1]
        places = columns.setdefault(parameter.name, [None] * len(parameter.values))
        if any(places[copy] is not None for copy in copies):
            problems.append(Problem(short(typed), "is drawn twice, under two names. Keep one."))
            continue
        for k, copy in enumerate(copies):
            places[copy] = len(arrays) + (k if len(table) > 1 else 0)
        arrays.extend(np.ascontiguousarray(row) for row in table)
    if len(set(lengths.values())) > 1:
        listed = ", ".join(f"{name}: {n}" for name, n in list(lengths.items())[:6])
        problems.append(Problem("", f"the parameters have different numbers of draws ({listed})."))
    if not draws:
        problems.append(Problem("", "the draws name no parameter. Give an array for one or more."))
    if problems:
        raise ScenarioError(problems)
    return {name: tuple(places) for name, places in columns.items()}, arrays


def _find(scenario: Scenario, typed: object) -> tuple[Parameter, list[int]] | Problem:
    """Return a parameter and which of its copies are meant."""
    if not isinstance(typed, str):
        return Problem("", f"the names of draws are texts, not {type(typed).__name__}.")
    head, bracket, _ = typed.partition("[")
    name = canonical(head)
    if name is None or name not in scenario.parameters:
        what = f"'{short(typed)}' is not a parameter of this scenario."
        return Problem("", f"{what}{closest(name or head, scenario.parameters)}")
    parameter = scenario.parameters[name]
    if not bracket:
        return parameter, list(range(len(parameter.values)))
    items = scenario.items(name, parameter.by)
    wanted = name + typed[len(head) :]
    if wanted not in items:
        return Problem("", f"'{short(typed)}' is no value of {name}.{closest(wanted, items)}")
    return parameter, [items.index(wanted)]


def _table(parameter: Parameter, typed: str, values: Any, copies: int) -> FloatArray | Problem:
    """Return the draws as (1, N) or (copies, N), every number looked at."""
    raw = np.asarray(values)
    if raw.ndim == 0 or raw.ndim > 2 or (raw.ndim == 2 and raw.shape[0] != copies):
        shape = "(N,)" if copies == 1 else f"(N,) or ({copies}, N)"
        return Problem(short(typed), f"its draws have shape {raw.shape}; {shape} is needed.")
    rows = raw.reshape(1, -1) if raw.ndim == 1 else raw
    if raw.dtype.kind not in "iuf":
        # As handed in: an array of numbers and one text has made texts of all.
        bad = _first_text(np.asarray(values, dtype=object).reshape(rows.shape))
        if bad is not None:
            k, shown = bad
            return Problem(short(typed), f"draw {k + 1} is {shown}, and no number.")
    table = np.asarray(rows, dtype=float)
    if table.size == 0 or table.view(np.uint64).max() < _BITS_OF_LARGEST:
        return table
    for wrong, what in (
        (~(np.abs(table) < LARGEST), "not finite or too large"),
        (table < 0 if not parameter.any_sign else np.zeros(0, dtype=bool), "negative"),
    ):
        if wrong.any():
            row, k = min(zip(*np.nonzero(wrong), strict=True), key=lambda at: (at[1], at[0]))
            hint = f" {parameter.name} is positive or zero." if what == "negative" else ""
            return Problem(short(typed), f"draw {int(k) + 1} is {table[row, k]:g}: {what}.{hint}")
    return table


def _first_text(rows: Any) -> tuple[int, str] | None:
    """Return the first draw that is no number, and how to show it; None where all are."""
    for k, column in enumerate(rows.T.tolist()):
        for value in column:
            try:
                if isinstance(value, bool | str | bytes | complex) or value is None:
                    raise TypeError
                float(value)
            except (TypeError, ValueError):
                return k, repr(value)[:40]
    return None
