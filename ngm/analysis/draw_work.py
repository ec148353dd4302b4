"""One piece of the draws: the programs run, every check looked at, and what fails one done by itself or refused in words."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from fractions import Fraction

import numpy as np
import numpy.typing as npt

from ngm.analysis.draw_plan import NEGATIVE_F, NO_STATE, OVERDRAWN, POSITIVE_V, SINGULAR, Check, Plan
from ngm.analysis.numbers import decided_numbers
from ngm.analysis.state import AT_REST
from ngm.engine.balls import nearest, precision
from ngm.engine.batch import perron_roots
from ngm.engine.drawn_numbers import growth_rates
from ngm.engine.rest_batch import follow_rest
from ngm.errors import DerivationError, NgmError, Problem, ScenarioError
from ngm.progress import advance
from ngm.scenario.model import Intervention, Scenario, number

__all__ = ["Piece", "at_draw", "compute"]

FloatArray = npt.NDArray[np.float64]

#: Below this size a negative value of a parameter that follows is rounding.
ROUNDING = 1e-12
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


@dataclass(frozen=True)
class Piece:
    """What came of some draws: values, why there is none (0: there is one; else a place in `reasons`, from 1)."""

    values: FloatArray
    codes: npt.NDArray[np.int32]
    reasons: tuple[str, ...]
    refused: NgmError | None = None


def compute(
    plan: Plan,
    start: int,
    arrays: list[FloatArray],
    what: str = "R0",
    passing: bool = False,
    out: FloatArray | None = None,
) -> Piece:
    """Return R0 (or K, row by row) at some draws; `start`: how many draws come before them, `out`: where values go."""
    return _Work(plan, start, arrays, what, passing, out).run()


class _Work:
    def __init__(
        self,
        plan: Plan,
        start: int,
        arrays: list[FloatArray],
        what: str,
        passing: bool,
        out: FloatArray | None,
    ) -> None:
        self.plan, self.start, self.arrays, self.what, self.passing = plan, start, arrays, what, passing
        self.size = len(arrays[0])
        shape = (plan.size**2, self.size) if what == "K" else (self.size,)
        self.values = np.empty(shape) if out is None else out
        self.codes = np.zeros(self.size, dtype=np.int32)
        self.reasons: list[str] = []
        self.alone = 0

    def run(self) -> Piece:
        plan = self.plan
        held = 64 if plan.main is None else len(plan.main.outputs) + plan.size**2 + plan.inputs
        if plan.growth is not None:
            held += 3 * len(plan.slopes)
        width = max(256, MOST_HELD // held)
        refused = None
        for at in range(0, self.size, width):
            part = slice(at, min(at + width, self.size))
            refused = self._part(part)
            if refused is not None:
                break
            advance(part.stop - part.start - self.alone)
            self.alone = 0
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
        if self.what == "growth":
            self._grow(part, inputs, good)
            return
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

    def _grow(self, part: slice, inputs: list[FloatArray], good: npt.NDArray[np.bool_] | None) -> None:
        """Put in the growth rate of a part: where there is a state without infection, also where V is no M-matrix."""
        plan, codes = self.plan, self.codes[part]
        assert plan.growth is not None
        without = [k + 1 for k, why in enumerate(self.reasons) if why in (SINGULAR, NEGATIVE_F, POSITIVE_V)]
        wanted = np.ones(len(codes), dtype=bool) if good is None else good | np.isin(codes, without)
        codes[wanted] = 0
        m = 1 + max((max(i, j) for i, j, _ in plan.slopes), default=-1)
        slopes = _filled(plan.growth.run(inputs), plan.slopes, m)
        pattern = np.zeros((m, m), dtype=bool)
        for i, j, _ in plan.slopes:
            pattern[i, j] = True
        rates = np.full(len(codes), np.nan)
        rates[wanted] = growth_rates(slopes if wanted.all() else slopes[:, :, wanted], pattern)
        if plan.scenario.discrete:
            with np.errstate(all="ignore"):
                rates = np.log1p(rates)
        lost = wanted & ~np.isfinite(rates)
        rates[lost] = np.nan
        self.values[part] = rates
        if lost.any():
            codes[lost] = self._code(NO_VALUE)

    def _matrices(self, numbers: FloatArray) -> FloatArray:
        """Return K of each draw, (n, n, N), from the outputs of `Plan.main`."""
        return _filled(numbers, self.plan.entries, self.plan.size)

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
            advance()
            self.alone += 1
            place = part.start + int(k)
            self.values[..., place] = np.nan
            try:
                found = decided_numbers(at_draw(self.plan, [float(a[place]) for a in self.arrays]), self._intervention)
            except NgmError as error:
                why = NO_STATE if isinstance(error, DerivationError) else str(error.problems[0])
                if error.problems[0].where.startswith("flows out of "):
                    why = OVERDRAWN
                self.codes[place] = self._code(why)
                continue
            if self.what == "growth":
                with precision(found.bits):
                    growth = found.growth
                self.values[place] = np.nan if growth is None else growth
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


def _filled(numbers: FloatArray, entries: tuple[tuple[int, int, float | None], ...], n: int) -> FloatArray:
    """Return matrices, (n, n, N), from their entries that are not 0 by structure; `numbers`: those without a constant."""
    if [e[2] for e in entries] == [None] * n**2:
        return numbers[: n**2].reshape(n, n, numbers.shape[1])
    out = np.zeros((n, n, numbers.shape[1]))
    row = 0
    for i, j, constant in entries:
        if constant is None:
            out[i, j] = numbers[row]
            row += 1
        else:
            out[i, j] = constant
    return out


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
