"""What differs between two scenarios whose matrices stand in the file: entry by entry."""

from __future__ import annotations

from dataclasses import replace

from ngm.analysis.between import Step
from ngm.results_opinion import ModelChange
from ngm.scenario.model import Expression, GivenMatrix, Projection, Scenario
from ngm.scenario.stated import flows_of

__all__ = ["stated_changes"]

Rows = tuple[tuple[Expression, ...], ...]


def stated_changes(first: Scenario, second: Scenario, changes: list[ModelChange], steps: list[Step]) -> None:
    """Note each entry of K, or of births and transitions, that differs, and a step that makes it so.

    Types that are new or gone are told by others; then entries cannot be laid side by side, and nothing is noted here.
    """
    old, new = first.given or first.projection, second.given or second.projection
    if old is None or new is None or tuple(first.compartments) != tuple(second.compartments):
        return
    labels = old.types if isinstance(old, GivenMatrix) else old.stages
    for name, before, after in _tables(old, new):
        for i, row in enumerate(labels):
            for j, column in enumerate(labels):
                if before[i][j].tree == after[i][j].tree:
                    continue
                entry = f"{name}[{row}, {column}]"
                changes.append(ModelChange("entry", "changed", entry, before[i][j].text, after[i][j].text))
                steps.append(
                    Step(
                        f"{entry} changed",
                        lambda s, name=name, i=i, j=j, entry=after[i][j]: _with_entry(s, name, i, j, entry),  # type: ignore[misc]
                    )
                )


def _tables(old: GivenMatrix | Projection, new: GivenMatrix | Projection) -> list[tuple[str, Rows, Rows]]:
    if isinstance(old, GivenMatrix) and isinstance(new, GivenMatrix):
        return [("K", old.K, new.K)]
    assert isinstance(old, Projection)
    assert isinstance(new, Projection)
    return [("births", old.births, new.births), ("transitions", old.transitions, new.transitions)]


def _with_entry(scenario: Scenario, name: str, i: int, j: int, entry: Expression) -> Scenario:
    """Return the scenario with one entry replaced, in the matrix and in the arrows that make it."""
    model = scenario.given or scenario.projection
    assert model is not None
    names = tuple(scenario.compartments)
    if isinstance(model, GivenMatrix):
        model = replace(model, K=_replaced(model.K, i, j, entry))
        return replace(scenario, given=model, flows=flows_of(model, names))
    if name == "births":
        model = replace(model, births=_replaced(model.births, i, j, entry))
    else:
        model = replace(model, transitions=_replaced(model.transitions, i, j, entry))
    return replace(scenario, projection=model, flows=flows_of(model, names))


def _replaced(rows: Rows, i: int, j: int, entry: Expression) -> Rows:
    return tuple(tuple(entry if (a, b) == (i, j) else old for b, old in enumerate(row)) for a, row in enumerate(rows))
