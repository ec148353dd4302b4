"""Which types, entries and states control can act on, and how much is needed."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from itertools import combinations

import numpy as np
import numpy.typing as npt

from ngm.analysis.caution import below_one_caution
from ngm.analysis.numbers import Numbers, decided_numbers
from ngm.analysis.point import MOST_WRITTEN
from ngm.analysis.season_results import control_over_the_year
from ngm.analysis.stated_entries import nothing_new
from ngm.analysis.steady import refuse_season
from ngm.engine.balls import nearest, precision
from ngm.engine.control import (
    ReproductionNumber,
    all_single_types,
    state_reproduction_numbers,
    target_reproduction_number,
    type_reproduction_number,
)
from ngm.engine.linear import pattern
from ngm.errors import Problem, ScenarioError
from ngm.expression.names import suggest
from ngm.results import ControlResult, EntrySetNumber, StateNumber, TargetNumber, TypeNumber
from ngm.scenario.model import Scenario
from ngm.scenario.season import seasonal_parameters

__all__ = ["control", "group_numbers"]

#: Types at infection up to which every set of types is listed, and every entry of K.
MOST_FOR_SETS = 6
MOST_FOR_ENTRIES = 10


def control(
    scenario: Scenario, *, by: str | None = None, entries: Sequence[tuple[str, str]] | None = None
) -> ControlResult:
    """Return type-, target- and state-reproduction numbers of a scenario, with the share to remove.

    With `by`, the name of a dimension, also those of its groups (`group_numbers`), for models of any size. With `entries`,
    pairs (type infected, type that infects), also the number of that set of entries of K acted on together.

    The share to remove is 1 - 1/T where T > 1 and 0 where T <= 1; where what is left alone sustains the infection by
    itself there is no T, and the reason is given.

    Raises
    ------
    ngm.DerivationError
        As `ngm.solve`.

    References
    ----------
    Roberts & Heesterbeek (2003) Proc. R. Soc. B 270:1359, doi:10.1098/rspb.2003.2339; Shuai, Heesterbeek & van den
    Driessche (2013) J. Math. Biol. 67:1067; Lewis, Shuai & van den Driessche (2019) J. Math. Biol. 78:2317
    """
    found = decided_numbers(scenario)
    with precision(found.bits):
        result = control_over_the_year(found, _control(found))
        result = replace(result, warnings=(*result.warnings, *below_one_caution(found)))
        if result.R0 is not None and seasonal_parameters(scenario) and (entries or by):
            refuse_season(scenario, "a number of groups or of entries of K")
        if entries:
            result = replace(result, entry_set=_entry_set(found, entries))
    return result if by is None else replace(result, groups=group_numbers(scenario, by))


def _entry_set(found: Numbers, entries: Sequence[tuple[str, str]]) -> EntrySetNumber | None:
    """Return the target reproduction number of a set of entries of K."""
    at = [found.template.types[k] for k in found.at]
    problems = [
        Problem(
            "control, entries",
            f"'{name}' is no type at infection." + (f" Did you mean '{near}'?" if (near := suggest(name, at)) else ""),
        )
        for name in dict.fromkeys(name for entry in entries for name in entry)
        if name not in at
    ]
    if problems:
        raise ScenarioError(problems)
    if found.K is None or found.spectrum is None:
        return None
    mask = np.zeros((len(at), len(at)), dtype=bool)
    for row, column in entries:
        mask[at.index(row), at.index(column)] = True
    number = target_reproduction_number(found.K, mask)
    named = " and ".join(f"{row} by {column}" for row, column in entries)
    return EntrySetNumber(
        tuple((row, column) for row, column in entries),
        number.T,
        number.critical_effort,
        _why(number, f"infection of {named}"),
    )


def _control(found: Numbers) -> ControlResult:
    scenario, types = found.scenario, found.template.types
    at = [types[k] for k in found.at]
    warnings = list(dict.fromkeys([*scenario.warnings, *found.point.infection_free.warnings]))
    kinds: list[TypeNumber] = []
    targets: list[TargetNumber] = []
    states: list[StateNumber] = []
    R0: float | None = None
    if found.no_R0 is not None:
        warnings.append(f"No R0: {found.no_R0}")
    elif found.spectrum is None:
        R0 = 0.0
        warnings.append(f"{nothing_new(scenario)} There is nothing to control.")
    else:
        R0 = nearest(found.spectrum.root)
        if len(types) > MOST_WRITTEN:
            warnings.append(f"{len(types)} types: the numbers of single types and states are not listed.")
        else:
            kinds = _types(found, at)
            targets = _targets(found, at, warnings)
            states = (
                []
                if scenario.given is not None
                else [
                    StateNumber(
                        types[k], number.T, number.critical_effort, _why(number, f"the infectivity of {types[k]}")
                    )
                    for k, number in state_reproduction_numbers(found.F, found.V)
                ]
            )
    return ControlResult(
        scenario.title, scenario.digest, R0, found.no_R0, tuple(kinds), tuple(targets), tuple(states), tuple(warnings)
    )


def _types(found: Numbers, at: Sequence[str]) -> list[TypeNumber]:
    m = len(at)
    single = all_single_types(found.K)
    out = [
        TypeNumber((at[k],), number.T, number.critical_effort, _why(number, at[k])) for k, number in enumerate(single)
    ]
    if m > MOST_FOR_SETS:
        return out
    for size in range(2, m + 1):
        for members in combinations(range(m), size):
            mask = np.zeros(m, dtype=bool)
            mask[list(members)] = True
            number = type_reproduction_number(found.K, mask)
            named = tuple(at[k] for k in members)
            out.append(TypeNumber(named, number.T, number.critical_effort, _why(number, ", ".join(named))))
    return out


def _targets(found: Numbers, at: Sequence[str], warnings: list[str]) -> list[TargetNumber]:
    m = len(at)
    if m > MOST_FOR_ENTRIES:
        warnings.append(
            f"{m} types at infection: the numbers of single entries of K are listed for up to {MOST_FOR_ENTRIES}."
        )
        return []
    out = []
    for i, j in np.argwhere(pattern(found.K)):
        mask = np.zeros((m, m), dtype=bool)
        mask[i, j] = True
        number = target_reproduction_number(found.K, mask)
        why = _why(number, f"infection of {at[i]} by {at[j]}")
        out.append(TargetNumber((at[i], at[j]), number.T, number.critical_effort, why))
    return out


def _why(number: ReproductionNumber, target: str) -> str | None:
    if number.T is not None:
        return None
    return f"T({target}) does not exist: without it the infection sustains itself (rho = {number.rest:.4g})."


def group_numbers(scenario: Scenario, dimension: str) -> tuple[TypeNumber, ...]:
    """Return the type-reproduction number of each group of a dimension: all its types at infection acted on together.

    For models of any size: past the size at which K is written out it is applied and never formed. `types` of each number
    is the label of the group.

    Raises
    ------
    ngm.ScenarioError
        The scenario has no such dimension.
    ngm.DerivationError
        As `ngm.solve`.
    """
    if dimension not in scenario.dimensions:
        known = ", ".join(scenario.dimensions) or "none"
        raise ScenarioError(
            Problem("control, by", f"'{dimension}' is no dimension of the scenario. Its dimensions: {known}.")
        )
    found = decided_numbers(scenario)
    if found.no_R0 is not None or found.spectrum is None:
        return ()
    belongs = _belongs(found, dimension)
    out = []
    with precision(found.bits):
        for k, group in enumerate(scenario.dimensions[dimension].groups):
            mask = belongs == k
            if not mask.any():
                continue
            if found.operator is not None:
                T, rest = found.operator.type_number(mask)
                number = ReproductionNumber(T, rest)
            else:
                number = type_reproduction_number(found.K, mask)
            out.append(TypeNumber((group,), number.T, number.critical_effort, _why(number, group)))
    return tuple(out)


def _belongs(found: Numbers, dimension: str) -> npt.NDArray[np.intp]:
    """Return the group of each type at infection along a dimension; -1 where it has none."""
    template = found.template
    groups = found.scenario.dimensions[dimension].groups
    out = []
    for name in template.infected:
        by = template.by(name)
        place = by.index(dimension) if dimension in by else None
        for copy in found.scenario.copies(by):
            out.append(-1 if place is None else groups.index(copy[place]))
    return np.asarray(np.array(out, dtype=np.intp)[found.at])
