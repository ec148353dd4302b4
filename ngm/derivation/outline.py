"""Smaller scenarios with the same structure, for what looks at structure only."""

from __future__ import annotations

from dataclasses import replace

from ngm.scenario.model import Dimension, Expression, Scenario

__all__ = ["outline", "thumbnail"]


def outline(scenario: Scenario) -> Scenario:
    """Return the scenario with one group a dimension: all that the derivation on the template looks at.

    A state that is given group by group by different expressions is left out: it stands for itself, by its name.
    """
    kept = {name: Dimension(name, d.groups[:1]) for name, d in scenario.dimensions.items()}
    parameters = {
        name: replace(p, values=p.values[:1], distributions=(), range=None) for name, p in scenario.parameters.items()
    }
    matrices = {
        name: replace(m, blocks=(((m.blocks[0][0][0],),),), population=None, reciprocal=False)
        for name, m in scenario.matrices.items()
    }
    free = {
        name: values[:1]
        for name, values in scenario.infection_free.items()
        if len({value.tree for value in values}) == 1
    }
    return replace(
        scenario,
        dimensions=kept,
        parameters=parameters,
        matrices=matrices,
        infection_free=free,
        interventions=(),
        text="",
    )


def thumbnail(scenario: Scenario, groups: int = 2) -> Scenario:
    """Return the scenario with only the first few groups of each dimension: the same structure, small enough to look at."""
    kept = {name: Dimension(name, d.groups[:groups]) for name, d in scenario.dimensions.items()}
    small = replace(scenario, dimensions=kept, interventions=())

    def cut(values: tuple[Expression, ...], by: tuple[str, ...]) -> tuple[Expression, ...]:
        if len(values) == 1:
            return values
        wanted = set(small.copies(by))
        return tuple(value for value, copy in zip(values, scenario.copies(by), strict=True) if copy in wanted)

    parameters = {
        name: replace(p, values=cut(p.values, p.by), distributions=()) for name, p in scenario.parameters.items()
    }
    matrices = {}
    for name, matrix in scenario.matrices.items():
        n = len(kept[matrix.by].groups)
        w = 1 if matrix.within is None else len(kept[matrix.within].groups)
        matrices[name] = replace(
            matrix, blocks=tuple(tuple(row[:n] for row in block[:n]) for block in matrix.blocks[:w])
        )
    free = {name: cut(values, scenario.compartments[name].by) for name, values in scenario.infection_free.items()}
    return replace(small, parameters=parameters, matrices=matrices, infection_free=free)
