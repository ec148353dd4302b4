"""Classes and periods of grouped models against those of the matrix written out."""

from __future__ import annotations

import numpy as np
import pytest

from ngm.engine.blocks import BlockMatrix, Chain, Contact, Diagonal, Part
from ngm.engine.routes import Routes
from ngm.engine.structure import classes, period


def random_model(seed: int) -> tuple[BlockMatrix, BlockMatrix, np.ndarray]:
    """Return F, V and the types at infection of two stages over two dimensions, with many zeros."""
    rng = np.random.default_rng(seed)
    shape = (int(rng.integers(1, 4)), int(rng.integers(1, 5)))
    n = shape[0] * shape[1]
    parts = (Part(shape, 0, (0, 1)), Part(shape, n, (0, 1)))

    def some(size: tuple[int, ...], share: float) -> np.ndarray:
        return rng.uniform(0.1, 1, size) * (rng.uniform(size=size) < share)

    density = rng.choice([0.3, 0.6, 1.0])
    F, V = BlockMatrix(parts), BlockMatrix(parts)
    F.add(
        0,
        1,
        Chain((Diagonal(some(shape, 0.9)), Contact(0, some((shape[0],) * 2, density)), Diagonal(some(shape, 0.9)))),
    )
    if rng.uniform() < 0.6:
        F.add(0, 1, Chain((Contact(1, some((shape[1],) * 2, density)), Diagonal(some(shape, 0.8)))))
    if rng.uniform() < 0.4:
        F.add(1, 0, Chain((Contact(0, some((shape[1], shape[0], shape[0]), density), within=1),)))
    for k in (0, 1):
        V.add(k, k, Chain((Diagonal(np.full(shape, 3.0)),)))
    V.add(1, 0, Chain((Diagonal(some(shape, 0.8)),), -1))
    if rng.uniform() < 0.5:
        V.add(0, 0, Chain((Contact(1, 0.1 * some((shape[1],) * 2, 0.4)),), -1))
    at = np.flatnonzero((F @ np.ones((2 * n, 1)))[:, 0] != 0)
    return F, V, at


@pytest.mark.parametrize("seed", range(200))
def test_classes_and_periods(seed: int) -> None:
    """Second route: K written out, and the structure of its zeros."""
    F, V, at = random_model(seed)
    if not len(at):
        pytest.skip("nobody is infected in this one")
    m = F.size
    K = ((F @ np.eye(m)) @ np.linalg.inv(V @ np.eye(m)))[np.ix_(at, at)]
    there = K > 1e-12
    routes = Routes(F, V, at)
    found = {tuple(sorted(group.tolist())): h for group, h in zip(routes.classes, routes.periods, strict=True)}
    expected = {tuple(sorted(group.tolist())): period(there, group) for group in classes(there)}
    assert found == expected
    place = {int(t): n for n, group in enumerate(routes.classes) for t in group}
    for i, j in np.argwhere(there):
        assert place[int(j)] <= place[int(i)]
