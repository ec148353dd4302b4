"""Contacts of random groups, and the small example whose numbers are known."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from hypothesis import strategies as st

Contacts = npt.NDArray[np.float64]

#: Two groups, not reciprocal: 300 members count 1200 contacts with the 700, who count 1400.
C = np.array([[8.0, 4.0], [2.0, 6.0]])
N = np.array([300.0, 700.0])

ENTRY = st.one_of(st.just(0.0), st.floats(1e-3, 1e3))
SIZE = st.floats(1.0, 1e6)


@st.composite
def contacts_and_sizes(draw: st.DrawFn, least: int = 1, most: int = 5, positive: bool = False):
    """Contacts and sizes of `least` to `most` groups; zeros among the contacts unless `positive`."""
    size = draw(st.integers(least, most))
    entry = st.floats(1e-3, 1e3) if positive else ENTRY
    rows = draw(st.lists(st.lists(entry, min_size=size, max_size=size), min_size=size, max_size=size))
    members = draw(st.lists(SIZE, min_size=size, max_size=size))
    return np.array(rows), np.array(members)
