"""Numbers other than R0 at every draw: the growth rate, and reproduction numbers of types and of entries of K."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from ngm.analysis.batch import TASK, ReproductionNumbers, draw_numbers, growth_rates_at, next_generation_matrices
from ngm.analysis.numbers import decided_numbers
from ngm.engine.drawn_numbers import target_numbers
from ngm.errors import Problem, ScenarioError
from ngm.scenario.fields import closest, listed, short
from ngm.scenario.model import Intervention, Scenario

__all__ = ["GROWTH", "Drawn", "drawn_numbers", "read_numbers"]

FloatArray = npt.NDArray[np.float64]

GROWTH = "growth_rate"
#: Doubles of K that are held at a time.
MOST_HELD = 1 << 23
NO_R0 = "there is no R0"
NO_T = "what is not acted on sustains the infection by itself"


@dataclass(frozen=True, eq=False)
class Drawn:
    """A number that is asked for at every draw.

    Attributes
    ----------
    name : str
        ``R0``, ``growth_rate``, ``T(E_h)``, ``T(E_h, E_v)``, ``T(E_h <- E_v)``.
    threshold : float
        What it is compared with: 1, or 0 for the growth rate.
    targeted : (n, n) array of bool, optional
        Of a T: the entries of K that are acted on.
    """

    name: str
    threshold: float = 1.0
    targeted: npt.NDArray[np.bool_] | None = None


def read_numbers(scenario: Scenario, names: Sequence[str]) -> tuple[Drawn, ...]:
    """Return the numbers that are named: ``growth_rate``, ``T(types)``, ``T(infected <- by)``.

    Types are separated by commas, as are several entries: ``T(E[0-4], E[5-17])``, ``T(E_h <- E_v, E_v <- E_h)``.

    Raises
    ------
    ngm.ScenarioError
        A name that is none of these, or a type that is no type at infection.
    """
    types: list[str] | None = None
    out: list[Drawn] = []
    problems: list[Problem] = []
    for name in dict.fromkeys(" ".join(name.split()) for name in names):
        if name.lower().replace(" ", "_") == GROWTH:
            if scenario.given is not None:
                problems.append(Problem("numbers at draws", "a next-generation matrix as given has no growth rate."))
            out.append(Drawn(GROWTH, 0.0))
        elif name.startswith("T(") and name.endswith(")"):
            if types is None:
                found = decided_numbers(scenario)
                types = [found.template.types[k] for k in found.at]
                if found.K is None and found.spectrum is not None:
                    told = (
                        f"{len(found.template.types)} types: numbers of types are computed where K can be written out."
                    )
                    problems.append(Problem("numbers at draws", told))
            out.append(_target(name, types, problems))
        else:
            problems.append(
                Problem(
                    "numbers at draws",
                    f"'{short(name)}' is none. Write growth_rate, T(type), T(type, type) or T(infected <- by).",
                )
            )
    if problems:
        raise ScenarioError(problems)
    return tuple(out)


def _target(name: str, types: list[str], problems: list[Problem]) -> Drawn:
    """Return a T; a problem for each name in it that is no type at infection."""
    mask = np.zeros((len(types), len(types)), dtype=bool)
    parts = _parts(name[2:-1])
    pairs = [tuple(end.strip() for end in part.split("<-")) for part in parts]
    known = {"".join(label.split()): k for k, label in enumerate(types)}
    if not parts or len({len(pair) for pair in pairs}) > 1 or len(pairs[0]) > 2:
        problems.append(
            Problem(
                name[:60],
                "expected types, or entries as infected <- by, separated by commas: T(E_h, E_v), T(E_h <- E_v).",
            )
        )
        return Drawn(name)
    rows = []
    for pair in pairs:
        places = [known.get("".join(end.split())) for end in pair]
        for end, place in zip(pair, places, strict=True):
            if place is None:
                hint = closest(end, types) or f" Types: {listed(types)}."
                problems.append(Problem(name[:60], f"'{short(end)}' is no type at infection.{hint}"))
        rows.append(places)
    if any(place is None for places in rows for place in places):
        return Drawn(name)
    for places in rows:
        mask[places[0], slice(None) if len(places) == 1 else places[1]] = True
    shown = ", ".join(" <- ".join(types[place] for place in places if place is not None) for places in rows)
    return Drawn(f"T({shown})", 1.0, mask)


def _parts(text: str) -> list[str]:
    """Return what commas outside of brackets separate: ``E[0-4,North], E[5-17,North]`` is two types."""
    out, depth = [""], 0
    for sign in text:
        depth += (sign == "[") - (sign == "]")
        if sign == "," and depth == 0:
            out.append("")
        else:
            out[-1] += sign
    return [part.strip() for part in out if part.strip()]


def drawn_numbers(
    scenario: Scenario,
    draws: Mapping[str, Any],
    wanted: Sequence[Drawn],
    executor: Executor | None = None,
    *,
    intervention: str | Intervention | None = None,
) -> list[ReproductionNumbers]:
    """Return each number at each draw, and why there is none where there is none; other arguments as `draw_numbers`."""
    out: dict[int, ReproductionNumbers] = {}
    targets = {k: one.targeted for k, one in enumerate(wanted) if one.targeted is not None}
    for k, one in enumerate(wanted):
        if one.name == GROWTH:
            out[k] = growth_rates_at(scenario, draws, executor, intervention=intervention)
        elif k not in targets:
            out[k] = draw_numbers(scenario, draws, executor, intervention=intervention)
    if targets:
        values, without = _targets(scenario, draws, list(targets.values()), executor, intervention)
        for k, row in zip(targets, values, strict=True):
            missing = Counter({NO_R0: int(without.sum()), NO_T: int((np.isnan(row) & ~without).sum())})
            out[k] = ReproductionNumbers(row, {why: n for why, n in missing.items() if n})
    return [out[k] for k in range(len(wanted))]


def _targets(
    scenario: Scenario,
    draws: Mapping[str, Any],
    masks: list[npt.NDArray[np.bool_]],
    executor: Executor | None,
    intervention: str | Intervention | None,
) -> tuple[FloatArray, npt.NDArray[np.bool_]]:
    """Return the numbers of several sets of entries, (sets, N), and at which draws there is no K."""
    columns = {name: np.asarray(draws[name]) for name in draws}
    size = max((array.shape[-1] for array in columns.values()), default=0)
    width = TASK if executor is not None else max(256, min(TASK, MOST_HELD // max(1, masks[0].size)))
    values = np.empty((len(masks), size))
    without = np.zeros(size, dtype=bool)
    for start in range(0, size, width):
        part = slice(start, start + width)
        chunk = {name: array[..., part] for name, array in columns.items()}
        K = next_generation_matrices(scenario, chunk, executor, intervention=intervention)
        without[part] = ~np.isfinite(K).all(axis=(0, 1))
        for row, mask in enumerate(masks):
            values[row, part] = target_numbers(K, mask)
    return values, without
