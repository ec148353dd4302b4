"""Ranks and their correlations."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

__all__ = ["centred_ranks", "mean_ranks", "rank_correlation"]

FloatArray = npt.NDArray[np.float64]


def mean_ranks(values: npt.ArrayLike) -> FloatArray:
    """Return the rank of each value, 1 for the least; values that are equal share the mean of their ranks.

    Parameters
    ----------
    values : (n,) array of float
        No nan; any unit.

    Returns
    -------
    (n,) array of float
        No unit; their sum is n (n + 1)/2 whatever the ties.

    Raises
    ------
    ValueError
        Not one row of numbers, or a nan among them.

    Examples
    --------
    >>> mean_ranks([3.0, 1.0, 3.0]).tolist()
    [2.5, 1.0, 2.5]
    """
    x = np.asarray(values, dtype=float)
    if x.ndim != 1:
        raise ValueError(f"expected one row of numbers, not an array of {x.ndim} dimensions.")
    if np.isnan(x).any():
        raise ValueError("a nan has no rank.")
    order = np.argsort(x, kind="stable")
    ordered = x[order]
    starts = np.flatnonzero(np.r_[True, ordered[1:] != ordered[:-1]]) if len(x) else np.zeros(0, dtype=int)
    sizes = np.diff(np.r_[starts, len(x)])
    ranks = np.empty(len(x))
    ranks[order] = np.repeat(starts + (sizes + 1) / 2, sizes)
    return ranks


def centred_ranks(X: npt.ArrayLike) -> FloatArray:
    """Return the mean ranks of each column less their mean (n + 1)/2: (n, d), columns contiguous.

    Raises
    ------
    ValueError
        Not a table, or a nan in it.
    """
    table = np.asarray(X, dtype=float)
    if table.ndim != 2:
        raise ValueError(f"expected a table of draws by parameters, not an array of {table.ndim} dimensions.")
    ranks = np.empty(table.shape, order="F")
    for k in range(table.shape[1]):
        ranks[:, k] = mean_ranks(table[:, k]) - (len(table) + 1) / 2
    return ranks


def rank_correlation(X: npt.ArrayLike) -> FloatArray:
    """Return Spearman's rank correlations of the columns: those of their mean ranks.

    Parameters
    ----------
    X : (n, d) array of float
        A draw a row; each column in any unit.

    Returns
    -------
    (d, d) array of float in [-1, 1]
        No unit; nan in the row and column of one that is the same in every draw.

    Raises
    ------
    ValueError
        As for `centred_ranks`.

    References
    ----------
    Spearman (1904) Am. J. Psychol. 15:72-101

    Examples
    --------
    >>> rank_correlation([[1, 10], [2, 30], [3, 20]]).tolist()
    [[1.0, 0.5], [0.5, 1.0]]
    """
    ranks = centred_ranks(X)
    products = ranks.T @ ranks
    squares = np.diag(products)
    with np.errstate(invalid="ignore", divide="ignore"):
        correlation = np.clip(products / np.sqrt(np.outer(squares, squares)), -1.0, 1.0)
    np.fill_diagonal(correlation, np.where(squares > 0, 1.0, np.nan))
    return np.asarray(correlation)
