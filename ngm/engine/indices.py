"""Variance-based indices: what share of a result's variance each parameter makes, alone and with others."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from ngm.engine.partial import PartialRank, Prcc, prcc
from ngm.engine.sampling import check_seed

__all__ = ["PartialRank", "Prcc", "SobolIndices", "prcc", "sobol_indices"]

FloatArray = npt.NDArray[np.float64]
Interval = tuple[float, float]

#: Replicates of the bootstrap, and groups of rows that are drawn at most.
_REPLICATES = 1000
_MOST_GROUPS = 4096
#: An sd below this share of the size of the values is rounding.
_ROUNDING = 1e-13


@dataclass(frozen=True, slots=True)
class SobolIndices:
    """First and total indices, one a parameter; no unit. All None where `why` says so.

    Attributes
    ----------
    first, total : tuple of (float or None)
        Estimates: sampling may carry them a little outside [0, 1], which is left to be seen. `total` is never negative.
    first_interval, total_interval : tuple of ((float, float) or None)
        Bootstrap intervals at the level asked for.
    first_error, total_error : tuple of (float or None)
        Standard errors: the bootstrap's sd.
    variance : float or None
        Of the result, from both blocks; in its unit squared.
    rows, rejected : int
        Rows of the design, and those left out since at least one of their d + 2 values does not exist.
    why : str or None
        Why there are no indices.
    """

    first: tuple[float | None, ...]
    total: tuple[float | None, ...]
    first_interval: tuple[Interval | None, ...]
    total_interval: tuple[Interval | None, ...]
    first_error: tuple[float | None, ...]
    total_error: tuple[float | None, ...]
    variance: float | None
    rows: int
    rejected: int
    why: str | None


def sobol_indices(
    fA: npt.ArrayLike, fB: npt.ArrayLike, fAB: npt.ArrayLike, *, seed: int = 0, level: float = 0.95
) -> SobolIndices:
    """Return first and total Sobol indices from the values on the blocks A, B and A_B^i.

    first_i = mean(f(B) (f(A_B^i) - f(A)))/Var, the share of the variance that parameter i makes on its own;
    total_i = mean((f(A) - f(A_B^i))^2)/(2 Var), its share with all its interactions. f less its mean over A and B: this
    changes no index and makes the first one less noisy. Var is over A and B together, with 2n.

    Intervals: the rows are drawn again with replacement, 1000 times, and the quantiles of the indices taken. More than
    4096 rows are first added up in groups of equal size, drawn at random, for the sums are all that counts. Rows of a
    Sobol sequence fill the cube more evenly than independent ones, so that the intervals are too wide rather than too
    narrow.

    Parameters
    ----------
    fA, fB : (n,) arrays of float
        Values on the blocks of `ngm.engine.sampling.saltelli`; nan or infinite where there is none.
    fAB : (d, n) array of float
        Row i: values on A with column i of B.
    seed : int >= 0
        Of the bootstrap alone.
    level : float in (0, 1)

    Returns
    -------
    SobolIndices
        The parameters must be independent: nothing else is meant by the indices.

    Raises
    ------
    ValueError
        Shapes that do not fit, a seed that is no whole number from 0 up, or a level outside (0, 1).

    References
    ----------
    First: Saltelli et al (2010) Comput. Phys. Commun. 181:259-270. Total: Jansen (1999) Comput. Phys. Commun. 117:35-43.
    Intervals: Archer, Saltelli & Sobol (1997) J. Stat. Comput. Simul. 58:99-120 (from memory)

    Examples
    --------
    x1 + 2 x2 has variance 5/12 (x1 alone: 1/12) and no interactions.

    >>> from ngm.engine.sampling import saltelli_values
    >>> found = sobol_indices(*saltelli_values(lambda u: u[:, 0] + 2 * u[:, 1], 4096, 2, seed=1))
    >>> [round(share, 2) for share in found.first], [round(share, 2) for share in found.total]
    ([0.2, 0.8], [0.2, 0.8])
    """
    A, B, AB = (np.asarray(values, dtype=float) for values in (fA, fB, fAB))
    if A.ndim != 1 or A.shape != B.shape or AB.ndim != 2 or AB.shape[1] != len(A):
        raise ValueError(
            f"values of shapes {A.shape}, {B.shape} and {AB.shape} do not fit together: (n,), (n,) and (parameters, n)."
        )
    check_seed(seed)
    if not 0 < level < 1:
        raise ValueError(f"level {level:g} lies outside (0, 1).")
    kept = np.isfinite(A) & np.isfinite(B) & np.isfinite(AB).all(axis=0)
    n, rejected = int(kept.sum()), int(len(kept) - kept.sum())
    if rejected:
        A, B, AB = A[kept], B[kept], AB[:, kept]
    if n < 2:
        return _no_indices(len(AB), len(kept), rejected, "fewer than two rows of the design have all their values.")
    # Values of any size: the indices have no unit, and squares of 1e200 are no doubles.
    size = max(float(np.abs(A).max()), float(np.abs(B).max()))
    if size == 0:
        return _no_indices(len(AB), len(kept), rejected, _CONSTANT)
    A, B, AB = A / size, B / size, AB / size
    middle = (A.mean() + B.mean()) / 2
    A, B, AB = A - middle, B - middle, AB - middle
    variance = float((A @ A + B @ B) / (2 * n))
    if variance <= _ROUNDING**2:
        return _no_indices(len(AB), len(kept), rejected, _CONSTANT)
    terms = np.column_stack([A + B, A * A + B * B, (B * (AB - A)).T, ((A - AB) ** 2).T])
    first, total = _shares(terms.sum(axis=0)[None, :], n)
    low, high, error = _bootstrap(terms, seed, level)
    d = len(AB)
    intervals = list(zip(low.tolist(), high.tolist(), strict=True))
    return SobolIndices(
        first=tuple(first[0].tolist()),
        total=tuple(total[0].tolist()),
        first_interval=tuple(intervals[:d]),
        total_interval=tuple(intervals[d:]),
        first_error=tuple(error[:d].tolist()),
        total_error=tuple(error[d:].tolist()),
        variance=variance * size * size,
        rows=len(kept),
        rejected=rejected,
        why=None,
    )


_CONSTANT = "the result is the same in every draw, so that there is no variance to share out."


def _no_indices(d: int, rows: int, rejected: int, why: str) -> SobolIndices:
    none = (None,) * d
    return SobolIndices(none, none, none, none, none, none, None, rows, rejected, why)


def _shares(sums: FloatArray, n: int) -> tuple[FloatArray, FloatArray]:
    """Return first and total indices, (r, d) each, from r rows of sums of the terms over n rows of the design."""
    d = (sums.shape[1] - 2) // 2
    variance = sums[:, 1] / (2 * n) - (sums[:, 0] / (2 * n)) ** 2
    # A resample of a few rows may hold one value only: then its indices are undefined, and left out by the caller.
    with np.errstate(divide="ignore", invalid="ignore"):
        first = sums[:, 2 : 2 + d] / n / variance[:, None]
        total = sums[:, 2 + d :] / (2 * n) / variance[:, None]
    return first, total


def _bootstrap(terms: FloatArray, seed: int, level: float) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Return lower and upper ends and sd of first and then total indices, (2d,) each."""
    rng = np.random.default_rng(seed)
    n = len(terms)
    each = -(-n // _MOST_GROUPS)
    groups = n // each
    # What equal groups leave over, fewer rows than a group has, sits out of the intervals (never of the indices).
    rows = rng.permutation(n)[: groups * each]
    sums = terms[rows].reshape(groups, each, -1).sum(axis=1)
    drawn = np.empty((_REPLICATES, sums.shape[1]))
    for k in range(_REPLICATES):
        weights = np.bincount(rng.integers(0, groups, groups), minlength=groups)
        drawn[k] = weights @ sums
    both = np.concatenate(_shares(drawn, groups * each), axis=1)
    both = both[np.isfinite(both).all(axis=1)]
    ends = np.quantile(both, [(1 - level) / 2, (1 + level) / 2], axis=0)
    return ends[0], ends[1], np.asarray(both.std(axis=0, ddof=1))
