"""What a set of draws says: mean, spread, quantiles, the chance of being above one, and how sure all that is."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

__all__ = ["LEVELS", "Summary", "convergence", "summary"]

#: The quantiles that are told, keyed as the results write them.
LEVELS: dict[str, float] = {"0.025": 0.025, "0.25": 0.25, "0.5": 0.5, "0.75": 0.75, "0.975": 0.975}
#: The standard normal quantile at 0.975.
_Z = 1.959963984540054
#: Draws from which running figures start.
_FIRST = 16


@dataclass(frozen=True, slots=True)
class Summary:
    """What a set of draws says. None where there are too few values: none at all, or one for what needs a spread.

    Attributes
    ----------
    draws : int
        All draws, those without a value too.
    rejected : int
        Draws without a value: nan or infinite. The other figures are of the rest, and so conditional on a value.
    mean, sd : float or None
        In the values' unit; sd with n - 1.
    quantiles : dict of str to float, or None
        By the keys of `LEVELS`; between order statistics interpolated linearly.
    probability_above : float or None
        Share of the values strictly above the threshold.
    mean_error, probability_error : float or None
        Standard errors of mean and share for independent draws, sd/sqrt(n) and sqrt(p (1 - p)/n): an upper estimate for
        the mean of a Latin hypercube or a Sobol sequence as a rule. They say how well the draws show the distribution,
        not how well the distribution is known.
    probability_interval : (float, float) or None
        Wilson's 95 % interval of the share, which keeps a width where the share is 0 or 1.
    """

    draws: int
    rejected: int
    mean: float | None
    sd: float | None
    quantiles: dict[str, float] | None
    probability_above: float | None
    mean_error: float | None
    probability_error: float | None
    probability_interval: tuple[float, float] | None


def summary(values: npt.ArrayLike, *, threshold: float = 1.0) -> Summary:
    """Return what a set of draws says about its distribution.

    Parameters
    ----------
    values : (n,) array of float
        One value a draw, any unit; nan where there is none.
    threshold : float
        Whose exceedance is counted: 1 for a reproduction number, 0 for a growth rate.

    Returns
    -------
    Summary

    Raises
    ------
    ValueError
        Not one row of numbers, or a threshold that is not finite.

    References
    ----------
    Quantiles: Hyndman & Fan (1996) Am. Stat. 50:361-365, type 7; interval of a share: Wilson (1927) J. Am. Stat. Assoc.
    22:209-212 (both from memory)

    Examples
    --------
    >>> found = summary([0.5, 1.5, 2.5, float("nan")])
    >>> found.rejected, found.mean, found.sd, found.quantiles["0.5"], round(found.probability_above, 9)
    (1, 1.5, 1.0, 1.5, 0.666666667)
    """
    x = np.asarray(values, dtype=float)
    if x.ndim != 1:
        raise ValueError(f"expected one row of values, not an array of {x.ndim} dimensions.")
    if not math.isfinite(threshold):
        raise ValueError(f"threshold = {threshold:g} is not finite.")
    kept = x[np.isfinite(x)]
    n, rejected = len(kept), len(x) - len(kept)
    if n == 0:
        return Summary(len(x), rejected, None, None, None, None, None, None, None)
    low, high = float(kept.min()), float(kept.max())
    # Of equal values the mean may be off by rounding, and then the spread is none of theirs.
    mean = low if low == high else min(max(float(kept.mean()), low), high)
    sd = None if n == 1 else 0.0 if low == high else float(kept.std(ddof=1))
    quantiles = np.quantile(kept, list(LEVELS.values()))
    share = int(np.count_nonzero(kept > threshold)) / n
    return Summary(
        draws=len(x),
        rejected=rejected,
        mean=mean,
        sd=sd,
        quantiles=dict(zip(LEVELS, quantiles.tolist(), strict=True)),
        probability_above=share,
        mean_error=None if sd is None else sd / math.sqrt(n),
        probability_error=math.sqrt(share * (1 - share) / n),
        probability_interval=_wilson(share, n),
    )


def _wilson(share: float, n: int) -> tuple[float, float]:
    square = _Z * _Z
    middle = share + square / (2 * n)
    half = _Z * math.sqrt(share * (1 - share) / n + square / (4 * n * n))
    low = 0.0 if share == 0 else (middle - half) / (1 + square / n)
    high = 1.0 if share == 1 else (middle + half) / (1 + square / n)
    return low, high


def convergence(values: npt.ArrayLike, *, threshold: float = 1.0) -> tuple[Summary, ...]:
    """Return the summaries of the first 16, 32, 64, ... draws, and of all: figures that have settled stop moving.

    For a Sobol sequence each of these is a smaller design of its own. The first rows of a Latin hypercube are as
    independent draws, so that its own figure, the last, is better than the path to it shows; draws brought in a file
    should stand in no order.

    Parameters
    ----------
    values : (n,) array of float
        As for `summary`, in the order of the draws.
    threshold : float

    Returns
    -------
    tuple of Summary
        The last one of all draws; `draws` tells them apart.

    Raises
    ------
    ValueError
        As for `summary`.

    Examples
    --------
    >>> [part.draws for part in convergence(np.arange(50.0))]
    [16, 32, 50]
    """
    x = np.asarray(values, dtype=float)
    if x.ndim != 1:
        raise ValueError(f"expected one row of values, not an array of {x.ndim} dimensions.")
    sizes = [_FIRST * 2**k for k in range(64) if _FIRST * 2**k < len(x)]
    return tuple(summary(x[:size], threshold=threshold) for size in [*sizes, len(x)])
