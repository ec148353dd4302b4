"""Whether a number below 1 is safe: which way endemic states leave the infection-free one, and how far down they reach."""

from __future__ import annotations

from dataclasses import replace
from itertools import pairwise
from typing import Any

import numpy as np

from ngm.analysis.along import ALL_TRANSMISSION, Along, chosen
from ngm.analysis.bifurcation import Coefficients, NotComputedError, coefficients, sums_kept
from ngm.analysis.bifurcation_text import coefficients_in_words
from ngm.analysis.motion import dynamics_of, no_flows, start_of
from ngm.analysis.numbers import Numbers, decided_numbers
from ngm.analysis.steady import refuse_season
from ngm.derivation.dynamics import NotLooseError
from ngm.engine.balls import nearest, precision
from ngm.engine.continuation import Branch, Problem, at_parameter, follow, stable_beside
from ngm.engine.roots import root_between
from ngm.errors import DerivationError, NgmError
from ngm.errors import Problem as Wrong
from ngm.expression.tree import names
from ngm.results_course import BranchPoint, Endemic, Threshold
from ngm.scenario.model import Intervention, Scenario
from ngm.worker import LIMIT

__all__ = ["MOST_FOLLOWED", "is_backward", "lowest_number", "threshold"]

#: Components of the state up to which endemic states are followed.
MOST_FOLLOWED = 60
#: Values of the parameter that are tried for a number of 1, and decades to either side where it has no range.
TRIED, DECADES = 81, 3.0

WHAT = "what lies below a number of 1"
FloatArray = Any


def threshold(
    scenario: Scenario, *, along: str | None = None, intervention: Intervention | None = None, limit: float = LIMIT
) -> Threshold:
    """Return whether infection can persist where the number is below 1, and from where on it cannot.

    Parameters
    ----------
    along : str or None
        The parameter that is moved, or "all-transmission"; None: a parameter to which all transmission is proportional,
        else all transmission.
    intervention : Intervention or None
        In force all the while; several together by `ngm.combined`.
    limit : float
        Seconds for a and b as formulas, which small models have; 0: none.

    Raises
    ------
    ngm.ScenarioError
        `along` is unknown, or the intervention cannot be evaluated.
    ngm.DerivationError
        As `ngm.solve`; the scenario has no flows, a season, or steps of time.

    References
    ----------
    Castillo-Chavez & Song (2004) Math. Biosci. Eng. 1:361-404; Kribs-Zaleta & Velasco-Hernandez (2000) Math. Biosci.
    164:183-201 (from memory)
    """
    no_flows(scenario, WHAT)
    refuse_season(scenario, WHAT)
    if scenario.discrete:
        raise DerivationError(
            Wrong("scenario, time", f'{WHAT} is computed in continuous time only. Leave out time = "discrete".')
        )
    found = decided_numbers(scenario, intervention)
    name = None if intervention is None else intervention.name
    with precision(found.bits):
        return _Search(found, name, along, limit).run()


