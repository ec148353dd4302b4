"""Pace: how long after its own infection a case infects others, from F and V.

One infected as type j makes infections of type i at the rate K(a)[i, j] = (F exp(-V a))[i, j] at age a of its infection;
over all ages that adds up to K. Weighted with the Perron vectors of K (w: the mix of new cases, v: what each is worth;
v.w = 1), g(a) = v K(a) w / R0 is the density of the generation interval. In discrete time a case counted in one step
infects from the next on: K(a) = F T^(a-1), a = 1, 2, ...

Source: Wallinga & Lipsitch (2007) Proc. R. Soc. B 274:599-604; Diekmann, Heesterbeek & Britton (2013) Mathematical Tools
for Understanding Infectious Disease Dynamics (both from memory).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

__all__ = ["Pace", "pace"]

FloatArray = npt.NDArray[np.float64]

#: Points of the density.
POINTS = 161
#: Ages up to which the density is shown leave this share of all infections to come.
REST = 1e-3
#: Quarters of the mean after which the density is cut off in any case.
MOST_QUARTERS = 4000


@dataclass(frozen=True, eq=False)
class Pace:
    """The generation interval of an irreducible class.

    Attributes
    ----------
    mean, sd : float
        In time units (steps).
    mean_by_type : (n,) array
        Mean age at infecting of a case of each type, its infections weighted with what they are worth; nan where it
        infects nobody.
    ages, density, cumulative : arrays
        Per time unit; in discrete time the share in each step.
    total : float
        The density added up over the ages shown, and what comes after: 1 but for the error of Simpson's rule.
    transform : float
        sum of exp(-r a) g(a) over all ages, r the growth rate: 1/R0 where there is one type at infection.
    """

    mean: float
    sd: float
    mean_by_type: FloatArray
    ages: FloatArray
    density: FloatArray
    cumulative: FloatArray
    total: float
    transform: float


def pace(
    F: FloatArray,
    V: FloatArray,
    at: npt.NDArray[np.intp],
    right: FloatArray,
    left: FloatArray,
    growth: float,
    *,
    discrete: bool = False,
) -> Pace:
    """Return the generation interval.

    Parameters
    ----------
    F, V : (m, m) arrays
        F with the rows of the class only; V a non-singular M-matrix (I - T in discrete time).
    at : (n,) array of int
        The types of the class, as rows of F.
    right, left : (n,) arrays
        Perron vectors of the class's K.
    growth : float
        Growth rate of the class per time unit (in discrete time the logarithm of its factor).

    Examples
    --------
    Infectious from the start, leaving at rate 0.5: the age at infecting is exponential with mean 2.

    >>> one = pace(np.array([[1.5]]), np.array([[0.5]]), np.array([0]), np.ones(1), np.ones(1), 1.0)
    >>> round(one.mean, 12), round(one.sd, 12), round(one.transform * 3, 12)
    (2.0, 2.0, 1.0)
    """
    m = len(F)
    weights = left @ F[at]
    start = np.zeros(m)
    start[at] = right
    entering = np.zeros((m, len(at)))
    entering[at, np.arange(len(at))] = 1.0
    once = np.linalg.solve(V, np.column_stack([start, entering]))
    twice = np.linalg.solve(V, once)
    first = float(weights @ once[:, 0])
    by_type, by_type_mean = weights @ once[:, 1:], weights @ twice[:, 1:]
    if discrete:
        mean = float(weights @ twice[:, 0]) / first
        T = np.eye(m) - V
        second = float(weights @ np.linalg.solve(V, twice[:, 0] + T @ twice[:, 0])) / first
        factor = np.exp(growth)
        shifted = np.linalg.solve(factor * np.eye(m) - T, start)
    else:
        mean = float(weights @ twice[:, 0]) / first
        second = 2 * float(weights @ np.linalg.solve(V, twice[:, 0])) / first
        shifted = np.linalg.solve(V + growth * np.eye(m), start)
    with np.errstate(divide="ignore", invalid="ignore"):
        means = np.where(by_type > 0, by_type_mean / by_type, np.nan)
    ages, density, cumulative = _in_steps(V, weights, start, first) if discrete else _density(V, weights, start, first)
    return Pace(
        mean,
        float(np.sqrt(max(second - mean**2, 0.0))),
        means,
        ages,
        density,
        cumulative,
        _added_up(ages, density, discrete) + _left_over(V, weights, start, first, float(ages[-1]), discrete),
        float(weights @ shifted) / first,
    )


def _survivors(V: FloatArray, age: float) -> FloatArray:
    from scipy.linalg import expm  # a fifth of a second that the rest does not need

    return np.asarray(expm(-V * age))


def _left_over(
    V: FloatArray, weights: FloatArray, start: FloatArray, first: float, age: float, discrete: bool
) -> float:
    """Return the share of infections that come after an age."""
    later = np.linalg.matrix_power(np.eye(len(V)) - V, round(age)) if discrete else _survivors(V, age)
    return float(weights @ np.linalg.solve(V, later @ start)) / first


def _added_up(ages: FloatArray, density: FloatArray, discrete: bool) -> float:
    """Return the density added up over the ages shown, by Simpson's rule where time is continuous."""
    if discrete:
        return float(density.sum())
    inner = 4 * density[1:-1:2].sum() + 2 * density[2:-1:2].sum()
    return float((density[0] + inner + density[-1]) * (ages[1] - ages[0]) / 3)


def _density(
    V: FloatArray, weights: FloatArray, start: FloatArray, first: float
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Return ages, density and the share of infections up to each age, on an even grid that leaves a small rest."""
    worth = np.linalg.solve(V.T, weights)
    quarter = float(worth @ np.linalg.solve(V, start)) / first / 4
    step, state, count = _survivors(V, quarter), start, 0
    while count < MOST_QUARTERS and float(worth @ state) > REST * first:
        state, count = step @ state, count + 1
    ages = np.linspace(0.0, count * quarter, POINTS)
    step = _survivors(V, float(ages[1]))
    state, density, later = start, [], []
    for _ in ages:
        density.append(float(weights @ state) / first)
        later.append(float(worth @ state) / first)
        state = step @ state
    return ages, np.maximum(density, 0.0), 1 - np.asarray(later)


def _in_steps(
    V: FloatArray, weights: FloatArray, start: FloatArray, first: float
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Return steps from 1 on, the share of infections in each, and up to each."""
    T = np.eye(len(V)) - V
    shares: list[float] = []
    state, total = start, 0.0
    while len(shares) < 10 * POINTS:
        shares.append(float(weights @ state) / first)
        total += shares[-1]
        state = T @ state
        if total >= 1 - REST:
            break
    return np.arange(1, len(shares) + 1, dtype=float), np.array(shares), np.cumsum(shares)
