"""R0 and its bounds against 60-digit arithmetic on the scenario's decimals."""

from __future__ import annotations

import mpmath
import pytest

import ngm
from tests.properties.random_models import DIGITS, draw

MODELS = 2000
BATCH = 100


@pytest.mark.parametrize("batch", range(MODELS // BATCH))
def test_bounds_enclose_the_exact_R0(batch: int) -> None:
    """Second route: F and V put together in the test, inverted and solved by mpmath in 60 digits."""
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
        truth = model.R0()
        assert solution.R0_bounds is not None
        low, high = solution.R0_bounds
        with mpmath.workdps(DIGITS):
            assert mpmath.mpf(low) <= truth <= mpmath.mpf(high), (seed, low, truth, high)
            assert high - low <= 5e-16 * high, (seed, low, high)
        assert low <= solution.R0 <= high
        if abs(truth - 1) > 1e-30:
            assert (truth > 1) == (solution.growth_rate > 0), seed
        enclosed += 1
    assert enclosed > BATCH * 0.8
    assert enclosed + none == BATCH