class _Search:
    def __init__(self, found: Numbers, intervention: str | None, along: str | None, limit: float = 0.0) -> None:
        self.found, self.intervention, self.limit = found, intervention, limit
        self.along: Along = chosen(found.point.scenario, along)
        self.warnings: list[str] = []
        spectrum = found.spectrum
        self.R_now = None if found.no_R0 is not None else 0.0 if spectrum is None else nearest(spectrum.root)

    def run(self) -> Threshold:
        at_one, parts, branch, why = None, None, None, None
        try:
            self._check()
            dynamics = self.dynamics = dynamics_of(self.found, WHAT, along=self.along.parameter, loose=True)
            if dynamics.size > MOST_FOLLOWED:
                raise NotComputedError(
                    f"{dynamics.size} compartments are too many: at most {MOST_FOLLOWED} are followed."
                )
            self.kept = sums_kept(dynamics, self.along.now or 1.0)
            self._check_given()
            at_one, state = self._at_one()
            self.state = state
            parts = coefficients(dynamics, np.append(state, at_one), self.kept)
            branch = self._branch(state, at_one, parts)
        except (NotComputedError, NotLooseError) as error:
            why = str(error)
        except DerivationError as error:
            why = str(error)
        return self._result(at_one, parts, branch, why)

    def _check(self) -> None:
        if self.R_now is None:
            raise NotComputedError(f"there is no number at these values: {self.found.no_R0}")
        if self.R_now == 0:
            raise NotComputedError("the number is 0: there is no transmission that could be raised.")

    def _check_given(self) -> None:
        """Refuse where the sizes that a closed population keeps would move with the parameter."""
        name = self.along.parameter
        if not len(self.kept) or name is None:
            return
        scenario = self.found.point.scenario
        todo = set().union(
            set(), *(names(value.tree) for values in scenario.infection_free.values() for value in values)
        )
        seen: set[str] = set()
        while todo:
            one = todo.pop()
            if one in seen:
                continue
            seen.add(one)
            if one in scenario.definitions:
                todo |= names(scenario.definitions[one].expression.tree)
            if one in scenario.parameters and scenario.parameters[one].follows:
                todo |= set().union(*(names(value.tree) for value in scenario.parameters[one].values))
        if name in seen:
            raise NotComputedError(
                f"{name} decides on the state given in [infection_free] of a closed population, so nothing leads from one "
                "value to another. Move another parameter."
            )

    # --- the value at which the number is 1 -------------------------------------------------------------------------

    def _at_one(self) -> tuple[float, FloatArray]:
        """Return the value at which the number is 1, next to the one in force, and the infection-free state there."""
        assert self.R_now is not None
        start = start_of(self.found, self.dynamics)
        if self.along.parameter is None:
            return 1.0 / self.R_now, start
        return self._crossing(start)

    def _growth(self, state: FloatArray, value: float) -> float:
        m = self.dynamics.infected
        J = np.asarray(self.dynamics.slope(np.append(state, value)))[:m, :m]
        return float(np.max(np.linalg.eigvals(J).real))

    def _rest(self, state: FloatArray, value: float) -> FloatArray | None:
        """Return the infection-free state at a value, from that at a value nearby; None where there is none."""
        m, n = self.dynamics.infected, self.dynamics.size
        x, sums = state.copy(), self.kept[:, m:]
        held = sums @ state[m:]
        size = max(1e-300, float(np.max(np.abs(state))))
        for _ in range(30):
            y = np.append(x, value)
            net, J = np.asarray(self.dynamics.net(y))[m:, 0], np.asarray(self.dynamics.slope(y))[m:, m:n]
            rows = np.vstack([J, sums]) if len(sums) else J
            right = np.concatenate([net, sums @ x[m:] - held]) if len(sums) else net
            if not (np.all(np.isfinite(rows)) and np.all(np.isfinite(right))):
                return None
            if not len(rows):
                return x
            step = np.linalg.lstsq(rows, right, rcond=None)[0]
            x[m:] -= step
            if float(np.max(np.abs(step))) <= 1e-13 * size:
                return x if np.min(x) >= -1e-9 * size else None
        return None

    def _crossing(self, start: FloatArray) -> tuple[float, FloatArray]:
        """Return the crossing within the parameter's range, or past it where there is none within."""
        now, states = self.along.now, {}

        def at(value: float, near: FloatArray) -> float | None:
            state = self._rest(near, value)
            if state is None:
                return None
            states[value] = state
            return self._growth(state, value)

        here = self._growth(start, now)
        best: tuple[float, float, float, FloatArray] | None = None
        within, beyond = self._grids(now)
        for values in (*within, *beyond):
            if best is not None and values in beyond:
                break
            before, growth, state = now, here, start
            for value in values:
                new = at(value, state)
                if new is None:
                    break
                if (new > 0) != (growth > 0) or new == 0:
                    distance = abs(np.log(value / now)) if now > 0 and value > 0 else abs(value - now)
                    if best is None or distance < best[0]:
                        best = (float(distance), before, value, states[value])
                    break
                before, growth, state = value, new, states[value]
        if best is None:
            raise NotComputedError(
                f"the number does not pass 1 as {self.along.label} moves alone. Move another parameter, or all-transmission."
            )
        _, first, second, near = best
        root = root_between(lambda value: at(value, near), min(first, second), max(first, second))
        found = self._rest(near, root)
        assert found is not None
        return root, found

    def _grids(self, now: float) -> tuple[list[list[float]], list[list[float]]]:
        """Return the values to be tried from the one in force on: downwards and upwards in the range, then past it."""
        low, high = self.along.low, self.along.high
        half = TRIED // 2
        steps = np.arange(1, half) / (half - 1)
        factors = 10 ** (DECADES * steps)
        if now == 0:
            top = high if high is not None and high > 0 else 1.0
            return [(top * steps).tolist()], [(top * factors).tolist()]
        anywhere = [(now / factors).tolist(), (now * factors).tolist()]
        if high is None:
            return anywhere, []
        bottom, top = min(low or 0.0, now), max(high, now)
        return [(now + (end - now) * steps).tolist() for end in (bottom, top) if end != now], anywhere

    # --- the curve ----------------------------------------------------------------------------------------------------

    def _branch(self, state: FloatArray, at_one: float, parts: Coefficients) -> Branch:
        scale = np.full(len(state) + 1, max(1e-300, float(np.max(np.abs(state)))))
        scale[-1] = abs(at_one)
        self.problem = Problem(
            net=lambda y: np.asarray(self.dynamics.net(y))[:, 0],
            slope=lambda y: np.asarray(self.dynamics.slope(y)),
            scale=scale,
            conserved=self.kept,
            infected=self.dynamics.infected,
        )
        low, high = 0.0, 2.5 * max(self.along.now, at_one)
        if self.along.high is not None and self.along.high >= at_one:
            high = max(self.along.high, self.along.now)
        return follow(self.problem, np.append(state, at_one), parts.direction, low, high)

    def _stable(self, y: FloatArray) -> bool:
        n = self.dynamics.size
        return stable_beside(np.asarray(self.dynamics.slope(y))[:, :n], self.kept)

    def _number(self, value: float, at_one: float) -> float | None:
        """Return the number at a value of the parameter."""
        if self.along.parameter is None:
            return value / at_one
        scenario = self.along.at(self.found.point.scenario, value)
        acting = self.found.point.intervention
        if acting is not None:
            acting = replace(acting, changes=tuple(c for c in acting.changes if c.what != "parameter"))
        try:
            found = decided_numbers(scenario, acting)
        except NgmError:
            return None
        return None if found.no_R0 is not None or found.spectrum is None else nearest(found.spectrum.root)

    # --- the result ---------------------------------------------------------------------------------------------------

    def _result(
        self, at_one: float | None, parts: Coefficients | None, branch: Branch | None, why: str | None
    ) -> Threshold:
        scenario, along = self.found.scenario, self.along
        direction, a, b, rising = None, None, None, True
        if parts is not None and why is None:
            rising = parts.b > 0
            a, b = parts.a, abs(parts.b)
            direction = "backward" if a > 0 else "forward"
        turning = R_turning = None
        endemic: list[Endemic] = []
        points: list[BranchPoint] = []
        m = len(self.found.template.types)
        formulas: tuple[str | None, str | None] = None, None
        if direction is not None and parts is not None and at_one is not None:
            formulas = coefficients_in_words(self.dynamics, self.state, at_one, parts, self.limit)
        if branch is not None and at_one is not None:
            points = [
                BranchPoint(float(y[-1]) / along.factor, float(y[:m].sum()), self._stable(y))
                for y in _with_turning(branch)
            ]
            points.insert(0, BranchPoint(at_one / along.factor, 0.0, False))
            below = [y for y in branch.turning if (y[-1] < at_one) == rising]
            if direction == "backward" and below:
                lowest = min(below, key=lambda y: y[-1] if rising else -y[-1])
                turning = float(lowest[-1]) / along.factor
                R_turning = self._number(float(lowest[-1]), at_one)
            elif direction == "backward":
                self.warnings.append(
                    "The endemic states were followed to the end of the parameter's range without a turning point: they reach "
                    "further down than was looked."
                )
            for y in at_parameter(self.problem, branch, along.now):
                state = dict(zip(self.dynamics.labels, y[:-1].tolist(), strict=True))
                endemic.append(Endemic(state, float(y[:m].sum()), self._stable(y)))
            if branch.left == "steps":
                self.warnings.append("The curve of endemic states was given up on the way: it bends too sharply.")
        return Threshold(
            title=scenario.title,
            digest=scenario.digest,
            time_unit=scenario.time_unit,
            label="R0" if self.intervention is None else "control reproduction number",
            intervention=self.intervention,
            along=along.label,
            unit=along.unit,
            now=along.now / along.factor,
            R_now=self.R_now,
            at_one=None if at_one is None else at_one / along.factor,
            rising=rising,
            direction=direction,  # type: ignore[arg-type]
            why=why,
            a=a,
            b=b,
            formula_a=formulas[0],
            formula_b=formulas[1],
            turning=turning,
            R_turning=R_turning,
            endemic=tuple(sorted(endemic, key=lambda e: e.infected)),
            branch=tuple(points),
            reached="" if branch is None else branch.left,
            warnings=tuple(dict.fromkeys([*scenario.warnings, *self.warnings])),
        )


