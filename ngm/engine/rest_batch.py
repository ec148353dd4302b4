"""States at rest at many draws at once, followed from a known one by Newton's method."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import numpy.typing as npt

__all__ = ["follow_rest"]

FloatArray = npt.NDArray[np.float64]
BoolArray = npt.NDArray[np.bool_]

MOST_STEPS = 60
#: A compartment that shrinks to this share of the largest is about to be empty: whether it is, is not decided here.
_EDGE = 1e-9


def follow_rest(
    system: Callable[[list[FloatArray]], FloatArray], inputs: list[FloatArray], start: FloatArray
) -> tuple[FloatArray, BoolArray]:
    """Return a state at rest for each draw, and whether it can be relied on.

    Parameters
    ----------
    system : callable
        Takes the inputs and the n unknowns, (N,) each, and returns (n + n n, N): net flow of each, and its slope row by
        row.
    inputs : list of (N,) arrays
    start : (n,) array
        The state at rest from which Newton's method starts.

    Returns
    -------
    state : (n, N) array
    found : (N,) array of bool
        True where the iteration settled at a positive state (or one with the zeros of `start`) that is stable: every
        eigenvalue of the slope has a negative real part.
    """
    n, size = len(start), len(inputs[0])
    state = np.repeat(start[:, None], size, axis=1)
    settled = np.zeros(size, dtype=bool)
    found = np.zeros(size, dtype=bool)
    active = np.arange(size)
    with np.errstate(all="ignore"):
        for _ in range(MOST_STEPS):
            x = np.ascontiguousarray(state[:, active])
            out = system([*(array[active] for array in inputs), *x])
            step = _solve(out[n:].reshape(n, n, -1), out[:n])
            close = np.all(np.abs(step) <= 1e-12 * np.abs(x), axis=0)
            alive = np.all(np.isfinite(step), axis=0)
            # No compartment becomes negative: at most nine tenths of it go in a step.
            state[:, active[alive]] = np.maximum(x - step, 0.1 * x)[:, alive]
            settled[active[close & alive]] = True
            active = active[alive & ~close]
            if not len(active):
                break
        out = system([*inputs, *state])
        slope = out[n:].reshape(n, n, -1)
        inner = settled & np.all((state > _EDGE * state.max(axis=0)) | (start[:, None] == 0), axis=0)
        inner &= np.all(np.isfinite(out), axis=0)
        found[inner] = _stable(slope[:, :, inner])
    return state, found


def _solve(matrix: FloatArray, right: FloatArray) -> FloatArray:
    """Return x with matrix x = right draw by draw; nan where the matrix is singular."""
    if len(right) == 1:
        return np.asarray(right / matrix[0])
    stack = np.ascontiguousarray(np.moveaxis(matrix, -1, 0))
    columns = np.ascontiguousarray(right.T)[:, :, None]
    stack[~np.isfinite(stack).all(axis=(1, 2))] = np.nan
    try:
        return np.asarray(np.linalg.solve(stack, columns)[:, :, 0].T)
    except np.linalg.LinAlgError:
        out = np.full(right.shape, np.nan)
        for k, (one, b) in enumerate(zip(stack, columns, strict=True)):
            try:
                out[:, k] = np.linalg.solve(one, b)[:, 0]
            except np.linalg.LinAlgError:
                continue
        return out


def _stable(slope: FloatArray) -> BoolArray:
    if slope.shape[0] == 1:
        return np.asarray(slope[0, 0] < 0)
    if not slope.shape[2]:
        return np.zeros(0, dtype=bool)
    stack = np.ascontiguousarray(np.moveaxis(slope, -1, 0))
    top = np.linalg.eigvals(stack).real.max(axis=1)
    return np.asarray(top < -1e-12 * np.abs(stack).max(axis=(1, 2)))
