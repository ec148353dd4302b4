"""R0 and growth over a whole season, beside the numbers of the averaged and of the worst season.

Everything else in the house computes at the mean of each seasonal parameter. Here F and V are taken along the period, at the
infection-free state, which moves itself where a season acts on uninfected hosts (births of vectors in summer).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

from ngm.analysis.matrices import as_floats
from ngm.analysis.numbers import Numbers
from ngm.derivation.in_time import Moments
from ngm.engine.balls import balls, nearest, to_floats
from ngm.engine.floquet import (
    PeriodicNumber,
    Steps,
    exponent,
    on_nodes,
    periodic_number,
    refined,
    root_by_scale,
)
from ngm.engine.linear import pattern
from ngm.engine.orbit import NoOrbitError, Orbit, conserved_sums, periodic_orbit
from ngm.engine.structure import leading_to, reachable
from ngm.errors import DerivationError, Problem
from ngm.results_season import Seasonal, SeasonalClass
from ngm.scenario.model import Scenario, Season
from ngm.scenario.season import breaks, common_period, seasonal_parameters

__all__ = ["MOST_SEASONAL", "OverTheYear", "multiplier", "seasonal"]

#: Infected types up to which a seasonal model is computed.
MOST_SEASONAL = 60
#: Moments of the period at which the course of the number and of the state is shown.
SHOWN = 121
#: Net flow over gross flow up to which the averaged state counts as at rest all the time.
AT_REST = 1e-9

FloatArray = Any


def multiplier(season: Season, moments: FloatArray) -> FloatArray:
    """Return what a seasonal parameter's value is multiplied by at these moments, in time units."""
    t = np.asarray(moments, dtype=float)
    period = float(season.period)
    if season.values:
        part = np.floor(np.mod(t, period) / period * len(season.values) + 1e-12).astype(int)
        return np.array([float(v) for v in season.values])[np.minimum(part, len(season.values) - 1)]
    return 1 + float(season.amplitude) * np.cos(2 * np.pi * (t - float(season.peak)) / period)