def _with_turning(branch: Branch) -> list[FloatArray]:
    """Return the points of a curve past its start, its turning points in their places."""
    out = list(branch.points[1:])
    for turn in branch.turning:
        gaps = [np.linalg.norm(a - turn) + np.linalg.norm(b - turn) - np.linalg.norm(a - b) for a, b in pairwise(out)]
        if gaps:
            out.insert(int(np.argmin(gaps)) + 1, turn)
    return out


def is_backward(found: Numbers) -> bool | None:
    """Return whether endemic states exist just below a number of 1 as all transmission moves; None where not computed.

    Cheap: one slope and three second derivatives, nothing is followed.
    """
    scenario = found.scenario
    if scenario.discrete or scenario.given is not None or scenario.projection is not None or found.no_R0 is not None:
        return None
    if found.spectrum is None or any(p.season is not None for p in scenario.parameters.values()):
        return None
    if len(found.template.types) > MOST_FOLLOWED or not found.point.exact:
        return None
    number = nearest(found.spectrum.root)
    if number <= 0:
        return None
    try:
        dynamics = dynamics_of(found, WHAT, loose=True)
        if dynamics.size > MOST_FOLLOWED:
            return None
        kept = sums_kept(dynamics, 1.0)
        return coefficients(dynamics, np.append(start_of(found, dynamics), 1 / number), kept).a > 0
    except (NotComputedError, NotLooseError, NgmError):
        return None


def lowest_number(found: Numbers) -> tuple[float | None, float | None]:
    """Return the number at the turning point as all transmission moves, None where there is none, and the number now."""
    result = _Search(found, None, ALL_TRANSMISSION).run()
    return result.R_turning, result.R_now
