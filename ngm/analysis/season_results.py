"""The results of `solve`, `compare` and `control` with the season in place of the averaged one."""

from __future__ import annotations

from dataclasses import replace
from itertools import combinations
from typing import Any

import numpy as np

from ngm.analysis.numbers import Numbers
from ngm.engine.balls import nearest
from ngm.engine.growth import doubling_time
from ngm.results import Class, ControlResult, Effective, StateNumber, Structure, TypeNumber
from ngm.results_control import Compared
from ngm.results_season import Seasonal
from ngm.scenario.season import seasonal_parameters

__all__ = ["control_over_the_year", "row_over_the_year", "season_words", "solution_over_the_year"]

#: Types at infection up to which every set of types is listed.
MOST_FOR_SETS = 4


def bounds_of(year: Seasonal) -> tuple[float, float] | None:
    """Return R0 less and plus the estimate of its error."""
    if year.R0 is None:
        return None
    return max(0.0, year.R0 - year.error), year.R0 + year.error


def season_words(year: Seasonal, unit: str, what: str = "R0") -> list[str]:
    """Return what must be said of a number over a season, in sentences. `what`: what the number is called."""
    named = ", ".join(year.parameters)
    if year.R0 is None:
        return list(year.warnings)
    return [
        f"{what} is that of a whole season of {year.period:g} {unit}: of the next-generation operator over a period. What "
        f"stands beside it (F, V, K, their formulas and vectors) is that of the averaged season, with {named} at the mean.",
        *_misleading(year, what),
        f"The bounds of {what} are its change at the last halving of the steps, enlarged: an estimate of the error, no proof.",
        *(
            [
                "The infection-free state itself changes over the season and repeats itself; what is listed is that of the "
                "averaged season."
            ]
            if year.state_moves
            else []
        ),
        *year.warnings,
    ]


def _misleading(year: Seasonal, what: str) -> list[str]:
    """Return what the averaged and the worst season have, and why neither is the threshold."""
    if year.R0 is None or year.averaged is None or year.worst is None or year.worst_at is None:
        return []
    if abs(year.averaged - year.R0) <= 1e-9 * max(year.R0, 1e-300):
        averaged = "the same here, which it need not be"
    elif (year.averaged - 1) * (year.R0 - 1) < 0:
        averaged = f"on the other side of 1 than {what}"
    else:
        averaged = f"which is not {what}"
    return [
        f"Two numbers that mislead: the averaged season has {year.averaged:.6g}, {averaged}; the worst moment, at time "
        f"{year.worst_at:.4g}, would have {year.worst:.6g} if it lasted for ever. Cases that arrive then may rise at first "
        f"even where {what} is below 1."
    ]


def solution_over_the_year(found: Numbers, out: dict[str, Any]) -> dict[str, Any]:
    """Return the parts of a `Solution` with the numbers over the season where anything has one."""
    if not seasonal_parameters(found.scenario):
        return out
    from ngm.analysis.season import seasonal  # with what it needs of scipy, for the models that have a season

    year = seasonal(found)
    doubling = doubling_time(year.growth_rate)
    warnings = [w for w in out["warnings"] if not w.startswith("No R0:")]
    if year.no_R0 is not None:
        warnings.append(f"No R0: {year.no_R0}")
    structure, cycle = out["structure"], None if found.spectrum is None else found.spectrum.cycle
    if structure is not None and year.classes:
        structure = Structure(
            structure.irreducible,
            structure.period,
            tuple(
                Class(before.types, now.R0 or 0.0, before.period, now.growth_rate)
                for before, now in zip(structure.classes, year.classes, strict=True)
            ),
        )
    changed = {
        "R0": year.R0,
        "no_R0": year.no_R0,
        "R0_bounds": bounds_of(year),
        "per_cycle": None
        if year.R0 is None
        else 0.0
        if year.R0 == 0
        else year.R0**cycle
        if cycle is not None
        else None,
        "growth_rate": year.growth_rate,
        "doubling_time": None if doubling is None else nearest(doubling),
        "structure": structure,
        "eigenvalues": (),  # those of the averaged K do not lie within the circle of radius R0
        "season": year,
        "warnings": [*warnings, *season_words(year, found.scenario.time_unit)],
    }
    if year.no_R0 is not None:
        changed |= {"K": None, "K_large": None, "right": None, "left": None, "structure": None}
    return {**out, **changed}


