"""What a vaccine does to a next-generation matrix: coverage, efficacy, leaky or all-or-nothing, waning.

In every function K[i, j] is the number of infections of type i caused by one case of type j, all types at infection in
a population without vaccination.
"""

from __future__ import annotations

from typing import Any, Literal

import numpy as np
import numpy.typing as npt

from ngm.engine.enclosure import spectral_radius
from ngm.engine.linear import value

__all__ = [
    "critical_coverage",
    "lasting_share",
    "overall_efficacy",
    "scaled_number",
    "susceptibles",
    "with_vaccinated_types",
]

FloatArray = npt.NDArray[np.float64]


def overall_efficacy(against_infection: npt.ArrayLike, against_spread: npt.ArrayLike = 0.0) -> FloatArray:
    """Return e = 1 - (1 - a)(1 - b): the share of a vaccinated host's part in transmission that is gone.

    Parameters
    ----------
    against_infection : array of float in [0, 1]
        a: leaky, the share of exposures that do not infect; all-or-nothing, the share of the vaccinated who are immune.
    against_spread : array of float in [0, 1]
        b: by how much less a vaccinated case infects.

    Examples
    --------
    >>> float(overall_efficacy(0.8, 0.5))
    0.9
    """
    a, b = np.asarray(against_infection, dtype=float), np.asarray(against_spread, dtype=float)
    for share in (a, b):
        if not np.all((share >= 0) & (share <= 1)):
            raise ValueError("an efficacy lies in [0, 1]")
    return np.asarray(1 - (1 - a) * (1 - b))


def susceptibles(
    coverage: npt.ArrayLike, against_infection: npt.ArrayLike, kind: Literal["leaky", "all-or-nothing"]
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Return (unvaccinated, vaccinated and not immune, their susceptibility) as shares of each group.

    Leaky: everybody who is vaccinated stays susceptible, by 1 - a. All-or-nothing: a share a of them is immune, the
    rest as susceptible as before. The product of the last two is the same, and with it every threshold; how many are
    infected in the end is not.

    References
    ----------
    Smith, Rodrigues & Fine (1984) Int. J. Epidemiol. 13:87-93 (from memory)
    """
    x, a = np.broadcast_arrays(np.asarray(coverage, dtype=float), np.asarray(against_infection, dtype=float))
    if kind == "leaky":
        return np.asarray(1 - x), np.array(x), np.asarray(1 - a)
    if kind == "all-or-nothing":
        return np.asarray(1 - x), np.asarray(x * (1 - a)), np.ones(x.shape)
    raise ValueError(f"{kind!r} is no kind of vaccine: leaky or all-or-nothing")


def with_vaccinated_types(
    K: FloatArray,
    coverage: npt.ArrayLike,
    against_infection: npt.ArrayLike,
    against_spread: npt.ArrayLike = 0.0,
    kind: Literal["leaky", "all-or-nothing"] = "leaky",
) -> FloatArray:
    """Return the next-generation matrix with the vaccinated as types of their own, (2m, 2m): unvaccinated first.

    With shares u, w and susceptibility s of `susceptibles` and r = 1 - b: rows u K and w s K, columns of the vaccinated
    times r. Its spectral radius is that of diag(u + w s r) K = diag(1 - x e) K, e of `overall_efficacy`.

    Parameters
    ----------
    K : (m, m) array of float, >= 0
    coverage, against_infection, against_spread : array of float in [0, 1], one or m of them
    kind : {"leaky", "all-or-nothing"}

    Examples
    --------
    >>> with_vaccinated_types(np.array([[2.0]]), 0.5, 0.8, 0.5).round(12).tolist()
    [[1.0, 0.5], [0.2, 0.1]]
    """
    unvaccinated, vaccinated, susceptibility = susceptibles(coverage, against_infection, kind)
    ones = np.ones(len(K))
    left = np.concatenate([ones * unvaccinated, ones * (vaccinated * susceptibility)])
    right = np.concatenate([ones, ones * (1 - np.asarray(against_spread, dtype=float))])
    return np.asarray(left[:, None] * np.tile(K, (2, 2)) * right[None, :])


def scaled_number(K: Any, factors: npt.ArrayLike) -> float:
    """Return the spectral radius of diag(factors) K, which is that of K diag(factors) too."""
    return value(spectral_radius(np.asarray(factors, dtype=float)[:, None] * K))


def lasting_share(turnover: float, waning: float) -> float:
    """Return mu / (mu + omega): the share of those vaccinated at birth whose protection has not waned, at rest.

    Examples
    --------
    >>> round(lasting_share(0.01, 0.05), 12)
    0.166666666667
    """
    return turnover / (turnover + waning)


def critical_coverage(T: float | None, efficacy: float, lasting: float = 1.0) -> float | None:
    """Return (1 - 1/T) / (e l): the coverage at which the number falls to 1; above 1 where that is impossible.

    Parameters
    ----------
    T : float or None
        Type-reproduction number of the types that are vaccinated; R0 where all are. None: they alone cannot do it.
    efficacy : float in (0, 1]
    lasting : float in (0, 1]

    Returns
    -------
    float or None
        0 where T <= 1; None where T is None or the vaccine does nothing.

    Examples
    --------
    >>> round(critical_coverage(0.6 / 0.21, 0.8), 12), round(critical_coverage(0.6 / 0.21, 0.8, 1 / 6), 12)
    (0.8125, 4.875)
    """
    if T is None:
        return None
    if T <= 1:
        return 0.0
    return (T - 1) / T / (efficacy * lasting) if efficacy * lasting > 0 else None
