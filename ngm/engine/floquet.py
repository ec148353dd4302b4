"""Linear systems with a season: Floquet exponents, and the reproduction number over a whole period.

Over a period T the infected states follow w' = (F(t) - V(t)) w. R0 is the lambda at which the solution operator W(T) of

    w' = (F(t) / lambda - V(t)) w

has spectral radius 1; the growth rate is the Floquet exponent ln rho(W(T)) / T at lambda = 1, and R0 - 1 has its sign.

W(T) is a product over steps of matrix exponentials (Magnus' series to sixth order, three Gauss nodes a step): exact where
the matrices are constant on each step, and stiff systems take no shorter steps. Matrices come as arrays on those nodes, so
that a search for lambda evaluates nothing anew. Steps are doubled until the number stands still; the last change, enlarged,
is the error that is told.

Sources: Wang & Zhao (2008) J. Dyn. Differ. Equ. 20:699-717, theorems 2.1 and 2.2; Bacaer & Guernaoui (2006) J. Math. Biol.
53:421-436; Blanes, Casas & Ros (2000) BIT 40:434-450 for the step (cited from memory; the order is tested).
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

__all__ = ["PeriodicNumber", "Steps", "exponent", "periodic_number", "refined", "root_by_scale", "steps_over"]

FloatArray = npt.NDArray[np.float64]
#: A function of moments (n,) that gives F and V there, (n, m, m) each.
Slopes = Callable[[FloatArray], tuple[FloatArray, FloatArray]]

#: Steps a period at first and at most.
FIRST_STEPS, MOST_STEPS = 24, 6144
#: Relative change of R0 at which steps are not doubled any more.
STANDS_STILL = 2e-11
#: What the last change is multiplied by for the error that is told: doubling steps should gain a factor of 64.
SAFETY = 4.0
_GAUSS = (0.5 - math.sqrt(15) / 10, 0.5, 0.5 + math.sqrt(15) / 10)


@dataclass(frozen=True, eq=False, slots=True)
class Steps:
    """Steps over one period: `widths` (n,), and the three Gauss nodes of each, `moments` (n, 3)."""

    widths: FloatArray
    moments: FloatArray

    @property
    def period(self) -> float:
        """The length of the period."""
        return float(self.widths.sum())


def steps_over(breaks: FloatArray, count: int) -> Steps:
    """Return about `count` steps from the first break to the last, none of which crosses a break."""
    breaks = np.asarray(breaks, dtype=float)
    lengths = np.diff(breaks)
    parts = np.maximum(1, np.ceil(count * lengths / lengths.sum() - 1e-9)).astype(int)
    starts = np.concatenate(
        [a + (b - a) * np.arange(n) / n for a, b, n in zip(breaks[:-1], breaks[1:], parts, strict=True)]
    )
    widths = np.repeat(lengths / parts, parts)
    return Steps(widths, starts[:, None] + widths[:, None] * np.array(_GAUSS)[None, :])


def _commutator(a: FloatArray, b: FloatArray) -> FloatArray:
    return np.asarray(a @ b - b @ a)


#: Coefficients of the diagonal Pade approximant of degree 13 (Higham 2005, SIAM J. Matrix Anal. Appl. 26:1179), and the
#: largest 1-norm at which it is exact to rounding.
_PADE = (
    *(64764752532480000.0, 32382376266240000.0, 7771770303897600.0, 1187353796428800.0, 129060195264000.0),
    *(10559470521600.0, 670442572800.0, 33522128640.0, 1323241920.0, 40840800.0, 960960.0, 16380.0, 182.0, 1.0),
)
_PADE_NORM = 5.37


def _exponentials(stack: FloatArray) -> FloatArray:
    """Return the exponential of each matrix of a stack (n, m, m): all at once, which one by one takes 20 times as long."""
    norm = float(np.max(np.sum(np.abs(stack), axis=1), initial=0.0))
    halvings = max(0, math.ceil(math.log2(norm / _PADE_NORM))) if norm > _PADE_NORM else 0
    A = stack / 2.0**halvings
    eye = np.broadcast_to(np.eye(stack.shape[-1]), stack.shape)
    b, A2 = _PADE, A @ A
    A4 = A2 @ A2
    A6 = A4 @ A2
    odd = A @ (A6 @ (b[13] * A6 + b[11] * A4 + b[9] * A2) + b[7] * A6 + b[5] * A4 + b[3] * A2 + b[1] * eye)
    even = A6 @ (b[12] * A6 + b[10] * A4 + b[8] * A2) + b[6] * A6 + b[4] * A4 + b[2] * A2 + b[0] * eye
    out = np.linalg.solve(even - odd, even + odd)
    for _ in range(halvings):
        out = out @ out
    return np.asarray(out)


def solution_operator(A: FloatArray, steps: Steps) -> tuple[FloatArray, float]:
    """Return W and s with W(T) = W exp(s), W(T) taking the state at 0 to the state after the period.

    Parameters
    ----------
    A : (n, 3, m, m) array
        The matrix of the system on the nodes of each step, per time unit.
    """
    h = steps.widths[:, None, None]
    first, middle, last = A[:, 0], A[:, 1], A[:, 2]
    a1 = h * middle
    a2 = math.sqrt(15) / 3 * h * (last - first)
    a3 = 10 / 3 * h * (last - 2 * middle + first)
    c1 = _commutator(a1, a2)
    c2 = -_commutator(a1, 2 * a3 + c1) / 60
    omega = a1 + a3 / 12 + _commutator(-20 * a1 - a3 + c1, a2 + c2) / 240
    # A multiple of the identity is taken out of each step, so that long periods neither overflow nor vanish.
    shift = np.max(np.diagonal(omega, axis1=1, axis2=2), axis=1)
    eye = np.eye(A.shape[-1])
    factors = _exponentials(omega - shift[:, None, None] * eye)
    scale = float(shift.sum())
    while len(factors) > 1:
        odd = factors[-1:] if len(factors) % 2 else factors[:0]
        pairs = factors[1::2] @ factors[0 : 2 * (len(factors) // 2) : 2]
        size = np.max(np.abs(pairs), axis=(1, 2))
        size = np.where(size > 0, size, 1.0)
        scale += float(np.log(size).sum())
        factors = np.concatenate([pairs / size[:, None, None], odd])
    return factors[0], scale


def exponent(A: FloatArray, steps: Steps) -> float:
    """Return the Floquet exponent ln rho(W(T)) / T of w' = A(t) w, per time unit; -inf where W(T) is nilpotent.

    Parameters
    ----------
    A : (n, 3, m, m) array
        Non-negative off the diagonal.
    """
    W, scale = solution_operator(A, steps)
    root = float(np.max(np.abs(np.linalg.eigvals(W))))
    return -math.inf if root == 0 else (math.log(root) + scale) / steps.period


def root_by_scale(fixed: FloatArray, scaled: FloatArray, steps: Steps, start: float) -> float | None:
    """Return the lambda at which the exponent of fixed + scaled / lambda is 0; None where there is none.

    Parameters
    ----------
    fixed, scaled : (n, 3, m, m) arrays
        Per time unit. `scaled` >= 0; the exponent falls as lambda grows.
    start : float
        A first guess above 0.

    Returns
    -------
    float or None
        None where `fixed` alone does not decay, 0.0 where the exponent is below 0 for every lambda.
    """
    from scipy.optimize import brentq

    if exponent(fixed, steps) >= 0:
        return None

    def at(logarithm: float) -> float:
        value = exponent(fixed + scaled * math.exp(-logarithm), steps)
        return max(value, -1e6)

    here = math.log(start)
    value = at(here)
    if value == 0:
        return start
    reach, step = here, 0.25
    while True:
        reach += step if value > 0 else -step
        beyond = at(reach)
        if beyond == 0:
            return math.exp(reach)
        if (beyond > 0) != (value > 0):
            break
        here, value = reach, beyond
        step *= 2
        if abs(reach - math.log(start)) > 120:
            return 0.0
    low, high = min(here, reach), max(here, reach)
    return math.exp(float(brentq(at, low, high, xtol=1e-15, rtol=8.9e-16)))


@dataclass(frozen=True, slots=True)
class PeriodicNumber:
    """A number over the period, with the change at the last doubling of steps, enlarged, as its error.

    `value` is None where it does not exist: infection is sustained, or states grow, without what is scaled.
    """

    value: float | None
    error: float
    steps: int
    settled: bool


def refined(
    compute: Callable[[Steps, float], float | None], breaks: FloatArray, start: float, scale: float = 0.0
) -> PeriodicNumber:
    """Return a number computed with ever more steps until it stands still.

    Parameters
    ----------
    compute : callable
        Steps and a first guess -> the number.
    breaks : (k,) array
        Where the matrices may jump, from 0 to the period.
    scale : float
        Changes count against the number's size, or this where the number is smaller.
    """
    count = FIRST_STEPS
    before = compute(steps_over(breaks, count), start)
    change = math.inf
    while before is not None and count < MOST_STEPS:
        count *= 2
        now = compute(steps_over(breaks, count), before if before > 0 else start)
        if now is None:
            return PeriodicNumber(None, math.inf, count, True)
        change = 0.0 if now == before else abs(now - before)
        before = now
        size = max(abs(now), scale)
        if change <= STANDS_STILL * size:
            return PeriodicNumber(now, SAFETY * change + 1e-13 * size, count, True)
    if before is None:
        return PeriodicNumber(None, math.inf, count, True)
    return PeriodicNumber(before, SAFETY * change, count, False)


def periodic_number(slopes: Slopes, breaks: FloatArray, start: float = 1.0) -> PeriodicNumber:
    """Return R0 of w' = (F(t) - V(t)) w over the period (Wang & Zhao 2008).

    Parameters
    ----------
    slopes : callable
        Moments (n,) -> F and V, (n, m, m) each, per time unit; F >= 0, -V non-negative off the diagonal.
    breaks : (k,) array
        0, where F or V may jump, and the period.
    start : float
        A first guess, such as the number of the averaged system.
    """

    def compute(steps: Steps, guess: float) -> float | None:
        F, V = on_nodes(slopes, steps)
        return root_by_scale(-V, F, steps, guess)

    return refined(compute, breaks, start)


def on_nodes(slopes: Slopes, steps: Steps) -> tuple[FloatArray, FloatArray]:
    """Return F and V on the nodes of steps, (n, 3, m, m) each."""
    F, V = slopes(steps.moments.ravel())
    shape = (len(steps.widths), 3, *F.shape[1:])
    return F.reshape(shape), V.reshape(shape)
