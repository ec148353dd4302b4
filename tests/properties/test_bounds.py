"""R0 and its bounds against 60-digit arithmetic on the scenario's decimals.

A number lies above the spectral radius of F V^-1 exactly where that number times V, less F, is a non-singular M-matrix: where
elimination, without exchange of rows, meets positive pivots only (Berman & Plemmons 1994, chapter 6, from memory). No
eigenvalue is computed here.
"""

from __future__ import annotations

import mpmath
import pytest

import ngm
from tests.properties.random_models import DIGITS, draw

MODELS = 2000
BATCH = 100


def exceeds(number: object, F: mpmath.matrix, V: mpmath.matrix) -> bool:
    """Return whether a number is larger than the spectral radius of F V^-1; V is an M-matrix."""
    A = mpmath.mpf(number) * V - F
    for k in range(A.rows):
        if A[k, k] <= 0:
            return False
        for i in range(k + 1, A.rows):
            factor = A[i, k] / A[k, k]
            for j in range(k + 1, A.rows):
                A[i, j] -= factor * A[k, j]
    return True


@pytest.mark.parametrize("batch", range(MODELS // BATCH))
def test_bounds_enclose_the_exact_R0(batch: int) -> None:
    """Second route: F and V put together in the test from the decimals, eliminated by mpmath in 60 digits."""
    enclosed = none = 0
    for seed in range(batch * BATCH, (batch + 1) * BATCH):
        model = draw(seed)
        solution = ngm.solve(ngm.loads(model.scenario_text), limit=0)
        if solution.R0 is None:
            # A source that outgrows the losses: the inverse of V has a negative entry, or V has no inverse.
            _, V = model.truth()
            with mpmath.workdps(DIGITS):
                inverse = mpmath.inverse(V)
                assert min(inverse) < 0, (seed, solution.no_R0)
            none += 1
            continue
        assert solution.R0_bounds is not None
        low, high = solution.R0_bounds
        F, V = model.truth()
        with mpmath.workdps(DIGITS):
            # a bound may be the spectral radius itself: so it is looked at from a hair's breadth outside
            hair = mpmath.mpf(10) ** -40
            assert exceeds(max(high * (1 + hair), hair), F, V), (seed, high)
            assert low == 0 or not exceeds(low * (1 - hair), F, V), (seed, low)
            assert high - low <= 5e-16 * high, (seed, low, high)
            above, below = not exceeds(1 + hair, F, V), exceeds(1 - hair, F, V)
        assert low <= solution.R0 <= high
        if above or below:
            assert above == (solution.growth_rate > 0), seed
        enclosed += 1
    assert enclosed > BATCH * 0.8
    assert enclosed + none == BATCH


def test_pivots_and_eigenvalues_agree() -> None:
    """Guards the way of looking, on models of which the eigenvalue is computed as well."""
    looked = 0
    for seed in range(60):
        model = draw(seed)
        F, V = model.truth()
        with mpmath.workdps(DIGITS):
            if min(mpmath.inverse(V)) < 0:
                continue
            R0, hair = model.R0(), mpmath.mpf(10) ** -30
            assert exceeds(R0 * (1 + hair) + hair**2, F, V), seed
            assert R0 == 0 or not exceeds(R0 * (1 - hair), F, V), seed
        looked += 1
    assert looked > 40
