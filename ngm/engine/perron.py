"""R0 and its vectors for a matrix of doubles of any size: the functions one would call at a prompt."""

from __future__ import annotations

import numpy as np

from ngm.engine.balls import FloatArray, outward
from ngm.engine.spectrum import spectrum

__all__ = ["bounds", "reproduction_number", "reproductive_value", "stable_distribution"]


def reproduction_number(K: FloatArray) -> float:
    """Return R0, the spectral radius of a next-generation matrix.

    Parameters
    ----------
    K : (m, m) array of float, >= 0
        Next-generation matrix, no unit; K[i, j]: infections of i by one of j.

    Returns
    -------
    float
        No unit; expected infections caused by one typical infection, a generation later.

    Raises
    ------
    ValueError
        K is not square, not finite, or has a negative entry.

    References
    ----------
    Diekmann, Heesterbeek & Roberts (2010) J. R. Soc. Interface 7:873-885

    Examples
    --------
    >>> round(reproduction_number(np.array([[0.8, 1.5], [0.6, 0.5]])), 9)
    1.610468636
    """
    root = spectrum(np.asarray(K, dtype=float), vectors=False).root
    return float(root.mid())


def bounds(K: FloatArray) -> tuple[float, float]:
    """Return (low, high) that enclose the spectral radius of the matrix as it stands in doubles.

    Collatz-Wielandt quotients class by class, with the rounding of the matrix-vector product allowed for and the result
    rounded outward. [0, 0] where it is 0. What was rounded before K came into being is not covered.

    Examples
    --------
    >>> low, high = bounds(np.array([[0.0, 4.0], [9.0, 0.0]]))
    >>> low <= 6 <= high and high - low < 1e-12
    True
    """
    low, high = outward(spectrum(np.asarray(K, dtype=float), vectors=False).root)
    return max(low, 0.0), high


def stable_distribution(K: FloatArray) -> FloatArray | None:
    """Return the right Perron vector, the share of each type among new infections; it sums to 1.

    Returns
    -------
    (m,) array of float, or None
        None where several classes attain R0 (the vector is not unique) or R0 = 0.

    Examples
    --------
    >>> stable_distribution(np.array([[0.9, 0.0], [0.5, 1.4]])).tolist()
    [0.0, 1.0]
    """
    right = spectrum(np.asarray(K, dtype=float)).right
    return None if right is None else right.astype(float)


def reproductive_value(K: FloatArray) -> FloatArray | None:
    """Return the left Perron vector: what one case of each type is worth to the later epidemic; left.right = 1.

    Returns
    -------
    (m,) array of float, or None
        None where several classes attain R0 (the vector is not unique) or R0 = 0.

    Examples
    --------
    >>> reproductive_value(np.array([[0.9, 0.0], [0.5, 1.4]])).round(12).tolist()
    [1.0, 1.0]
    """
    left = spectrum(np.asarray(K, dtype=float)).left
    return None if left is None else left.astype(float)
