"""How endemic states leave the infection-free one at a number of 1: the coefficients a and b on the centre manifold.

With y = (state, parameter), f the net flow, J its slope where the number is 1, w and v the right and left vectors of the
eigenvalue 0 of J (v.w = 1):

    a = v . D2f[w, w],      b = d/dp of the leading eigenvalue = v . D2f[w, (x0'(p), 1)],

x0'(p) being how the infection-free state moves with the parameter. Endemic states near it have infection
e = -2 b (p - p*) / a: for b > 0 they lie above p* (forward) where a < 0 and below (backward) where a > 0.

Source: Castillo-Chavez & Song (2004) Math. Biosci. Eng. 1:361-404, theorem 4.1 and its remarks (from memory).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from ngm.derivation.dynamics import Dynamics
from ngm.engine.orbit import conserved_sums
from ngm.engine.series import SERIES, coefficient, lines

__all__ = ["Coefficients", "NotComputedError", "coefficients", "sums_kept"]

FloatArray = Any
#: Eigenvalues within this share of the largest one count as 0.
ZERO = 1e-7
#: a counts as 0 where its parts cancel to this share.
CANCELS = 1e-9


class NotComputedError(Exception):
    """The theorem says nothing here; the message says why."""


@dataclass(frozen=True, eq=False, slots=True)
class Coefficients:
    """a and b, unoriented (b < 0 where the number falls with the parameter), and the direction of the endemic states.

    `direction`: (state, parameter) along which they leave, infected types positive and adding up to 1.
    """

    a: float
    b: float
    direction: FloatArray


def sums_kept(dynamics: Dynamics, loose: float) -> FloatArray:
    """Return the sums of the state that no flow ever changes, (c, n): a closed population keeps its size."""
    at = np.array([loose])

    def field(x: FloatArray) -> FloatArray:
        return np.asarray(dynamics.net(np.vstack([x, np.broadcast_to(at, (1, x.shape[1]))])))

    with np.errstate(all="ignore"):
        probe = field(np.ones((dynamics.size, 1)))
        if not np.all(np.isfinite(probe)):
            raise NotComputedError("a rate has no value in some ordinary states.")
        return conserved_sums(field, dynamics.size)


def _second(dynamics: Dynamics, y: FloatArray, u: FloatArray) -> FloatArray:
    """Return D2f[u, u] at y."""
    return 2 * coefficient(np.asarray(dynamics.net(lines(y, u), SERIES)), 2)[:, 0]


def coefficients(dynamics: Dynamics, y: FloatArray, kept: FloatArray) -> Coefficients:
    """Return a and b at a state without infection where the number is 1.

    Parameters
    ----------
    dynamics : Dynamics
        With a quantity let loose.
    y : (n + 1,) array
        The infection-free state, and the value of that quantity.
    kept : (c, n) array
        From `sums_kept`.

    Raises
    ------
    NotComputedError
        The eigenvalue 0 is not simple, another one does not decay, a second derivative does not exist, a or b is 0.
    """
    n, m = dynamics.size, dynamics.infected
    J = np.asarray(dynamics.slope(y))
    if not np.all(np.isfinite(J)):
        raise NotComputedError("a rate has no slope in the infection-free state.")
    w, v = _vectors(J[:m, :m], float(np.max(np.abs(J[:, :n]), initial=0.0)))
    uninfected = J[m:, m:n]
    _must_return(uninfected, kept, m)
    right = np.zeros(n)
    right[:m] = w
    right[m:] = _answer(uninfected, -J[m:, :m] @ w, kept[:, m:], -kept[:, :m] @ w)
    moves = np.zeros(n)
    moves[m:] = _answer(uninfected, -J[m:, n], kept[:, m:], np.zeros(len(kept)))
    left = np.concatenate([v, np.zeros(n - m)])
    along = np.append(right, 0.0)
    shift = np.append(moves, 1.0)
    parts = left * _second(dynamics, y, along)
    # Both directions are brought to one size first: the mixed derivative is then a difference of like numbers.
    ratio = np.linalg.norm(along) / np.linalg.norm(shift / np.maximum(1e-300, np.abs(y[-1]) + 1e-300))
    shift_scaled = shift * ratio
    mixed = (_second(dynamics, y, along + shift_scaled) - _second(dynamics, y, along - shift_scaled)) / 4 / ratio
    a, b = float(parts.sum()), float(left @ mixed)
    if not (np.isfinite(a) and np.isfinite(b)):
        raise NotComputedError(
            "a rate has no second derivative in the infection-free state (a power below 2, a root, a tie)."
        )
    scale = float(np.max(np.abs(J[:m]))) / max(1e-300, abs(y[-1]))
    if abs(b) <= CANCELS * scale:
        raise NotComputedError("the number does not move with this quantity where it is 1 (b = 0).")
    if abs(a) <= CANCELS * float(np.abs(parts).sum()) or not np.any(parts):
        raise NotComputedError("a is 0: the theorem leaves open which way the endemic states go.")
    slope = -a / (2 * b)
    return Coefficients(a, b, np.append(right + slope * moves, slope))


def _vectors(block: FloatArray, size: float) -> tuple[FloatArray, FloatArray]:
    """Return the right and the left vector of the eigenvalue 0: right sums to 1, left.right = 1. `size`: of the rates."""
    values, vectors = np.linalg.eig(block)
    size = max(1e-300, size)
    order = np.argsort(-values.real)
    if abs(values[order[0]]) > ZERO * size:
        raise NotComputedError("no eigenvalue is 0 where the number is 1: F or V has entries of the wrong sign.")
    if len(values) > 1 and values[order[1]].real > -ZERO * size:
        raise NotComputedError(
            "the eigenvalue 0 is not simple: several classes of types have a number of 1 together, or a type is never left."
        )
    w = np.real(vectors[:, order[0]])
    back, left = np.linalg.eig(block.T)
    v = np.real(left[:, int(np.argmin(np.abs(back)))])
    w = w / w.sum()
    if np.any(w < -1e-9) or abs(v @ w) < 1e-14 * np.linalg.norm(v) * np.linalg.norm(w):
        raise NotComputedError("the right vector of the eigenvalue 0 has entries of both signs.")
    return w, v / (v @ w)


def _must_return(uninfected: FloatArray, kept: FloatArray, m: int) -> None:
    """Refuse a state to which the uninfected do not come back by themselves."""
    sums = kept[:, m:]
    sums = sums[np.linalg.norm(sums, axis=1) > 1e-12] if len(sums) else sums
    block = uninfected
    if len(sums):
        basis = np.linalg.svd(sums)[2][np.linalg.matrix_rank(sums) :].T
        block = basis.T @ uninfected @ basis
    if len(block) and float(np.max(np.linalg.eigvals(block).real)) > -1e-12 * max(1e-300, float(np.abs(block).max())):
        raise NotComputedError(
            "without infection the uninfected do not come back to where they were (nobody is born, or immunity is never lost): "
            "there is no endemic state that it could lead to."
        )


def _answer(block: FloatArray, right: FloatArray, sums: FloatArray, held: FloatArray) -> FloatArray:
    """Return x with block x = right and sums x = held."""
    rows = np.vstack([block, sums]) if len(sums) else block
    wanted = np.concatenate([right, held]) if len(sums) else right
    if not len(block):
        return np.empty(0)
    x = np.linalg.lstsq(rows, wanted, rcond=None)[0]
    if float(np.max(np.abs(rows @ x - wanted))) > 1e-8 * max(1e-300, float(np.max(np.abs(wanted)))):
        raise NotComputedError("the uninfected do not come to rest beside a few infected.")
    return np.asarray(x)
