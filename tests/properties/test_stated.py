"""What holds for every projected population and every K as given, on random ones.

Entries are short decimals, so that what is bounded is exact: the root of F + T, and R0, are worked out again with 60
digits from the same decimals.
"""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
from hypothesis import given as drawn
from hypothesis import settings
from hypothesis import strategies as st

import ngm
from tests.stated import given, population

SHARES = st.sampled_from([0, 0, 0, 0.1, 0.25, 0.3])
BIRTHS = st.sampled_from([0, 0, 0, 0.3, 1.7, 4])


def square(entries, sizes=(1, 4)):
    return st.integers(*sizes).flatmap(
        lambda n: st.lists(st.lists(entries, min_size=n, max_size=n), min_size=n, max_size=n)
    )


@st.composite
def populations(draw):
    births = draw(square(BIRTHS))
    n = len(births)
    transitions = draw(st.lists(st.lists(SHARES, min_size=n, max_size=n), min_size=n, max_size=n))
    # At most 0.9 of each column is found again, in decimals.
    scale = [1 if sum(row[j] for row in transitions) <= 0.9 else 0 for j in range(n)]
    return births, [[row[j] * scale[j] for j in range(n)] for row in transitions]


def largest(matrix) -> mpmath.mpf:
    values, _ = mpmath.eig(matrix)
    return max((abs(v) for v in values), default=mpmath.mpf(0))


def exact(rows):
    return mpmath.matrix([[mpmath.mpf(str(entry)) for entry in row] for row in rows])


@settings(max_examples=60)
@drawn(populations())
def test_populations(model):
    births, transitions = model
    solution = ngm.solve(ngm.loads(population(births, transitions)), limit=0)
    n = len(births)
    with mpmath.workdps(60):
        F, T = exact(births), exact(transitions)
        factor, R0 = largest(F + T), largest(F * mpmath.inverse(mpmath.eye(n) - T))
        low, high = solution.R0_bounds
        # A defective eigenvalue is found to a part of the 60 digits only.
        assert mpmath.mpf(low) - mpmath.mpf("1e-14") <= R0 <= mpmath.mpf(high) + mpmath.mpf("1e-14")
        assert solution.growth_factor == pytest.approx(float(factor), rel=1e-12, abs=1e-12)
    if abs(solution.R0 - 1) > 1e-9:
        # R0 and the growth factor lie on the same side of 1; without births there is T alone, which dies out.
        assert (solution.R0 > 1) == (solution.growth_factor > 1)
    about = solution.projected
    if about.stable_structure is not None:
        A, w, v = (
            np.array(births) + np.array(transitions),
            np.array(about.stable_structure),
            np.array(about.reproductive_values),
        )
        assert w.sum() == pytest.approx(1, rel=1e-12)
        assert v[np.flatnonzero(v)[0]] == 1
        assert A @ w == pytest.approx(solution.growth_factor * w, rel=1e-9, abs=1e-12)
        assert v @ A == pytest.approx(solution.growth_factor * v, rel=1e-9, abs=1e-12)
        total = np.sum(about.elasticity_births) + np.sum(about.elasticity_transitions)
        assert total == pytest.approx(1, rel=1e-9)


@settings(max_examples=60)
@drawn(square(st.sampled_from([0, 0, 0.1, 0.75, 2, 3.3])))
def test_matrices_as_given(K):
    scenario = ngm.loads(given(K))
    solution = ngm.solve(scenario, limit=0)
    with mpmath.workdps(60):
        low, high = solution.R0_bounds
        R0 = largest(exact(K))
        assert mpmath.mpf(low) - mpmath.mpf("1e-12") <= R0 <= mpmath.mpf(high) + mpmath.mpf("1e-12")
    assert solution.K == tuple(tuple(map(float, row)) for row in K)
    # A target divided by its T brings the number to 1.
    for number in ngm.control(scenario).type_reproduction:
        if number.T is not None and number.T > 1:
            at = [solution.types.index(name) for name in number.types]
            scaled = np.array(K, dtype=float)
            scaled[at] /= number.T
            assert max(abs(np.linalg.eigvals(scaled))) == pytest.approx(1, rel=1e-6)