@dataclass
class OverTheYear:
    """F and V over the period of one scenario, with or without an intervention."""

    found: Numbers

    @cached_property
    def scenario(self) -> Scenario:
        """The scenario with the parameters in force, seasons included."""
        return self.found.point.scenario

    @cached_property
    def breaks(self) -> FloatArray:
        """Moments between which everything is smooth, 0 and the period included."""
        return np.array([float(moment) for moment in breaks(self.scenario)])

    @property
    def period(self) -> float:
        """The common period in time units."""
        return float(common_period(self.scenario))

    def moments(self, times: FloatArray) -> Moments:
        """Return the template at these times."""
        seasons = seasonal_parameters(self.scenario)
        return Moments(
            self.found.point.template, self._matrices, {name: multiplier(s, times) for name, s in seasons.items()}
        )

    @cached_property
    def _matrices(self) -> dict[str, Any]:
        return {name: as_floats(np.asarray(table)) for name, table in self.found.point.matrices.items()}

    @cached_property
    def _averaged_state(self) -> FloatArray:
        template, state = self.found.point.template, self.found.point.state
        moving = self.moments(np.zeros(1)).moving
        parts = [as_floats(template.space.flatten(np.asarray(state[c]), template.by(c)))[:, 0] for c in moving]
        return np.concatenate(parts) if parts else np.empty(0)

    @cached_property
    def orbit(self) -> Orbit | None:
        """The infection-free state over the period; None where it is the averaged one all the time.

        Raises
        ------
        DerivationError
            No state repeats itself after a period, or one that does is negative.
        """
        start = self._averaged_state
        if not len(start):
            return None
        times = self.breaks[0] + self.period * (np.arange(61) + 0.5) / 61
        probe = self.moments(times)
        net, gross = probe.net_flow(np.repeat(start[:, None], len(times), axis=1))
        if np.all(np.abs(net) <= AT_REST * gross):
            return None
        known: dict[bytes, Moments] = {}

        def at(moments: FloatArray) -> Moments:
            key = moments.tobytes()
            if key not in known:
                known.clear()
                known[key] = self.moments(moments)
            return known[key]

        def field(x: FloatArray) -> FloatArray:
            return self.moments(np.resize(times, x.shape[1])).net_flow(x)[0]

        sums = conserved_sums(field, len(start))
        try:
            orbit = periodic_orbit(
                lambda x, t: at(t).net_flow(x)[0], lambda x, t: at(t).slope(x), self.breaks, start, sums
            )
        except NoOrbitError:
            raise DerivationError(
                Problem(
                    "infection_free",
                    f"without infection no state was found that comes back after a period of {self.period:g} "
                    f"{self.scenario.time_unit}. Check the seasons of the rates of birth and death, or make their amplitude "
                    "smaller to see from where on there is one.",
                    key=("infection_free",),
                )
            ) from None
        lowest = orbit.at(np.linspace(self.breaks[0], self.breaks[-1], 501))
        if np.min(lowest) < -1e-9 * max(1e-300, float(np.max(np.abs(lowest)))):
            raise DerivationError(
                Problem(
                    "infection_free", "without infection a compartment becomes negative in the course of the season."
                )
            )
        return orbit

    def state(self, times: FloatArray) -> FloatArray:
        """Return the infection-free state, the copies of the moving compartments, at times within the period, (n, k)."""
        if self.orbit is None:
            return np.repeat(self._averaged_state[:, None], len(times), axis=1)
        return self.orbit.at(times)

    def slopes(self, times: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Return F and V at times within the period, (k, m, m) each."""
        F, V = self.moments(times).F_and_V(self.state(times))
        return F * self._scales, V

    @cached_property
    def _scales(self) -> FloatArray:
        """What susceptibility and infectivity under an intervention multiply F by."""
        m = len(self.found.template.types)
        if self.found.point.intervention is None:
            return np.ones((m, m))
        return to_floats(self.found.point.scaled(balls(np.ones((m, m)))))

    def number(
        self, rows: FloatArray | None = None, columns: FloatArray | None = None, start: float = 1.0
    ) -> PeriodicNumber:
        """Return the factor by which F, or only some rows or columns of it, must be divided for a number of 1.

        Without `rows` and `columns` that is R0; with them a type or a state reproduction number of the season.
        """
        m = len(self.found.template.types)
        acted = np.ones((m, m), dtype=bool)
        if rows is not None:
            acted &= np.asarray(rows, dtype=bool)[:, None]
        if columns is not None:
            acted &= np.asarray(columns, dtype=bool)[None, :]
        if acted.all():
            return periodic_number(self._kept_slopes, self.breaks, start)

        def compute(steps: Steps, guess: float) -> float | None:
            F, V = self._nodes(steps)
            return root_by_scale(np.where(acted, 0.0, F) - V, np.where(acted, F, 0.0), steps, guess)

        return refined(compute, self.breaks, start)

    def growth(self, keep: FloatArray | None = None, rows: FloatArray | None = None) -> float:
        """Return the Floquet exponent of F - V, per time unit; with `rows` only these rows of F, on the states `keep`."""

        def compute(steps: Steps, _: float) -> float:
            F, V = self._nodes(steps)
            if rows is not None:
                F = np.where(np.asarray(rows, dtype=bool)[:, None], F, 0.0)
            A = F - V
            return exponent(A if keep is None else A[:, :, keep][:, :, :, keep], steps)

        value = refined(compute, self.breaks, 1.0, scale=1 / self.period).value
        assert value is not None
        return value

    def alone(self, rows: FloatArray) -> PeriodicNumber:
        """Return R0 of the class of types whose rows of F these are, as if no other type were infected."""

        def compute(steps: Steps, guess: float) -> float | None:
            F, V = self._nodes(steps)
            return root_by_scale(-V, np.where(np.asarray(rows, dtype=bool)[:, None], F, 0.0), steps, guess)

        return refined(compute, self.breaks, 1.0)

    @cached_property
    def _known(self) -> dict[int, tuple[FloatArray, FloatArray]]:
        return {}

    def _nodes(self, steps: Steps) -> tuple[FloatArray, FloatArray]:
        """Return F and V on the nodes of steps; the same steps are evaluated once."""
        count = len(steps.widths)
        if count not in self._known:
            self._known[count] = on_nodes(self.slopes, steps)
        return self._known[count]

    def _kept_slopes(self, times: FloatArray) -> tuple[FloatArray, FloatArray]:
        count = len(times) // 3
        steps = Steps(np.empty(count), np.asarray(times).reshape(count, 3))
        F, V = self._nodes(steps)
        return F.reshape(-1, *F.shape[2:]), V.reshape(-1, *V.shape[2:])


def seasonal(found: Numbers, *, classes: bool = True) -> Seasonal:
    """Return the number over the period of a scenario of which some parameter has a season.

    Parameters
    ----------
    found : Numbers
        Of the scenario, with or without an intervention: the averaged season.
    classes : bool
        Whether each class of types is looked at by itself.

    Raises
    ------
    DerivationError
        The model is too large, or no infection-free state comes back after a period.

    References
    ----------
    Wang & Zhao (2008) J. Dyn. Differ. Equ. 20:699-717; Bacaer & Guernaoui (2006) J. Math. Biol. 53:421-436 (from memory)
    """
    seasons = seasonal_parameters(found.scenario)
    m = len(found.template.types)
    if m > MOST_SEASONAL:
        raise DerivationError(
            Problem(
                "parameters, season",
                f"{m} infected types: a season is computed for at most {MOST_SEASONAL}. Take fewer groups, or leave out the "
                "season and compare steady years.",
                key=("parameters", next(iter(seasons)), "season"),
            )
        )
    year = OverTheYear(found)
    shown = year.breaks[0] + year.period * np.arange(SHOWN) / (SHOWN - 1)
    shown[-1] = np.nextafter(year.breaks[-1], year.breaks[0])
    F, V = year.slopes(shown)
    trouble = _trouble(F, V, found.template.types, shown)
    averaged = None if found.no_R0 is not None else 0.0 if found.spectrum is None else nearest(found.spectrum.root)
    frozen = None if trouble else _frozen(F, V)
    number = PeriodicNumber(None, 0.0, 0, True)
    if trouble is None and _vanishes(F):
        number = PeriodicNumber(0.0, 0.0, 0, True)
    elif trouble is None:
        number = year.number(start=averaged or 1.0)
        if number.value is None:
            trouble = (
                "without any transmission the infected compartments do not die out over a period: what arises there exceeds "
                "what leaves."
            )
    warnings = []
    if not number.settled:
        warnings.append(
            f"R0 over the season is known to about {number.error:.1g} only: its course is not smooth enough."
        )
    state = year.state(shown)
    moving = year.moments(shown[:1]).moving
    labels = found.template.items_of(moving)
    high, low = (None, None) if frozen is None else (int(np.argmax(frozen)), int(np.argmin(frozen)))
    return Seasonal(
        R0=number.value,
        no_R0=trouble,
        error=number.error,
        growth_rate=year.growth(),
        period=year.period,
        parameters=tuple(seasons),
        averaged=averaged,
        worst=None if frozen is None else float(frozen[high]),
        worst_at=None if high is None else float(shown[high]),
        mildest=None if frozen is None else float(frozen[low]),
        mildest_at=None if low is None else float(shown[low]),
        moments=tuple(shown.tolist()),
        frozen=() if frozen is None else tuple(frozen.tolist()),
        state_moves=year.orbit is not None,
        state={label: tuple(row.tolist()) for label, row in zip(labels, state, strict=True)},
        multipliers={name: tuple(multiplier(s, shown).tolist()) for name, s in seasons.items()},
        classes=_classes(year, number) if classes and number.value is not None else (),
        warnings=tuple(warnings),
    )


def _trouble(F: FloatArray, V: FloatArray, types: tuple[str, ...], moments: FloatArray) -> str | None:
    """Return why F and V over the period give no next-generation operator, None where they do."""
    if not (np.all(np.isfinite(F)) and np.all(np.isfinite(V))):
        return "F or V has no value at some moment of the season: a rate divides by 0."
    if np.any(F < 0):
        k, i, j = np.argwhere(F < 0)[0]
        return f"F has a negative entry at time {moments[k]:.4g}: {types[j]} takes away new infections of {types[i]}."
    off = np.where(np.eye(V.shape[-1], dtype=bool), 0.0, V)
    if np.any(off > 0):
        k, i, j = np.argwhere(off > 0)[0]
        return (
            f"V has a positive off-diagonal entry at time {moments[k]:.4g}: members leave {types[i]} the faster, the more "
            f"there are in {types[j]}."
        )
    return None


def _vanishes(F: FloatArray) -> bool:
    return not np.any(F)


def _frozen(F: FloatArray, V: FloatArray) -> FloatArray | None:
    """Return the spectral radius of F V^-1 at each moment; None where V has no inverse at one of them."""
    try:
        K = np.linalg.solve(np.swapaxes(V, 1, 2), np.swapaxes(F, 1, 2))
    except np.linalg.LinAlgError:
        return None
    if not np.all(np.isfinite(K)):
        return None
    return np.asarray(np.max(np.abs(np.linalg.eigvals(K)), axis=1))


def _classes(year: OverTheYear, whole: PeriodicNumber) -> tuple[SeasonalClass, ...]:
    """Return the number and the growth of each class of K by itself."""
    found, spec = year.found, year.found.spectrum
    if spec is None:
        return ()
    m = len(found.template.types)
    out = []
    for members, period in zip(spec.classes, spec.periods, strict=True):
        rows = np.zeros(m, dtype=bool)
        rows[found.at[members]] = True
        labels = tuple(found.template.types[int(k)] for k in found.at[members])
        if period is None:
            out.append(SeasonalClass(labels, 0.0, None))
            continue
        states = _class_states(found, rows)
        own = whole if len(spec.classes) == 1 else year.alone(rows)
        value = own.value
        if value is not None and whole.value is not None and abs(value - whole.value) <= own.error + whole.error:
            value = whole.value  # the class that attains R0: one number, to the last digit
        out.append(SeasonalClass(labels, value, year.growth(states, rows)))
    return tuple(out)


def _class_states(found: Numbers, rows: FloatArray) -> FloatArray:
    """Return the states on paths from the types of a class to states that infect them, as `class_growth_rate` does."""
    transitions = pattern(found.V)
    np.fill_diagonal(transitions, False)
    visited = reachable(transitions, np.flatnonzero(rows))
    sources = pattern(found.F[rows, :]).any(axis=0) & visited
    return np.flatnonzero(visited & leading_to(transitions, sources))
