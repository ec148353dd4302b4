"""Block matrices and transitions against the matrices written out."""

from __future__ import annotations

import numpy as np
import pytest

from ngm.engine.blocks import BlockMatrix, Chain, Contact, Diagonal, Part, Sum
from ngm.engine.transitions import SingularTransitions, Transitions

AGES, TOWNS = 3, 4


def made(seed: int, *, loops: bool, along: str) -> tuple[BlockMatrix, BlockMatrix]:
    """Return a random F and V over two parts in both dimensions, one in one and one in none."""
    rng = np.random.default_rng(seed)
    full, by_age, none = (AGES, TOWNS), (AGES, 1), (1, 1)
    # The first part lists its copies town by town: the order of a compartment's own dimensions.
    parts = (Part(full, 0, (1, 0)), Part(full, 12, (0, 1)), Part(by_age, 24, (0,)), Part(none, 27, ()))

    def diagonal(shape: tuple[int, int]) -> Diagonal:
        return Diagonal(rng.uniform(0.1, 1, shape))

    ages = Contact(0, rng.uniform(0, 1, (AGES, AGES)))
    by_town = Contact(0, rng.uniform(0, 1, (TOWNS, AGES, AGES)), within=1)
    towns = Contact(1, rng.uniform(0, 0.05, (TOWNS, TOWNS)))
    F = BlockMatrix(parts)
    F.add(0, 0, Chain((diagonal(full), ages, diagonal(full), towns)))
    F.add(0, 1, Chain((by_town, diagonal(by_age))))
    F.add(0, 2, Chain((diagonal(full), ages)))
    F.add(2, 1, Chain((Sum((1,), (TOWNS,)), diagonal(full))))
    F.add(0, 3, Chain((diagonal(by_age),)))
    F.add(3, 0, Chain((Sum((0, 1), (AGES, TOWNS)), diagonal(full))))
    F.add(3, 2, Chain((Sum((0, 1), (AGES, TOWNS)),)))
    V = BlockMatrix(parts)
    for k, shape in enumerate((full, full, by_age, none)):
        V.add(k, k, Chain((Diagonal(rng.uniform(2, 3, shape)),)))
    V.add(1, 0, Chain((diagonal(full),), -1))
    V.add(2, 1, Chain((Sum((1,), (TOWNS,)), diagonal(full)), -1))
    if loops:
        V.add(0, 1, Chain((diagonal(full),), -1))
    if along == "towns":
        V.add(0, 0, Chain((towns,), -1))
        V.add(1, 1, Chain((diagonal(full), towns), -1))
    if along == "both":
        V.add(0, 0, Chain((towns,), -1))
        V.add(0, 0, Chain((Diagonal(np.full(full, 0.1)), by_town), -1))
    return F, V


CASES = [(s, loops, along) for s in range(3) for loops in (False, True) for along in ("", "towns", "both")]


@pytest.mark.parametrize(("seed", "loops", "along"), CASES)
def test_products_equal_the_matrices_written_out(seed: int, loops: bool, along: str) -> None:
    """Second route: the sparse matrix of each chain, and the columns of the identity."""
    for matrix in made(seed, loops=loops, along=along):
        m = matrix.size
        dense = matrix @ np.eye(m)
        np.testing.assert_allclose(matrix.to_sparse().toarray(), dense, rtol=1e-13, atol=1e-15)
        np.testing.assert_allclose(matrix.transposed_product(np.eye(m)), dense.T, rtol=1e-13, atol=1e-15)
        x = np.random.default_rng(seed).normal(size=m)
        np.testing.assert_allclose(matrix @ x, dense @ x, rtol=1e-12, atol=1e-13)


@pytest.mark.parametrize(("seed", "loops", "along"), CASES)
@pytest.mark.parametrize("shift", [0.0, 0.7])
def test_transitions_solve_what_they_say(seed: int, loops: bool, along: str, shift: float) -> None:
    _, V = made(seed, loops=loops, along=along)
    dense = V @ np.eye(V.size) + shift * np.eye(V.size)
    right = np.random.default_rng(seed).uniform(size=(V.size, 2))
    transitions = Transitions(V, shift)
    np.testing.assert_allclose(dense @ transitions.solve(right), right, rtol=1e-10)
    np.testing.assert_allclose(dense.T @ transitions.solve_transposed(right), right, rtol=1e-10)
    np.testing.assert_allclose(transitions.solve(right[:, 0]), transitions.solve(right)[:, 0], rtol=1e-13)


def test_a_part_that_nothing_leaves_has_no_inverse() -> None:
    V = BlockMatrix((Part((3,), 0, (0,)),))
    V.add(0, 0, Chain((Diagonal(np.array([1.0, 0.0, 2.0])),)))
    with pytest.raises(SingularTransitions) as caught:
        Transitions(V)
    assert caught.value.parts == [0]
