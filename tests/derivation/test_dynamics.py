"""The system of all flows: many states at once as one by one, slopes and second derivatives against differences."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import ngm
from ngm.analysis.motion import dynamics_of, start_of
from ngm.analysis.numbers import decided_numbers
from ngm.derivation.dynamics import Dynamics
from ngm.engine.series import SERIES, coefficient, lines

SCENARIOS = Path(__file__).parents[2] / "scenarios"
STEMS = [
    "seir-velmar-fever",
    "vector-borne-ostrel-fever",
    "three-towns-torvane-fever",
    "age-by-region-lantern-rash",
    "leaky-vaccine-fenmoor-itch",
]


@pytest.fixture(params=STEMS)
def system(request):
    found = decided_numbers(ngm.load(SCENARIOS / f"{request.param}.toml"))
    dynamics = dynamics_of(found, "it")
    rng = np.random.default_rng(5)
    state = start_of(found, dynamics) + 1
    return dynamics, state, state[:, None] * np.exp(0.2 * rng.normal(size=(len(state), 6)))


def test_many_states_at_once_as_one_by_one(system):
    dynamics, _, states = system
    # Births do not vary with the state: they belong in every column.
    alone = np.stack([dynamics.net(x)[:, 0] for x in states.T], axis=1)
    assert np.asarray(dynamics.net(states)) == pytest.approx(alone, rel=1e-12, abs=1e-12)


def test_a_program_gives_what_the_walk_over_the_trees_gives(system):
    dynamics, state, states = system
    other = Dynamics(dynamics.scenario, dynamics.matrices)
    vars(other)["_is_traced"] = False  # second route: the trees are walked at every state
    assert np.asarray(dynamics.net(states)) == pytest.approx(np.asarray(other.net(states)), rel=1e-12, abs=1e-12)
    assert dynamics.slope(state) == pytest.approx(other.slope(state), rel=1e-12, abs=1e-12)


def test_slopes_are_differences(system):
    dynamics, _, states = system
    x = states[:, 0]
    J = np.asarray(dynamics.slope(x))
    for k in range(len(x)):
        h = 1e-5 * x[k]
        step = np.eye(len(x))[k] * h
        difference = (dynamics.net(x + step) - dynamics.net(x - step))[:, 0] / (2 * h)
        assert J[:, k] == pytest.approx(difference, rel=1e-5, abs=1e-5 * np.abs(J).max())


def test_second_derivatives_are_differences_of_slopes(system):
    dynamics, _, states = system
    x, u = states[:, 1], states[:, 2] - states[:, 3]
    exact = 2 * coefficient(np.asarray(dynamics.net(lines(x, u), SERIES)), 2)[:, 0]
    h = 1e-4
    difference = (np.asarray(dynamics.slope(x + h * u)) - np.asarray(dynamics.slope(x - h * u))) @ u / (2 * h)
    # Slopes are of the size of their largest entry: that is what their difference rounds against.
    size = np.abs(np.asarray(dynamics.slope(x))).max() * np.abs(u).max()
    assert exact == pytest.approx(difference, rel=1e-5, abs=1e-8 * size)


def test_the_infection_free_state_is_at_rest(system):
    dynamics, state, _ = system
    at_rest = state - 1
    at_rest[: dynamics.infected] = 0
    net = np.asarray(dynamics.net(at_rest))[:, 0]
    assert np.abs(net).max() <= 1e-9 * np.abs(at_rest).max()