def without_season(now: Effective | None) -> Effective | None:
    """Return an effective number as what it is with a season: not computed."""
    if now is None:
        return None
    return Effective(
        None, "with a season, how many one case infects now depends on the day; it is not computed.", now.state
    )


def row_over_the_year(found: Numbers, row: Compared, without: float | None) -> Compared:
    """Return a row of a comparison with the numbers over the season where anything has one."""
    if not seasonal_parameters(found.scenario):
        return row
    from ngm.analysis.season import seasonal

    year = seasonal(found, classes=False)
    doubling, halving = doubling_time(year.growth_rate), doubling_time(-year.growth_rate)
    return replace(
        row,
        R0=year.R0,
        no_R0=year.no_R0,
        bounds=bounds_of(year),
        growth_rate=year.growth_rate,
        doubling_time=None if doubling is None else nearest(doubling),
        halving_time=None if halving is None else nearest(halving),
        reduction=(without - year.R0) / without if year.R0 is not None and without else None,
        below_one=year.R0 is not None and year.R0 < 1,
        case_mix=None,
        effective=None,
        warnings=(*row.warnings, *_of_a_row(found, year, row)),
    )


def _of_a_row(found: Numbers, year: Seasonal, row: Compared) -> list[str]:
    """Return what must be said of one row: of the baseline everything, of the others what differs from row to row."""
    if not row.parts:
        return season_words(year, found.scenario.time_unit, row.label)
    split = year.R0 is not None and year.averaged is not None and (year.averaged - 1) * (year.R0 - 1) < 0
    return [*(_misleading(year, f"the {row.label}") if split else []), *year.warnings]


def control_over_the_year(found: Numbers, plain: ControlResult) -> ControlResult:
    """Return type and state reproduction numbers over the season; `plain` is the averaged season's result.

    T is the number by which the rows (a type) or the column (a state's infectivity) of F must be divided all year for the
    number over the season to be 1. Entries of K have no counterpart over a season.
    """
    if not seasonal_parameters(found.scenario):
        return plain
    from ngm.analysis.season import OverTheYear, seasonal

    year = seasonal(found, classes=False)
    warnings = [w for w in plain.warnings if not w.startswith("No R0:")]
    warnings += season_words(year, found.scenario.time_unit)
    if year.R0 is None or year.R0 == 0:
        if year.no_R0 is not None:
            warnings.append(f"No R0: {year.no_R0}")
        return replace(
            plain,
            R0=year.R0,
            no_R0=year.no_R0,
            type_reproduction=(),
            target_reproduction=(),
            state_reproduction=(),
            warnings=tuple(dict.fromkeys(warnings)),
        )
    warnings.append(
        "Numbers of single entries of K are not defined over a season: who infected whom is told apart by the time of year as "
        "well. Those of types and states are."
    )
    over = OverTheYear(found)
    types, m = found.template.types, len(found.template.types)
    kinds = []
    sets = [(k,) for k in found.at]
    if len(found.at) <= MOST_FOR_SETS:
        sets = [c for size in range(1, len(found.at) + 1) for c in combinations(found.at.tolist(), size)]
    else:
        warnings.append(
            f"{len(found.at)} types at infection: sets of several types are listed for up to {MOST_FOR_SETS}."
        )
    for members in sets:
        mask = np.isin(np.arange(m), members)
        named = tuple(types[int(k)] for k in members)
        whole = len(members) == len(found.at)
        T = year.R0 if whole else over.number(rows=mask, start=year.R0).value
        kinds.append(TypeNumber(named, T, _effort(T), _why(T, ", ".join(named))))
    states = []
    for k in np.flatnonzero(np.any(over.slopes(np.array(year.moments[:-1]))[0] != 0, axis=(0, 1))):
        T = over.number(columns=np.arange(m) == k, start=year.R0).value
        states.append(StateNumber(types[int(k)], T, _effort(T), _why(T, f"the infectivity of {types[int(k)]}")))
    return replace(
        plain,
        R0=year.R0,
        no_R0=None,
        type_reproduction=tuple(kinds),
        target_reproduction=(),
        state_reproduction=tuple(states),
        warnings=tuple(dict.fromkeys(warnings)),
    )


def _effort(T: float | None) -> float | None:
    return None if T is None else 1 - 1 / T if T > 1 else 0.0


def _why(T: float | None, target: str) -> str | None:
    return (
        None
        if T is not None
        else f"T({target}) does not exist: without it the infection sustains itself over the season."
    )
