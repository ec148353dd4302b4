"""On which side of 1 the root of a non-negative irreducible matrix lies, as cheaply as it can be told."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

__all__ = ["ABOVE_ONE", "exceeds_one"]

#: A root above 1 by more than rounding.
ABOVE_ONE = 1 + 1e-12
STEPS = 40


def exceeds_one(block: npt.NDArray[np.float64]) -> bool:
    """Return whether the root of a non-negative irreducible matrix is above 1.

    The quotients (Mx)_i/x_i of any positive x enclose the root (Collatz-Wielandt): a few steps of M + I, which settles
    where M itself oscillates, are enough but close to 1; there the eigenvalues decide.

    Examples
    --------
    >>> exceeds_one(np.array([[0.0, 4.0], [0.3, 0.0]])), exceeds_one(np.array([[0.0, 3.0], [0.3, 0.0]]))
    (True, False)
    """
    x = np.ones(len(block))
    for _ in range(STEPS):
        product = block @ x
        with np.errstate(divide="ignore", invalid="ignore"):
            quotients = product / x
        if np.min(quotients) > ABOVE_ONE:
            return True
        if np.max(quotients) < 1 - 1e-9:
            return False
        x = product + x
        x /= x.max()
        if not np.all(x > 0):
            break
    return bool(np.max(np.abs(np.linalg.eigvals(block))) > ABOVE_ONE)
