"""The units of matrices that stand in the file: every entry of K, births and transitions must be a pure number."""

from __future__ import annotations

from typing import TYPE_CHECKING

from ngm.scenario.model import Expression
from ngm.scenario.unit_powers import Powers, UnitFinding, words_of

if TYPE_CHECKING:
    from collections.abc import Iterator

    from ngm.scenario.unit_check import Checker

__all__ = ["check_entries"]


def check_entries(checker: Checker) -> None:
    """Note what must hold of every entry of the matrices of a scenario, and of the sizes of its types."""
    for where, key, entry in _entries(checker):
        value = checker.value(entry.tree, where, key)
        if value.powers is None or value.number is not None:
            continue

        def told(rest: Powers, where: str = where, key: tuple[str | int, ...] = key) -> UnitFinding:
            text = f"is in {words_of(rest)}, where a pure number is needed: members for each member."
            return UnitFinding("entry", where, text, key)

        checker.require(value.powers, told)


def _entries(checker: Checker) -> Iterator[tuple[str, tuple[str | int, ...], Expression]]:
    given, projection = checker.scenario.given, checker.scenario.projection
    tables: list[tuple[str, str, tuple[str, ...], tuple[tuple[Expression, ...], ...]]] = []
    if given is not None:
        tables.append(("next_generation", "K", given.types, given.K))
    if projection is not None:
        tables.append(("projection", "births", projection.stages, projection.births))
        tables.append(("projection", "transitions", projection.stages, projection.transitions))
    for section, name, labels, rows in tables:
        for i, row in enumerate(rows):
            for j, entry in enumerate(row):
                if not entry.is_number:
                    yield f"{section}, {name}[{labels[i]}, {labels[j]}]", (section, name, i, j), entry
    for k, size in enumerate(() if given is None else given.sizes):
        if not size.is_number and given is not None:
            where = f"next_generation, sizes[{given.types[k]}]"
            yield where, ("next_generation", "sizes", k), size
