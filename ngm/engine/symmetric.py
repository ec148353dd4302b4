"""Non-negative matrices that are symmetric but for a scaling: contacts that balance, seen from either side."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

__all__ = ["symmetric_form"]

FloatArray = npt.NDArray[np.float64]


def symmetric_form(block: FloatArray) -> FloatArray | None:
    """Return the symmetric matrix that an irreducible block is similar to by a diagonal matrix; None where there is none.

    With h such that B_ij / h_i = B_ji / h_j: A_ij = B_ij sqrt(h_j / h_i).

    Examples
    --------
    >>> symmetric_form(np.array([[1.0, 4.0], [9.0, 2.0]])).round(12).tolist()
    [[1.0, 6.0], [6.0, 2.0]]
    """
    size = len(block)
    there = block > 0
    if not np.array_equal(there, there.T):
        return None
    h = np.zeros(size)
    h[0] = 1.0
    waiting = [0]
    while waiting:
        i = waiting.pop()
        for j in np.nonzero(there[i] & (h == 0))[0]:
            h[j] = h[i] * block[j, i] / block[i, j]
            waiting.append(int(j))
    if not np.all(np.isfinite(h) & (h > 0)):
        return None
    A = block * np.sqrt(h[None, :] / h[:, None])
    if np.abs(A - A.T).max() > 1e-10 * np.abs(A).max():
        return None
    return np.asarray((A + A.T) / 2)
