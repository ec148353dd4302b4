"""Where a response falls to a target, monotone or not."""

from __future__ import annotations

import math

import pytest

from ngm.engine.roots import last_fall, respond, root_between

GRID = [k / 10 for k in range(11)]


def found(function, target=1.0):
    response = respond(function, GRID)
    return last_fall(function, response, target), response


def test_a_fall_by_hand():
    x, response = found(lambda s: 3 * (1 - s))
    assert x == pytest.approx(2 / 3, abs=1e-15)
    assert response.monotone
    assert response.lowest == (1.0, 0.0)


def test_the_last_of_several_falls():
    x, response = found(lambda s: 1 + math.cos(5 * math.pi * s) / 2)  # 1 at 0.1, 0.3, 0.5, 0.7, 0.9; ends at 0.5
    assert x == pytest.approx(0.9, abs=1e-12)
    assert not response.monotone


@pytest.mark.parametrize(("function", "x"), [(lambda s: 0.5, 0.0), (lambda s: 2.0, None), (lambda s: 1 + s, None)])
def test_never_and_always(function, x):
    assert found(function)[0] == x


def test_values_that_do_not_exist():
    gap = lambda s: None if 0.35 < s < 0.65 else 2 - 1.9 * s  # noqa: E731
    x, response = found(gap)
    assert x == pytest.approx(0.65, abs=1e-12)  # below 1 from 0.526 on, where there is no value
    assert not response.monotone
    assert found(lambda s: None if s == 1 else 0.1)[0] is None
    assert respond(lambda s: None, GRID).lowest is None


def test_a_target_met_exactly_at_a_sample():
    assert found(lambda s: 1.5 - s)[0] == 0.5


def test_brackets():
    assert root_between(lambda x: x * x, 0.0, 2.0, 2.0) == pytest.approx(math.sqrt(2), abs=1e-14)
    assert root_between(lambda x: x, 1.0, 3.0, 1.0) == 1.0
    with pytest.raises(ValueError, match="between the values"):
        root_between(lambda x: x, 0.0, 1.0, 2.0)
