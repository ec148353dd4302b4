"""Who a visitor is, from what the server knows."""

from __future__ import annotations

import pytest

from ngm.screens.signing import account, is_open, name


@pytest.mark.parametrize(
    ("visitor", "shown", "owner", "called"),
    [
        ({}, True, "", ""),
        ({"is_logged_in": False}, False, "", ""),
        ({"is_logged_in": False, "email": "a@example.org"}, False, "", ""),
        ({"is_logged_in": True, "iss": "i", "sub": "1", "email": "A@example.org"}, True, "i|1", "A@example.org"),
        ({"email": "A@Example.org"}, True, "a@example.org", "A@Example.org"),  # told by a proxy
    ],
)
def test_a_visitor(visitor, shown, owner, called):
    assert (is_open(visitor), account(visitor), name(visitor)) == (shown, owner, called)
