"""The line where a function on a grid passes a level."""

from __future__ import annotations

import numpy as np
import pytest

from ngm.engine.level import level_line


def test_a_plane_is_cut_exactly():
    # By hand: z = x + 2 y is linear along every side, so the ends lie on the line itself.
    x, y = np.linspace(0, 2, 5), np.linspace(0, 1, 4)
    pieces = level_line(x, y, x[None, :] + 2 * y[:, None], 1.3)
    assert pieces
    for piece in pieces:
        for a, b in piece:
            assert a + 2 * b == pytest.approx(1.3, rel=1e-12)
    # The pieces lead from side to side: every end but two belongs to two pieces.
    ends = [tuple(np.round(end, 9)) for piece in pieces for end in piece]
    assert sorted(ends.count(end) for end in set(ends)) == [1, 1] + [2] * (len(pieces) - 1)


def test_a_circle_is_closed():
    x = np.linspace(-1, 1, 41)
    pieces = level_line(x, x, x[None, :] ** 2 + x[:, None] ** 2, 0.51)
    for piece in pieces:
        for a, b in piece:
            assert np.hypot(a, b) == pytest.approx(np.sqrt(0.51), abs=1e-3)
    ends = [tuple(np.round(end, 9)) for piece in pieces for end in piece]
    assert {ends.count(end) for end in set(ends)} == {2}


@pytest.mark.parametrize(("mean_above", "near"), [(True, (1, 0)), (False, (0, 0))])
def test_a_saddle_is_joined_by_its_mean(mean_above, near):
    # Above at (0, 0) and (1, 1), by much or by little: the pieces cut off the other two corners, or these.
    high = 3.0 if mean_above else 0.5
    pieces = level_line([0, 1], [0, 1], [[high, -1], [-1, high]], 0)
    assert len(pieces) == 2
    reach = 1 / (1 + high) if mean_above else high / (1 + high)
    cut = [piece for piece in pieces if all(abs(a - near[0]) + abs(b - near[1]) <= reach + 1e-12 for a, b in piece)]
    assert len(cut) == 1


def test_nothing_to_draw():
    assert level_line([0, 1], [0, 1], [[0, 1], [1, 0]], 2) == ()
    assert level_line([0, 1], [0, 1], [[0, np.nan], [2, 2]], 1) == ()
    with pytest.raises(ValueError, match="shape"):
        level_line([0, 1], [0, 1], [[0, 1, 2]], 1)
