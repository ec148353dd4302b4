"""R0 at many draws of the parameters at once, here or on other machines.

The derivation is traced once (`ngm.analysis.draw_plan`), and the program that comes out is run on arrays of draws, in pieces
that stay in the processor's memory. Each number depends on its own draw only, so it is the same however the work is split.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Mapping
from concurrent.futures import Executor
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Any

import numpy as np
import numpy.typing as npt

from ngm.analysis.draw_plan import NO_STATE, Check, Plan, plan
from ngm.analysis.draws import read_draws
from ngm.analysis.numbers import decided_numbers
from ngm.analysis.state import AT_REST
from ngm.engine.balls import nearest, precision
from ngm.engine.batch import perron_roots
from ngm.engine.rest_batch import follow_rest
from ngm.errors import DerivationError, NgmError, Problem, ScenarioError
from ngm.scenario.model import Intervention, Scenario, number
from ngm.scenario.packages import find_intervention

__all__ = ["ReproductionNumbers", "draw_numbers", "next_generation_matrices", "reproduction_numbers"]

FloatArray = npt.NDArray[np.float64]

#: Below this size a negative value of a parameter that follows is rounding.
ROUNDING = 1e-12
#: Draws that one task of an executor takes.
TASK = 1 << 16
#: Doubles of K, of checks and of the draws' results that are held at a time in one piece.
MOST_HELD = 1 << 20
#: What a screen's worst number must be: see `Plan.screens`. No number fails each.
_SCREENS: dict[str, Callable[[float], bool]] = {
    "above": lambda x: x > 0,
    "not below": lambda x: x >= 0,
    "finite": lambda x: x < np.inf,
    "largest ratio": lambda x: x <= (1 + AT_REST) / (1 - AT_REST),
    "smallest ratio": lambda x: x >= (1 - AT_REST) / (1 + AT_REST),
}
NO_VALUE = "a rate or an entry of K has no value: it divides by 0 or leaves the range of a function"


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
    made = plan(scenario, intervention, columns, len(arrays))
    size = len(arrays[0])
    pieces = [(start, [a[start : start + TASK] for a in arrays]) for start in range(0, size, TASK)]
    if executor is None:
        done = [compute(made, start, piece, what, passing) for start, piece in pieces]
    else:
        waiting = [executor.submit(compute, made, start, piece, what, passing) for start, piece in pieces]
        done = [future.result() for future in waiting]
    refused = [piece.refused for piece in done if piece.refused is not None]
    if refused:
        # Pieces come in the order of the draws: the first refusal is the one of the first draw.
        raise refused[0]
    reasons: list[str] = []
    codes = np.zeros(size, dtype=np.int32)
    for (start, _), piece in zip(pieces, done, strict=True):
        if not piece.reasons:
            continue
        reasons += [why for why in piece.reasons if why not in reasons]
        table = np.array([0, *(reasons.index(why) + 1 for why in piece.reasons)], dtype=np.int32)
        codes[start : start + len(piece.codes)] = table[piece.codes]
    rows = made.size**2 if what == "K" else None
    empty = np.empty(0) if rows is None else np.empty((rows, 0))
    values = np.concatenate([piece.values for piece in done], axis=-1) if done else empty
    return values, codes, reasons


# --- one piece of the draws -----------------------------------------------------------------------------------------------


@dataclass(frozen=True)
class Piece:
    """What came of some draws: values, why there is none (0: there is one; else a place in `reasons`, from 1)."""

    values: FloatArray
    codes: npt.NDArray[np.int32]
    reasons: tuple[str, ...]
    refused: NgmError | None = None


def compute(plan: Plan, start: int, arrays: list[FloatArray], what: str = "R0", passing: bool = False) -> Piece:
    """Return R0 (or K, row by row) at some draws; `start`: how many draws come before them."""
    return _Work(plan, start, arrays, what, passing).run()


class _Work:
    def __init__(self, plan: Plan, start: int, arrays: list[FloatArray], what: str, passing: bool) -> None:
        self.plan, self.start, self.arrays, self.what, self.passing = plan, start, arrays, what, passing
        self.size = len(arrays[0])
        shape = (self.size,) if what == "R0" else (plan.size**2, self.size)
        self.values = np.empty(shape)
        self.codes = np.zeros(self.size, dtype=np.int32)
        self.reasons: list[str] = []

    def run(self) -> Piece:
        plan = self.plan
        held = 64 if plan.main is None else len(plan.main.outputs) + plan.size**2 + plan.inputs
        width = max(256, MOST_HELD // held)
        refused = None
        for at in range(0, self.size, width):
            part = slice(at, min(at + width, self.size))
            refused = self._part(part)
            if refused is not None:
                break
        return Piece(self.values, self.codes, tuple(self.reasons), refused)

    def _code(self, why: str) -> int:
        if why not in self.reasons:
            self.reasons.append(why)
        return self.reasons.index(why) + 1

    def _part(self, part: slice) -> NgmError | None:
        plan = self.plan
        n = part.stop - part.start
        if plan.main is None:
            self._alone(part, np.ones(n, dtype=bool))
            return None
        inputs = [np.ascontiguousarray(a[part]) for a in self.arrays]
        redo = np.zeros(n, dtype=bool)
        if plan.curve is not None:
            state, found = follow_rest(plan.curve.run, inputs, np.array(plan.start))
            redo |= ~found
            inputs += list(state)
        direct = plan.direct if self.what == "R0" else None
        numbers, worst = (plan.main if direct is None else direct).screened(inputs, plan.extremes)
        if not redo.any() and self._passes(worst):
            self._reproduce(part, inputs, numbers, None)
            return None
        assert plan.details is not None
        out = plan.details.run(inputs)
        codes = self.codes[part]
        fine = ~redo
        first: int = n
        problem: NgmError | None = None
        for check in plan.checks:
            value = out[check.output]
            if check.kind in ("value", "rest"):
                refused = self._refuses(check, out) & fine
                if self.passing:
                    refused &= codes == 0
                    if refused.any():
                        told = "has no value, or is negative" if check.kind == "value" else "is not at rest"
                        codes[refused] = self._code(f"{check.why} {told}")
                    continue
                bad = np.flatnonzero(refused)
                if len(bad) and bad[0] < first:
                    first = int(bad[0])
                    problem = self._refusal(check, out, first, part.start + self.start + first + 1)
            elif check.kind == "redo":
                with np.errstate(invalid="ignore"):
                    redo |= (value <= 0) & (codes == 0)
            else:
                with np.errstate(invalid="ignore"):
                    tests = {"above": value > 0, "not below": value >= 0, "finite": value < np.inf}
                    failed = ~tests[check.kind]
                if failed.any():
                    failed &= (codes == 0) & ~redo
                    missing = ~np.isfinite(value) | (check.kind == "finite")
                    codes[failed & ~missing] = self._code(check.why)
                    if (failed & missing).any():
                        codes[failed & missing] = self._code(NO_VALUE)
        if problem is not None:
            return problem
        self._reproduce(part, inputs, numbers, (codes == 0) & ~redo)
        if redo.any():
            self._alone(part, redo)
        return None

    def _passes(self, worst: list[float]) -> bool:
        """Return whether every check holds at every draw of a part."""
        return all(_SCREENS[kind](value) for value, kind in zip(worst, self.plan.screens, strict=True))

    def _reproduce(
        self, part: slice, inputs: list[FloatArray], numbers: FloatArray, good: npt.NDArray[np.bool_] | None
    ) -> None:
        """Put in R0 (or K) of a part; `good`: at which draws there is one, None for all."""
        plan = self.plan
        if self.what == "K":
            K = self._matrices(numbers)
            if good is not None:
                K[:, :, ~good] = np.nan
            self.values[:, part] = K.reshape(-1, K.shape[2])
            return
        if good is None:
            roots = numbers[0] if plan.direct is not None else perron_roots(self._matrices(numbers), plan.pattern)
        else:
            roots = np.full(len(good), np.nan)
            if plan.direct is not None:
                roots[good] = numbers[0, good]
            else:
                roots[good] = perron_roots(self._matrices(numbers)[:, :, good], plan.pattern)
        if roots.max(initial=0.0) < np.inf:  # neither infinite nor no number
            self.values[part] = roots
            return
        lost = ~np.isfinite(roots) if good is None else good & ~np.isfinite(roots)
        roots[lost] = np.nan
        if plan.direct is not None and lost.any():
            # A square left the range of doubles, maybe, and R0 does not.
            assert plan.main is not None
            few = plan.main.run([np.ascontiguousarray(array[lost]) for array in inputs])
            roots[lost] = perron_roots(self._matrices(few), plan.pattern)
            lost &= np.isnan(roots)
        self.values[part] = roots
        if lost.any():
            self.codes[part][lost] = self._code(NO_VALUE)

    def _matrices(self, numbers: FloatArray) -> FloatArray:
        """Return K of each draw, (n, n, N), from the outputs of `Plan.main`."""
        plan = self.plan
        if [e[2] for e in plan.entries] == [None] * plan.size**2:
            K = numbers[: plan.size**2].reshape(plan.size, plan.size, numbers.shape[1])
        else:
            K = np.zeros((plan.size, plan.size, numbers.shape[1]))
            row = 0
            for i, j, constant in plan.entries:
                if constant is None:
                    K[i, j] = numbers[row]
                    row += 1
                else:
                    K[i, j] = constant
        return K

    # --- refusals -----------------------------------------------------------------------------------------------------

    def _refuses(self, check: Check, out: FloatArray) -> npt.NDArray[np.bool_]:
        value = out[check.output]
        with np.errstate(invalid="ignore"):
            if check.kind == "value":
                return np.asarray(~((value >= -ROUNDING) & (value < np.inf)))
            other = out[check.output + 1]
            return np.asarray(np.abs(value - other) > AT_REST * (np.abs(value) + np.abs(other)))

    def _refusal(self, check: Check, out: FloatArray, k: int, draw: int) -> NgmError:
        value = float(out[check.output, k])
        if check.kind == "value":
            if not np.isfinite(value):
                message = f"has no value at draw {draw}: it divides by 0 or leaves the range of a function."
            else:
                message = f'is {value:g} at draw {draw}, which is negative. Write sign = "any" if it may be.'
            return ScenarioError(Problem(check.why, message))
        other = float(out[check.output + 1, k])
        name = check.why.split("[")[0]
        return DerivationError(
            Problem(
                f"infection_free.{name}",
                f"{check.why} is not at rest at draw {draw}: {value:.6g} per {self.plan.scenario.time_unit} enter and "
                f"{other:.6g} leave. Write the state as an expression in the parameters, or leave {name} out and it is "
                "solved for.",
                key=("infection_free", name),
            )
        )

    # --- one draw at a time -------------------------------------------------------------------------------------------

    def _alone(self, part: slice, chosen: npt.NDArray[np.bool_]) -> None:
        """Compute these draws one by one, as `ngm.solve` would."""
        for k in np.flatnonzero(chosen):
            place = part.start + int(k)
            self.values[..., place] = np.nan
            try:
                found = decided_numbers(at_draw(self.plan, [float(a[place]) for a in self.arrays]), self._intervention)
            except NgmError as error:
                why = NO_STATE if isinstance(error, DerivationError) else str(error.problems[0])
                self.codes[place] = self._code(why)
                continue
            if found.no_R0 is not None:
                self.codes[place] = self._code(found.no_R0.split(":")[0])
                continue
            if self.what == "R0":
                with precision(found.bits):
                    self.values[place] = 0.0 if found.spectrum is None else nearest(found.spectrum.root)
            elif found.K is not None:
                self.values[:, place] = [float(nearest(v)) if not isinstance(v, float) else v for v in found.K.ravel()]

    @property
    def _intervention(self) -> Intervention | None:
        return self.plan.intervention


def at_draw(plan: Plan, values: list[float]) -> Scenario:
    """Return the scenario with the values of one draw, each as the shortest decimal that reads as it."""
    parameters = dict(plan.scenario.parameters)
    for name, places in plan.columns.items():
        old = parameters[name]
        new = [None if k is None else number(Fraction(repr(values[k]))) for k in places]
        parameters[name] = replace(
            old, values=tuple(a if b is None else b for a, b in zip(old.values, new, strict=True))
        )
    return replace(plan.scenario, parameters=parameters)
