"""Partial rank correlation: which parameters move a result, and whether a single number may say so.

A rank correlation sees effects that only rise or only fall. Whether that is so is checked beside it, on the partial
residuals: the ranks of the result less what the other parameters explain of them linearly.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from ngm.engine.ranks import centred_ranks, mean_ranks

__all__ = ["PartialRank", "Prcc", "prcc"]

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.intp]

#: A share of a column's variance below this, left over by the others, is rounding.
_NOTHING = 1e-10
#: Draws that the check of monotone response looks at, evenly spaced; bins of a parameter; draws a bin at least.
_MOST_CHECKED = 20_000
_MOST_BINS = 12
_BIN = 20
#: Chance of a false alarm for one parameter, all its checks together.
_FALSE_ALARM = 1e-3
#: What turns is told where it is this share of the partial residuals' variance, and of what the parameter explains.
_OF_ALL = 0.01
_OF_EXPLAINED = 0.1


@dataclass(frozen=True, slots=True)
class PartialRank:
    """The partial rank correlation of one parameter with the result.

    Attributes
    ----------
    value : float or None
        In [-1, 1], no unit.
    why : str or None
        Why there is none.
    monotone : bool or None
        False where the result both rises and falls with the parameter, on average or by the value of another one
        (`turns_with`), and enough to count: then `value` misleads, and a variance-based index is the one to read. None
        where there are too few draws to tell, or no value.
    turning_share : float or None
        The share of the partial residuals' variance that the parameter explains and no curve of one direction does, on
        average or split, whichever is clearly larger; 0 where it cannot be told from chance. `value` squared compares with it.
    turns_with : int or None
        Column, from 0, of the parameter by whose lower and upper half the response was split when it showed; None where
        it shows without a split, or not at all.
    """

    value: float | None
    why: str | None
    monotone: bool | None
    turning_share: float | None
    turns_with: int | None


@dataclass(frozen=True, slots=True)
class Prcc:
    """Partial rank correlations, one a column; `rejected` of `draws` have no result and are left out."""

    coefficients: tuple[PartialRank, ...]
    draws: int
    rejected: int


def prcc(X: npt.ArrayLike, y: npt.ArrayLike) -> Prcc:
    """Return the partial rank correlation coefficient of each parameter with a result.

    All columns are ranked (mean ranks for ties). With C the inverse of the correlation matrix of these ranks, the
    coefficient of column i is -C_iy / sqrt(C_ii C_yy): the correlation of what the other columns leave over of the ranks
    of x_i and of y. It is worked out as the latter, so that columns which determine each other spoil their own
    coefficients only.

    The check: partial residuals of parameter i (ranks of y, less what the other ranks explain in the joint linear fit)
    are averaged in bins of x_i. What remains of these averages beside the best curve that only rises, or only falls,
    is compared with chance (chi-squared, all checks of one parameter together 0.001, no less for any monotone truth);
    then again with the draws split at the median of each other parameter, both halves to go the same way. What is found
    must also be 1 % of the residuals' variance and a tenth of what the parameter explains. Beyond 20,000 draws the check
    uses evenly spaced ones. With correlated parameters a bent effect of one may show in another.

    Parameters
    ----------
    X : (n, d) array of float
        A draw a row, a parameter a column, each in any unit.
    y : (n,) array of float
        The result; nan or infinite where there is none.

    Returns
    -------
    Prcc
        A value is None for a column that is the same in all draws or follows from the others, where the result is the
        same in all draws or follows from the others, and where the draws are fewer than parameters plus two.

    Raises
    ------
    ValueError
        Shapes that do not fit, or an X that is not finite.

    References
    ----------
    Marino, Hogue, Ray & Kirschner (2008) J. Theor. Biol. 254:178-196. Partial residuals: Larsen & McCleary (1972)
    Technometrics 14:781-790; the best monotone curve: Barlow, Bartholomew, Bremner & Brunk (1972) Statistical Inference
    under Order Restrictions (both from memory). The check as put together here is our own.

    Examples
    --------
    >>> x1, x2 = [1, 2, 3, 4, 5, 6, 7, 8], [3, 8, 1, 6, 2, 7, 5, 4]
    >>> found = prcc(np.transpose([x1, x2]), [2, 5, 4, 9, 8, 20, 25, 40])
    >>> [round(c.value, 9) for c in found.coefficients]
    [0.987420883, 0.87233916]
    """
    table, result = np.asarray(X, dtype=float), np.asarray(y, dtype=float)
    if table.ndim != 2 or result.shape != (len(table),):
        raise ValueError(f"draws of shape {table.shape} and results of shape {result.shape} do not fit together.")
    if not np.all(np.isfinite(table)):
        row, column = np.argwhere(~np.isfinite(table))[0].tolist()
        raise ValueError(f"draw {row + 1}, column {column + 1} is not finite.")
    kept = np.isfinite(result)
    rejected = int(len(result) - kept.sum())
    if rejected:
        table, result = table[kept], result[kept]
    return Prcc(_coefficients(table, result), len(kept), rejected)


def _coefficients(X: FloatArray, y: FloatArray) -> tuple[PartialRank, ...]:
    n, d = X.shape
    ranks = centred_ranks(np.column_stack([X, y]))
    norms = np.sqrt((ranks * ranks).sum(axis=0))
    moving = [k for k in range(d) if norms[k] > 0]
    general = None
    if n == 0 or not norms[d] > 0:
        general = "no draw has a result." if n == 0 else "the result is the same in every draw."
    elif n < len(moving) + 2:
        general = f"{n} draws are too few for {len(moving)} parameters: at least {len(moving) + 2}."
    if general is not None:
        return tuple(_none(general) for _ in range(d))
    ranks = ranks[:, [*moving, d]] / norms[[*moving, d]]
    R = ranks.T @ ranks
    checks = _Monotone(ranks, R)
    found = {}
    for place, k in enumerate(moving):
        value, why = _partial(R, place)
        found[k] = _none(why) if value is None else PartialRank(value, None, *checks.of(place))
    constant = "the parameter is the same in every draw."
    return tuple(found[k] if k in found else _none(constant) for k in range(d))


def _none(why: str | None) -> PartialRank:
    return PartialRank(None, why, None, None, None)


def _partial(R: FloatArray, i: int) -> tuple[float | None, str | None]:
    """Return the correlation of column i with the last one, given the others, from the correlations of all; or why not."""
    last = len(R) - 1
    others = [k for k in range(last) if k != i]
    pair = [i, last]
    left = R[np.ix_(pair, pair)]
    if others:
        across = R[np.ix_(others, pair)]
        left = left - across.T @ np.linalg.pinv(R[np.ix_(others, others)], rcond=_NOTHING, hermitian=True) @ across
    if left[0, 0] < _NOTHING:
        return None, "the other parameters determine the ranks of this one in these draws."
    if left[1, 1] < _NOTHING:
        return None, "the other parameters determine the ranks of the result, and leave nothing to explain."
    return float(np.clip(left[0, 1] / np.sqrt(left[0, 0] * left[1, 1]), -1.0, 1.0)), None


class _Monotone:
    """Whether the result goes one way with each parameter: see `prcc`."""

    def __init__(self, ranks: FloatArray, R: FloatArray) -> None:
        every = -(-len(ranks) // _MOST_CHECKED)
        self.d = len(R) - 1
        self.slopes = np.linalg.pinv(R[:-1, :-1], rcond=_NOTHING, hermitian=True) @ R[:-1, -1]
        self.X = np.asfortranarray(ranks[::every, :-1])
        self.residual = ranks[::every, -1] - self.X @ self.slopes
        n = len(self.X)
        self.bins = min(_MOST_BINS, n // (2 * _BIN))
        if self.bins >= 3:
            own = [mean_ranks(column) - 0.5 for column in self.X.T]
            self.bin = [np.minimum((r * self.bins / n).astype(np.intp), self.bins - 1) for r in own]
            self.half = [(r >= n / 2).astype(np.intp) for r in own]

    def of(self, i: int) -> tuple[bool | None, float | None, int | None]:
        """Return `monotone`, `turning_share` and `turns_with` of parameter i."""
        if self.bins < 3:
            return None, None, None
        partial = self.residual + self.slopes[i] * self.X[:, i]
        total = float(((partial - partial.mean()) ** 2).sum())
        turning, split, told = 0.0, None, False
        for j in [None, *(k for k in range(self.d) if k != i)]:
            cell = self.bin[i] if j is None else self.half[j] * self.bins + self.bin[i]
            beside, explained, chance = _beside(partial, cell, self.bins, _FALSE_ALARM / self.d)
            if beside <= chance:
                continue
            told = told or (beside > _OF_ALL * total and beside > _OF_EXPLAINED * explained)
            # A split always explains a little more than the whole: it is named where it shows clearly more.
            if turning == 0 or beside > 1.5 * turning:
                turning, split = beside, j
        return not told, turning / total if total > 0 else 0.0, split


def _beside(partial: FloatArray, cell: IntArray, bins: int, alarm: float) -> tuple[float, float, float]:
    """Return sums of squares: between bins beside the best curve of one direction, between bins, and what chance makes.

    The squared distance of the averages from all curves of one direction is at most that from the true averages, which
    for a monotone truth is chi-squared with one degree a cell, in units of the variance inside cells.
    """
    from scipy import special

    counts = np.bincount(cell, minlength=bins)
    sums = np.bincount(cell, partial, minlength=len(counts))
    filled = counts > 0
    means = np.divide(sums, counts, out=np.zeros(len(counts)), where=filled)
    inside = float(((partial - means[cell]) ** 2).sum())
    cells = int(filled.sum())
    if len(partial) <= cells:
        return 0.0, 0.0, 0.0
    rising = falling = explained = 0.0
    for start in range(0, len(counts), bins):
        part = np.flatnonzero(filled[start : start + bins]) + start
        weight, level = counts[part].astype(float), means[part]
        if len(part):
            explained += float(weight @ (level - weight @ level / weight.sum()) ** 2)
            rising += _distance(level, weight)
            falling += _distance(-level, weight)
    chance = float(special.chdtri(cells, alarm)) * inside / (len(partial) - cells)
    return min(rising, falling), explained, chance


def _distance(level: FloatArray, weight: FloatArray) -> float:
    """Return the weighted sum of squares of levels about the best curve that never falls: adjacent violators pooled."""
    pools: list[tuple[float, float, int]] = []
    for value, size in zip(level.tolist(), weight.tolist(), strict=True):
        mean, total, length = value, size, 1
        while pools and pools[-1][0] > mean:
            above, more, longer = pools.pop()
            mean = (above * more + mean * total) / (more + total)
            total, length = total + more, length + longer
        pools.append((mean, total, length))
    curve = np.concatenate([np.full(length, mean) for mean, _, length in pools])
    return float(weight @ (level - curve) ** 2)
