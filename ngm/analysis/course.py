"""The first weeks: the flows followed from a few cases of each type, beside the growth rate, the stable mix and K, K^2, ..."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from ngm.analysis.matrices import as_floats
from ngm.analysis.motion import dynamics_of, no_flows, start_of
from ngm.analysis.numbers import Numbers, decided_numbers
from ngm.derivation.dynamics import Dynamics
from ngm.engine.balls import nearest, precision
from ngm.engine.course import CourseFailedError, followed, growth_at_end, mix_gap, settling, stepped
from ngm.engine.growth import doubling_time
from ngm.errors import DerivationError, Problem, ScenarioError
from ngm.expression.names import suggest
from ngm.progress import advance, expect
from ngm.results_course import Course, SeedCourse
from ngm.results_season import Seasonal
from ngm.scenario.model import Intervention, Scenario
from ngm.scenario.season import seasonal_parameters

__all__ = ["course"]

#: Components of the state up to which flows are followed, and types that are seeded where nobody says which.
MOST_FOLLOWED, MOST_SEEDS = 800, 12
#: Points of a course, generations told.
POINTS, GENERATIONS = 121, 8
#: Where nobody says: other modes have fallen behind by exp(14), about a million, and growth or decline is by exp(40) at most.
DEPTH, MOST_GROWTH = 14.0, 40.0
#: Seeds are this share of all hosts at most, and so are the infected at the end.
FEW, STILL_FEW = 1e-6, 1e-5
#: Growth within this of what is expected (against the larger of it and 1/horizon), mix within this gap: settled.
GROWTH_GAP, MIX_GAP = 2e-2, 1e-2
#: Components that are followed side by side, and steps of progress that are told of them.
TOGETHER, SHARES = 150, 40
#: How faint infection may become, against what was seeded, before errors count against this.
FAINT = 1e-10
#: Periods of a season that are followed.
PERIODS = 2

WHAT = "the course of the first weeks"
FloatArray = Any


def course(
    scenario: Scenario,
    *,
    horizon: float | None = None,
    cases: float | None = None,
    seeds: Sequence[str] | None = None,
    intervention: Intervention | None = None,
) -> Course:
    """Return the flows followed from a few cases of each type, and what growth rate, mix and generations are expected.

    Parameters
    ----------
    horizon : float or None
        How long, in time units; None: until growth and mix have settled.
    cases : float or None
        How many are seeded; None: so few that hardly anybody susceptible is used up.
    seeds : sequence of str or None
        Types to be seeded, one course each; None: every type, the first twelve where there are more.
    intervention : Intervention or None
        In force all the while; several together by `ngm.combined`.

    Raises
    ------
    ngm.ScenarioError
        A seed is unknown, horizon or cases are not above 0, the intervention cannot be evaluated.
    ngm.DerivationError
        As `ngm.solve`; there are no flows, the model is too large, or the solver gave up.
    """
    no_flows(scenario, WHAT)
    problems = [
        Problem(f"course, {name}", f"expected a number above 0, not {value!r}.")
        for name, value in (("horizon", horizon), ("cases", cases))
        if value is not None and not (math.isfinite(value) and value > 0)
    ]
    if problems:
        raise ScenarioError(problems)
    found = decided_numbers(scenario, intervention)
    name = None if intervention is None else intervention.name
    with precision(found.bits):
        return _Follower(found, name, horizon, cases, seeds).run()


class _Follower:
    def __init__(
        self,
        found: Numbers,
        intervention: str | None,
        horizon: float | None,
        cases: float | None,
        seeds: Sequence[str] | None,
    ) -> None:
        self.found, self.intervention = found, intervention
        self.horizon, self.cases = horizon, cases
        self.types = found.template.types
        self.discrete = found.scenario.discrete
        if not found.point.exact:
            raise DerivationError(Problem("course", f"{len(self.types)} infected types are too many to be followed."))
        self.dynamics: Dynamics = dynamics_of(found, WHAT)
        if self.dynamics.size > MOST_FOLLOWED:
            raise DerivationError(
                Problem(
                    "course", f"{self.dynamics.size} compartments are too many: at most {MOST_FOLLOWED} are followed."
                )
            )
        self.warnings: list[str] = []
        self.seeds = self._seeds(seeds)
        self.matrix = as_floats(found.F) - as_floats(found.V)
        self.year = self._year()

    def _seeds(self, seeds: Sequence[str] | None) -> list[int]:
        if seeds is None:
            if len(self.types) > MOST_SEEDS:
                self.warnings.append(
                    f"{len(self.types)} types: the first {MOST_SEEDS} are seeded. Name others to follow them."
                )
            return list(range(min(len(self.types), MOST_SEEDS)))
        problems = []
        for seed in seeds:
            if seed not in self.types:
                near = suggest(seed, list(self.types))
                hint = f" Did you mean '{near}'?" if near else f" The types: {', '.join(self.types[:12])}."
                problems.append(Problem("course, seed", f"'{seed[:60]}' is no infected type.{hint}"))
        if problems:
            raise ScenarioError(problems)
        return [self.types.index(seed) for seed in dict.fromkeys(seeds)]

    def _year(self) -> Any:
        if not seasonal_parameters(self.found.point.scenario):
            return None
        from ngm.analysis.season import OverTheYear

        return OverTheYear(self.found)

    # --- how long, how many ---------------------------------------------------------------------------------------------

    def _expected(self, seed: int) -> tuple[float, float, FloatArray | None]:
        start = np.arange(len(self.types)) == seed
        if self.discrete:
            # A step multiplies by I + F - V: settled by its modulus, told as a rate.
            step = np.eye(len(self.types)) + self.matrix
            factor, _, mix = settling(step, start, DEPTH)
            values = np.sort(np.abs(np.linalg.eigvals(step)))[::-1]
            behind = values[1] / values[0] if len(values) > 1 and values[0] > 0 else 0.0
            time = DEPTH / -math.log(behind) if 0 < behind < 1 else 3.0 if behind == 0 else math.inf
            return math.log(factor) if factor > 0 else -math.inf, time, mix
        return settling(self.matrix, start, DEPTH)

    def _length(self, expected: Sequence[tuple[float, float, FloatArray | None]]) -> float:
        if self.horizon is not None:
            return self.horizon
        if self.year is not None:
            return PERIODS * float(self.year.period)
        rates = [rate for rate, _, _ in expected if math.isfinite(rate)]
        fastest = max((abs(rate) for rate in rates), default=0.0)
        times = [time for _, time, _ in expected if math.isfinite(time)]
        longest = max(times, default=50.0 / (fastest or 1.0))
        if fastest > 0:
            longest = min(longest, MOST_GROWTH / fastest)
        return float(math.ceil(longest)) if self.discrete else float(longest)

    def _few(self, start: FloatArray, rate: float, length: float) -> float:
        hosts = float(start[self.dynamics.infected :].sum()) or 1.0
        if self.cases is not None:
            return self.cases
        grown = math.exp(min(max(rate, 0.0) * length, 600.0)) if math.isfinite(rate) else 1.0
        return min(FEW * hosts, STILL_FEW * hosts / grown)

    # --- one course -----------------------------------------------------------------------------------------------------

    def _run(self, start: FloatArray, cases: FloatArray, seeds: Sequence[int], times: FloatArray) -> FloatArray:
        """Return the states after each of some seeds, (seeds, times, n): they are followed side by side, at one cost."""
        n, k = len(start), len(seeds)
        first = np.tile(start, (k, 1))
        first[np.arange(k), list(seeds)] += cases
        if self.discrete:
            told = stepped(lambda y: np.asarray(self.dynamics.net(y.T)).T, first, len(times) - 1)
            advance(SHARES)
            return np.moveaxis(told, 1, 0)
        hosts = max(float(np.abs(start).max()), 1e-300)
        infected = np.arange(n) < self.dynamics.infected
        sizes = np.where(infected[None, :], cases[:, None] * FAINT, hosts)
        done, end = 0, float(times[-1])

        def at(t: float) -> Mapping[str, float] | None:
            return None if self.year is None else self._multipliers(t)

        def field(t: float, y: FloatArray) -> FloatArray:
            nonlocal done
            share = min(SHARES, int(SHARES * t / end))
            if share > done:
                advance(share - done)
                done = share
            return np.asarray(self.dynamics.net(y.reshape(k, n).T, multipliers=at(t))).T.ravel()

        def slope(t: float, y: FloatArray) -> FloatArray:
            out = np.zeros((k * n, k * n))
            for j, state in enumerate(y.reshape(k, n)):
                out[j * n : (j + 1) * n, j * n : (j + 1) * n] = self.dynamics.slope(state, multipliers=at(t))
            return out

        try:
            told = followed(field, slope, first.ravel(), times, sizes.ravel(), self._breaks(end))
        except CourseFailedError as failed:
            named = ", ".join(self.types[seed] for seed in seeds)
            raise DerivationError(Problem("course", f"from {named}, {failed}")) from None
        return np.moveaxis(told.reshape(len(times), k, n), 1, 0)

    def _multipliers(self, t: float) -> dict[str, float]:
        from ngm.analysis.season import multiplier

        seasons = seasonal_parameters(self.found.point.scenario)
        return {name: float(multiplier(season, np.array([t]))[0]) for name, season in seasons.items()}

    def _breaks(self, end: float) -> list[float]:
        if self.year is None:
            return []
        period, inner = float(self.year.period), self.year.breaks[:-1]
        return [float(k * period + b) for k in range(math.ceil(end / period)) for b in inner]

    def run(self) -> Course:
        found, dynamics = self.found, self.dynamics
        start = start_of(found, dynamics)
        if self.year is not None:
            first = self.year.state(np.zeros(1))[:, 0]
            moving = found.template.items_of(self.year.moments(np.zeros(1)).moving)
            for label, value in zip(moving, first, strict=True):
                start[dynamics.labels.index(label)] = value
        seasonal = self._seasonal()
        number, growth = self._number(seasonal)
        expected = [self._expected(seed) for seed in self.seeds]
        length = self._length(expected)
        points = int(length) + 1 if self.discrete else POINTS
        times = np.arange(points, dtype=float) if self.discrete else np.linspace(0.0, length, points)
        courses, depleted = [], 0.0
        together = max(1, TOGETHER // len(start))
        parts = [list(range(k, min(k + together, len(self.seeds)))) for k in range(0, len(self.seeds), together)]
        expect(SHARES * len(parts))
        for part in parts:
            cases = np.array([self._few(start, expected[k][0], length) for k in part])
            told = self._run(start, cases, [self.seeds[k] for k in part], times)
            for j, k in enumerate(part):
                rate, _, mix = expected[k]
                if seasonal is not None:
                    rate, mix = seasonal.growth_rate, None
                courses.append(self._seen(self.seeds[k], float(cases[j]), told[j], times, rate, mix))
                depleted = max(depleted, self._depleted(start, told[j]))
        _, _, stable = settling(self.matrix, np.ones(len(self.types), dtype=bool), DEPTH)
        doubling = None if growth is None else doubling_time(growth)
        return Course(
            title=found.scenario.title,
            digest=found.scenario.digest,
            time_unit=found.scenario.time_unit,
            label="R0" if self.intervention is None else "control reproduction number",
            intervention=self.intervention,
            discrete=self.discrete,
            types=self.types,
            types_at_infection=tuple(self.types[k] for k in found.at),
            times=tuple(times.tolist()),
            horizon=float(times[-1]),
            courses=tuple(courses),
            number=number,
            growth_rate=growth,
            doubling_time=None if doubling is None else nearest(doubling),
            stable_mix=None if seasonal is not None or stable is None else tuple(stable.tolist()),
            generations=self._generations(seasonal),
            depleted=depleted,
            warnings=tuple(dict.fromkeys([*found.scenario.warnings, *self.warnings])),
        )

    def _seasonal(self) -> Seasonal | None:
        if self.year is None:
            return None
        from ngm.analysis.season import seasonal

        return seasonal(self.found, classes=False)

    def _number(self, seasonal: Seasonal | None) -> tuple[float | None, float | None]:
        if seasonal is not None:
            return seasonal.R0, seasonal.growth_rate
        found = self.found
        if found.no_R0 is not None:
            self.warnings.append(f"No R0: {found.no_R0}")
            return None, found.growth
        return 0.0 if found.spectrum is None else nearest(found.spectrum.root), found.growth

    def _seen(
        self, seed: int, cases: float, states: FloatArray, times: FloatArray, rate: float, mix: FloatArray | None
    ) -> SeedCourse:
        infected = states[:, : self.dynamics.infected]
        length = float(times[-1])
        since = length - float(self.year.period) if self.year is not None else 0.9 * length
        growth = growth_at_end(times, infected, max(since, 0.0))
        last = infected[-1]
        own = last / last.sum() if last.sum() > 0 else None
        gap = None if own is None or mix is None else mix_gap(own, mix)
        near = growth is not None and abs(growth - rate) <= GROWTH_GAP * max(abs(rate), 1 / length)
        return SeedCourse(
            seed=self.types[seed],
            cases=cases,
            infected=tuple(tuple(row) for row in infected.tolist()),
            growth=growth,
            mix=None if own is None else tuple(own.tolist()),
            mix_gap=gap,
            settled=near and (gap is None or gap <= MIX_GAP),
        )

    def _depleted(self, start: FloatArray, states: FloatArray) -> float:
        if self.year is not None:
            return 0.0
        m = self.dynamics.infected
        whole = start[m:]
        hosts = whole > 1e-3 * max(float(whole.max(initial=0.0)), 1e-300)
        if not hosts.any():
            return 0.0
        left = states[:, m:][:, hosts] / whole[hosts]
        return max(0.0, float(np.max(1 - left)))

    def _generations(self, seasonal: Seasonal | None) -> tuple[tuple[tuple[float, ...], ...], ...]:
        if self.found.K is None or seasonal is not None or not len(self.found.at):
            return ()
        K = as_floats(self.found.K)
        out = []
        for j in range(min(len(K), MOST_SEEDS)):
            x = np.arange(len(K)) == j
            rows = [x.astype(float)]
            for _ in range(GENERATIONS):
                rows.append(K @ rows[-1])
            out.append(tuple(tuple(row.tolist()) for row in rows))
        return tuple(out)
