"""Vaccination on K: types of their own, and the factor that gives the same number."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ngm.engine.perron import reproduction_number
from ngm.engine.vaccination import (
    critical_coverage,
    lasting_share,
    overall_efficacy,
    scaled_number,
    susceptibles,
    with_vaccinated_types,
)

shares = st.floats(0, 1)
R0 = 0.6 / 0.21


@settings(max_examples=80, deadline=None)
@given(seed=st.integers(0, 10_000), x=shares, a=shares, b=shares, kind=st.sampled_from(["leaky", "all-or-nothing"]))
def test_types_of_their_own_give_the_number_of_the_factor(seed, x, a, b, kind):
    K = np.random.default_rng(seed).exponential(1, (3, 3))
    large = with_vaccinated_types(K, x, a, b, kind)
    factor = 1 - x * overall_efficacy(a, b)
    assert reproduction_number(large) == pytest.approx(float(factor) * reproduction_number(K), rel=1e-9, abs=1e-12)


@settings(max_examples=40, deadline=None)
@given(seed=st.integers(0, 10_000))
def test_groups_that_differ(seed):
    rng = np.random.default_rng(seed)
    K = rng.exponential(1, (3, 3))
    x, a, b = rng.uniform(0, 1, (3, 3))
    expected = reproduction_number(with_vaccinated_types(K, x, a, b))
    assert scaled_number(K, 1 - x * overall_efficacy(a, b)) == pytest.approx(expected, rel=1e-9)


# Published: Smith, Rodrigues & Fine (1984) Int. J. Epidemiol. 13:87-93, from memory: (1 - 1/R0)/eps, and with breakthrough
# cases that infect less (1 - 1/R0)/(1 - (1 - eps)(1 - ei)); with waning over eps mu/(mu + omega). Recomputed numbers.
@pytest.mark.parametrize(
    ("efficacy", "lasting", "coverage"),
    [(0.8, 1, 0.8125), (0.9, 1, 0.7222222222), (0.8, 0.01 / 0.06, 4.875)],
)
def test_critical_coverage(efficacy, lasting, coverage):
    assert critical_coverage(R0, efficacy, lasting) == pytest.approx(coverage, rel=1e-9)
    assert R0 * (1 - efficacy * lasting * coverage) == pytest.approx(1, rel=1e-9)


def test_critical_coverage_where_there_is_none():
    assert critical_coverage(None, 0.8) is None
    assert critical_coverage(0.7, 0.8) == 0
    assert critical_coverage(2.0, 0.0) is None
    assert overall_efficacy(0.8, 0.5) == pytest.approx(0.9)
    assert lasting_share(0.01, 0.05) == pytest.approx(1 / 6)


def test_equal_thresholds_unequal_final_sizes():
    # Published check values, births ignored: 0.1668010326 all-or-nothing, 0.2334295927 leaky (R0 = 2.857142857, coverage
    # 0.7, efficacy 0.8). By the final-size equations, here by iteration: a group with susceptibility s loses
    # 1 - exp(-s R0 z) of its susceptibles, z the infected of all.
    sizes = {}
    for kind in ("leaky", "all-or-nothing"):
        unvaccinated, vaccinated, susceptibility = (float(v) for v in susceptibles(0.7, 0.8, kind))
        z = 0.5
        for _ in range(2000):
            z = unvaccinated * (1 - math.exp(-R0 * z)) + vaccinated * (1 - math.exp(-susceptibility * R0 * z))
        sizes[kind] = z
        assert R0 * (unvaccinated + vaccinated * susceptibility) == pytest.approx(1.257142857, rel=1e-9)
    assert sizes["all-or-nothing"] == pytest.approx(0.1668010326, rel=1e-9)
    assert sizes["leaky"] == pytest.approx(0.2334295927, rel=1e-9)


def test_wrong_input_is_refused():
    with pytest.raises(ValueError):
        overall_efficacy(1.2)
    with pytest.raises(ValueError):
        susceptibles(0.5, 0.5, "live")
