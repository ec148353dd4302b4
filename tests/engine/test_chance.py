"""By chance: published extinction probabilities, simulation of the branching process, and the least root."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ngm.engine.chance import Events, Generations, Steps, extinction


def test_one_type():
    # Published (second hand), Allen & Lahodny (2012) J. Biol. Dyn. 6:590-611: R0 = 2, exponential period 1/R0; fixed
    # period the least root of q = exp(-R0 (1 - q)).
    assert extinction(Events(np.array([[2.0]]), np.zeros((1, 1)), np.ones(1)), 1).q[0] == 0.5
    assert extinction(Generations(np.array([[2.0]])), 1).q[0] == pytest.approx(0.2031878700, abs=1e-10)


def test_below_one_the_outbreak_dies_out_surely():
    for process in (Events(np.array([[0.9]]), np.zeros((1, 1)), np.ones(1)), Generations(np.array([[1.0]]))):
        found = extinction(process, 1)
        assert (found.q[0], found.residual) == (1.0, 0.0)


def test_types_that_lead_nowhere_die_out_surely():
    # By hand: type 0 grows by itself; type 1 infects nobody; type 2 becomes type 0 with chance 1/2.
    births = np.diag([2.0, 0, 0])
    moves = np.zeros((3, 3))
    moves[0, 2] = 1
    found = extinction(Events(births, moves, np.ones(3)), 3)
    assert found.q == pytest.approx([0.5, 1, 0.75], rel=1e-15)
    assert found.q[1] == 1


def test_steps_by_hand():
    # By hand: all leave after one step, and infect a Poisson number with mean 2: that of generations.
    found = extinction(Steps(np.array([[2.0]]), np.zeros((1, 1)), np.ones(1)), 1)
    assert found.q[0] == pytest.approx(0.2031878700, abs=1e-10)


def test_periodic_types():
    # By hand, Poisson: hosts and vectors in turn; q_h = exp(-a (1 - q_v)), q_v = exp(-b (1 - q_h)).
    found = extinction(Generations(np.array([[0, 1.5], [2.0, 0]])), 2).q
    assert found == pytest.approx(np.exp([-2 * (1 - found[1]), -1.5 * (1 - found[0])]), abs=1e-15)
    assert np.all(found < 1)


rates = st.lists(st.floats(0.0, 2.0), min_size=9, max_size=9)


@settings(max_examples=25, deadline=None)
@given(births=rates, moves=rates, exits=st.lists(st.floats(0.2, 2), min_size=3, max_size=3))
def test_least_root(births, moves, exits):
    B, M = np.array(births).reshape(3, 3), np.array(moves).reshape(3, 3)
    np.fill_diagonal(M, 0.0)
    process = Events(B, M, np.array(exits))
    found = extinction(process, 3)
    assert process.image(found.q) == pytest.approx(found.q, abs=1e-12)
    # Second route: plain iteration from 0 rises to the least root; it never passes it.
    q = np.zeros(3)
    for _ in range(3000):
        q = process.image(q)
    assert np.all(q <= found.q + 1e-12)
    V = np.diag(exits + M.sum(axis=0)) - M
    root = max(abs(np.linalg.eigvals(B @ np.linalg.inv(V))))
    if abs(root - 1) > 1e-6:
        assert bool(np.any(found.q < 1)) == bool(root > 1)
    if abs(root - 1) > 0.2:
        assert found.q == pytest.approx(q, abs=1e-9)


def simulate(process: Events, start: int, runs: int, seed: int, enough: int = 150) -> int:
    """Return how many of some families of one case die out before they have `enough` members at once."""
    rng = np.random.default_rng(seed)
    m = len(process.exits)
    # Event k < m: one of k is born; m + k: becomes k; 2 m: leaves.
    chances = np.concatenate([process.births, process.moves, process.exits[None, :]]) / process.total
    edges = np.cumsum(chances, axis=0)
    alive = np.zeros((runs, m), dtype=int)
    alive[:, start] = 1
    while True:
        size = alive.sum(axis=1)
        active = np.flatnonzero((size > 0) & (size < enough))
        if not len(active):
            return int((size == 0).sum())
        # Which of the members acts first does not matter for the end: any of those alive.
        shares = np.cumsum(alive[active], axis=1) / size[active, None]
        actor = (rng.random(len(active))[:, None] > shares).sum(axis=1)
        event = (rng.random(len(active))[None, :] > edges[:-1][:, actor]).sum(axis=0)
        alive[active[event >= m], actor[event >= m]] -= 1
        made = event < 2 * m
        alive[active[made], event[made] % m] += 1


def test_against_simulation_of_the_branching_process():
    # Second route: 2,000 families of each type, seed fixed; within four standard errors. A family that has reached 150
    # members dies out with a chance below 1e-20.
    births = np.array([[0, 0.9, 0.2], [0, 0, 0], [0, 0.3, 0]])
    moves = np.array([[0, 0, 0], [0.5, 0, 0.0], [0.1, 0, 0]])
    process = Events(births, moves, np.array([0.05, 0.4, 0.3]))
    q = extinction(process, 3).q
    runs = 2000
    for start in range(3):
        share = simulate(process, start, runs, 77 + start) / runs
        assert abs(share - q[start]) < 4 * math.sqrt(q[start] * (1 - q[start]) / runs)
