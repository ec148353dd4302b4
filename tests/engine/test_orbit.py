"""Periodic states by collocation against following the equation until it settles, and by hand."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from ngm.engine.orbit import NoOrbitError, conserved_sums, periodic_orbit

YEAR = 365.0
NONE = np.empty((0, 1))


def test_births_with_a_wave():
    # By hand: x' = b (1 + e cos(w t)) - m x has x = b/m + b e (m cos(w t) + w sin(w t)) / (m^2 + w^2).
    b, e, m, w = 20.0, 0.6, 0.05, 2 * np.pi / YEAR

    def field(x, t):
        return b * (1 + e * np.cos(w * t)) - m * x

    def slope(x, t):
        return np.full((len(t), 1, 1), -m)

    orbit = periodic_orbit(field, slope, np.array([0, YEAR]), np.array([b / m]), NONE)
    t = np.linspace(0, YEAR, 50)
    expected = b / m + b * e * (m * np.cos(w * t) + w * np.sin(w * t)) / (m**2 + w**2)
    assert orbit.at(t)[0] == pytest.approx(expected, rel=1e-10)


def test_crowding_against_following_it_for_years():
    def field(x, t):
        r = 0.2 * (1 + 0.9 * np.cos(2 * np.pi * t / YEAR))
        return np.array([r * x[0] * (1 - x[0] / 1000) - 0.05 * x[0], 0.1 * x[0] - 0.3 * x[1]])

    def slope(x, t):
        r = 0.2 * (1 + 0.9 * np.cos(2 * np.pi * t / YEAR))
        J = np.zeros((len(t), 2, 2))
        J[:, 0, 0], J[:, 1, 0], J[:, 1, 1] = r * (1 - 2 * x[0] / 1000) - 0.05, 0.1, -0.3
        return J

    orbit = periodic_orbit(field, slope, np.array([0, YEAR]), np.array([750.0, 250.0]), np.empty((0, 2)))
    # Second route: an ordinary solver over ten years.
    end = 10 * YEAR
    run = solve_ivp(
        lambda t, x: field(x[:, None], np.array([t]))[:, 0],
        (0, end),
        [750, 250],
        rtol=1e-10,
        atol=1e-8,
        t_eval=[end - 200],
    )
    assert orbit.at(np.array([YEAR - 200]))[:, 0] == pytest.approx(run.y[:, 0], rel=1e-7)


def test_what_is_conserved_is_kept():
    def rate(t):
        return 0.02 * (1 + 4 * (np.mod(t, YEAR) < 100))

    def field(x, t):
        moved = rate(t) * x[0] - 0.1 * x[1]
        return np.array([-moved, moved])

    def slope(x, t):
        J = np.zeros((len(t), 2, 2))
        J[:, 0, 0], J[:, 0, 1], J[:, 1, 0], J[:, 1, 1] = -rate(t), 0.1, rate(t), -0.1
        return J

    sums = conserved_sums(lambda x: field(x, np.full(x.shape[1], 3.0)), 2)
    assert np.abs(sums[0]) == pytest.approx(np.array([1, 1]) / np.sqrt(2))
    orbit = periodic_orbit(field, slope, np.array([0, 100, YEAR]), np.array([100.0, 200.0]), sums)
    states = orbit.at(np.linspace(0, YEAR, 40))
    assert states.sum(axis=0) == pytest.approx(300, rel=1e-11)
    assert np.ptp(states[0]) > 10


def test_no_orbit_where_it_only_grows():
    with pytest.raises(NoOrbitError):
        periodic_orbit(
            lambda x, t: np.ones_like(x),
            lambda x, t: np.zeros((len(t), 1, 1)),
            np.array([0, 1.0]),
            np.array([1.0]),
            NONE,
        )
