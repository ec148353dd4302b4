"""What draws say: figures by hand, what has no value counted apart, and running figures."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from ngm.engine.summary import LEVELS, convergence, summary


# By hand: 1..5, mean 3, variance 10/4; four of five above 1; quantile q of five values lies at place 4q.
def test_by_hand():
    found = summary([5.0, 1, 4, 2, 3])
    assert (found.draws, found.rejected, found.mean, found.sd) == (5, 0, 3, pytest.approx(math.sqrt(2.5)))
    assert found.quantiles == pytest.approx({"0.025": 1.1, "0.25": 2, "0.5": 3, "0.75": 4, "0.975": 4.9})
    assert found.probability_above == 0.8
    assert found.mean_error == pytest.approx(math.sqrt(0.5))
    assert found.probability_error == pytest.approx(math.sqrt(0.8 * 0.2 / 5))


# By hand: strictly above, as a reproduction number of 1 is no growth.
def test_threshold():
    assert summary([1.0, 1.0, 2.0, 0.5]).probability_above == 0.25
    assert summary([-0.1, 0.0, 0.1], threshold=0).probability_above == pytest.approx(1 / 3)


def test_no_value_is_counted_and_not_used():
    found = summary([math.nan, 2.0, math.inf, 4.0, -math.inf])
    assert (found.draws, found.rejected, found.mean, found.probability_above) == (5, 3, 3, 1)


def test_too_few_values():
    empty, none, one = summary([]), summary([math.nan] * 3), summary([math.nan, 7.0])
    assert (empty.draws, empty.rejected, empty.mean, empty.quantiles, empty.probability_above) == (
        0,
        0,
        None,
        None,
        None,
    )
    assert (none.draws, none.rejected, none.mean, none.probability_interval) == (3, 3, None, None)
    assert (one.mean, one.sd, one.mean_error, one.probability_above) == (7, None, None, 1)
    assert one.quantiles == dict.fromkeys(LEVELS, 7.0)


def test_equal_values_have_no_spread():
    found = summary(np.full(1001, 0.1))
    assert (found.mean, found.sd, found.mean_error) == (0.1, 0, 0)


# By hand: Wilson's interval for 0 of 10 ends at z^2/(10 + z^2), z^2 = 3.841458821; for 10 of 10 it is mirrored.
def test_interval_of_a_share_keeps_a_width():
    z2 = 3.841458820694124
    low, high = summary(np.zeros(10)).probability_interval
    assert (low, high) == (0, pytest.approx(z2 / (10 + z2)))
    assert summary(np.full(10, 2.0)).probability_interval == (pytest.approx(10 / (10 + z2)), 1)


# Second route: scipy's Wilson interval.
@given(values=st.lists(st.floats(0, 2), min_size=1, max_size=40))
def test_interval_second_route(values):
    found = summary(values)
    above = sum(value > 1 for value in values)
    other = stats.binomtest(above, len(values)).proportion_ci(0.95, method="wilson")
    assert found.probability_interval == pytest.approx((other.low, other.high), abs=1e-12)
    assert min(values) <= found.mean <= max(values)
    assert list(found.quantiles.values()) == sorted(found.quantiles.values())


# Theory: 95 % of intervals mean +- 1.96 errors hold the mean of the distribution (2000 draws, 400 seeds: sd 1.1 %).
def test_errors_are_of_the_right_size():
    rng = np.random.default_rng(3)
    parts = [summary(rng.gamma(4, 0.5, 2000)) for _ in range(400)]
    held = np.mean([abs(part.mean - 2) < 1.96 * part.mean_error for part in parts])
    assert 0.915 < held < 0.985
    truth = stats.gamma(4, scale=0.5).sf(1)
    held = np.mean([part.probability_interval[0] < truth < part.probability_interval[1] for part in parts])
    assert 0.915 < held < 0.985


def test_convergence():
    values = np.random.default_rng(1).gamma(4, 0.5, 1000)
    values[5] = math.nan
    parts = convergence(values)
    assert [part.draws for part in parts] == [16, 32, 64, 128, 256, 512, 1000]
    assert [part.rejected for part in parts] == [1] * 7
    assert parts[2] == summary(values[:64])
    assert parts[-1] == summary(values)
    assert [part.draws for part in convergence(np.ones(16))] == [16]
    assert [part.draws for part in convergence(np.ones(3))] == [3]
    assert convergence([-1.0, 1.0], threshold=0)[0].probability_above == 0.5


@pytest.mark.parametrize("call", [summary, convergence])
def test_refused(call):
    with pytest.raises(ValueError, match="one row of values"):
        call([[1.0]])
    with pytest.raises(ValueError, match="threshold = nan is not finite"):
        call([1.0], threshold=math.nan)
