"""R0 at many draws of the parameters at once, here or on other machines.

The derivation is traced once (`ngm.analysis.draw_plan`), and the program that comes out is run on arrays of draws, in pieces
that stay in the processor's memory. Each number depends on its own draw only, so it is the same however the work is split.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping
from concurrent.futures import Executor
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from ngm.analysis.draw_plan import plan
from ngm.analysis.draw_work import compute
from ngm.analysis.draws import read_draws
from ngm.analysis.steady import refuse_season
from ngm.errors import Problem, ScenarioError
from ngm.progress import advance
from ngm.scenario.model import Intervention, Scenario
from ngm.scenario.packages import find_intervention

__all__ = ["ReproductionNumbers", "draw_numbers", "growth_rates_at", "next_generation_matrices", "reproduction_numbers"]

FloatArray = npt.NDArray[np.float64]

#: Draws that one task of an executor takes.
TASK = 1 << 16


@dataclass(frozen=True, eq=False, slots=True)
class ReproductionNumbers:
    """R0 at each draw.

    Attributes
    ----------
    values : (N,) array of float
        nan where there is no R0. With an intervention: control reproduction numbers.
    missing : mapping of str to int
        Why there is none -> at how many draws.
    """

    values: FloatArray
    missing: Mapping[str, int]

    @property
    def rejected(self) -> int:
        """How many draws have no R0."""
        return sum(self.missing.values())


def reproduction_numbers(
    scenario: Scenario,
    draws: Mapping[str, Any],
    executor: Executor | None = None,
    *,
    intervention: str | Intervention | None = None,
) -> FloatArray:
    """Return R0 = rho(F V^-1) at each of N draws of some parameters; the others keep their values.

    Parameters
    ----------
    scenario : Scenario
    draws : mapping of str to array
        Parameter -> N numbers in the parameter's own unit. For a grouped parameter (N,) is the same in every group,
        (groups, N) has a row for each; ``"sigma[65+]"`` names one group, the others keep their values. A draw of a
        parameter that follows others replaces its expression. A table of columns will do.
    executor : concurrent.futures.Executor, optional
        Takes the work in tasks: a pool of processes, or `get_executor()` of a Dask client. Every number is the same, to
        the last bit, with and without one.
    intervention : str or Intervention, optional
        Applied at every draw: its name in the scenario, or the object. The numbers are then control reproduction numbers.

    Returns
    -------
    (N,) array of float
        No unit; nan at draws without an R0: `draw_numbers` counts the reasons. Relative error some 1e-13, as a rule less.
        Where several infection-free states fit, the one that goes with the scenario's own is followed.

    Raises
    ------
    ScenarioError
        An unknown name; arrays of different lengths; a draw that is no number, negative without ``sign = "any"``, or at
        which a parameter that follows has no value: with the parameter and the number of the first such draw, from 1.
    DerivationError
        The scenario has no infection-free state at its own values, or a draw moves a given one off rest.

    Examples
    --------
    >>> import ngm
    >>> scenario = ngm.load("scenarios/seir-velmar-fever.toml")
    >>> ngm.reproduction_numbers(scenario, {"beta": [0.2, 0.42]}).round(4).tolist()
    [0.9996, 2.0992]
    """
    refuse_season(scenario, "R0 of many values at once")
    return draw_numbers(scenario, draws, executor, intervention=intervention).values


def draw_numbers(
    scenario: Scenario,
    draws: Mapping[str, Any],
    executor: Executor | None = None,
    *,
    intervention: str | Intervention | None = None,
    passing: bool = False,
) -> ReproductionNumbers:
    """Return R0 at each draw, and why there is none where there is none; see `reproduction_numbers`.

    `passing`: a draw at which a parameter that follows has no value, or a given state is off rest, is one without an R0 and
    is counted, where it is refused otherwise.
    """
    values, codes, reasons = _all(scenario, draws, executor, intervention, "R0", passing)
    counted = Counter(codes[codes > 0].tolist() if reasons else [])
    return ReproductionNumbers(values, {reasons[code - 1]: n for code, n in sorted(counted.items())})


def next_generation_matrices(
    scenario: Scenario,
    draws: Mapping[str, Any],
    executor: Executor | None = None,
    *,
    intervention: str | Intervention | None = None,
) -> FloatArray:
    """Return K at each draw, (n, n, N) in the order of the types at infection; nan where there is none.

    For numbers that follow from K other than R0; arguments as for `reproduction_numbers`.
    """
    values, _, _ = _all(scenario, draws, executor, intervention, "K")
    n = round(len(values) ** 0.5)
    return values.reshape(n, n, values.shape[-1])


def growth_rates_at(
    scenario: Scenario,
    draws: Mapping[str, Any],
    executor: Executor | None = None,
    *,
    intervention: str | Intervention | None = None,
    passing: bool = False,
) -> ReproductionNumbers:
    """Return the growth rate at each draw, per time unit of the scenario; arguments as for `draw_numbers`.

    There is one where there is an infection-free state, with or without an R0; `missing` says why elsewhere.
    """
    if scenario.given is not None:
        raise ScenarioError(Problem("growth rate", "a next-generation matrix as given holds no times: it has none."))
    values, codes, reasons = _all(scenario, draws, executor, intervention, "growth", passing)
    counted = Counter(codes[codes > 0].tolist() if reasons else [])
    return ReproductionNumbers(values, {reasons[code - 1]: n for code, n in sorted(counted.items())})


def _all(
    scenario: Scenario,
    draws: Mapping[str, Any],
    executor: Executor | None,
    intervention: str | Intervention | None,
    what: str,
    passing: bool = False,
) -> tuple[FloatArray, npt.NDArray[np.int32], list[str]]:
    if isinstance(intervention, str):
        intervention = find_intervention(scenario, intervention)
    columns, arrays = read_draws(scenario, draws)
    made = plan(scenario, intervention, columns, len(arrays), growth=what == "growth")
    size = len(arrays[0])
    starts = range(0, size, TASK)
    # All in one array from the start: a piece fills its part.
    values = np.empty((made.size**2, size) if what == "K" else size)
    if executor is None:
        done = [
            compute(made, k, [a[k : k + TASK] for a in arrays], what, passing, values[..., k : k + TASK])
            for k in starts
        ]
    else:
        waiting = [
            executor.submit(compute, made, start, [a[start : start + TASK] for a in arrays], what, passing)
            for start in starts
        ]
        done = []
        for start, future in zip(starts, waiting, strict=True):
            piece = future.result()
            values[..., start : start + TASK] = piece.values
            done.append(piece)
            advance(piece.values.shape[-1])
    refused = [piece.refused for piece in done if piece.refused is not None]
    if refused:
        # Pieces come in the order of the draws: the first refusal is the one of the first draw.
        raise refused[0]
    reasons: list[str] = []
    codes = np.zeros(size, dtype=np.int32)
    for start, piece in zip(starts, done, strict=True):
        if not piece.reasons:
            continue
        reasons += [why for why in piece.reasons if why not in reasons]
        table = np.array([0, *(reasons.index(why) + 1 for why in piece.reasons)], dtype=np.int32)
        codes[start : start + len(piece.codes)] = table[piece.codes]
    return values, codes, reasons
