"""States at rest: every non-negative x at which what enters each compartment equals what leaves it.

The equations come as functions of arrays, once in doubles and once in balls. They are taken apart into strongly connected
blocks, solved in order; a block in which the net flow is affine in its own unknowns is a linear system, another one is
searched: a scan for sign changes for one unknown, Newton's method from many starts for several. What is found in doubles
is then enclosed: a ball around the exact solution by Krawczyk's test.

Source: Krawczyk (1969) Computing 4:187-201; Neumaier (1990) Interval methods for systems of equations, ch. 5 (cited from
memory).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Protocol

import numpy as np
from flint import ctx
from scipy.linalg import lu_factor, lu_solve

from ngm.engine.balls import BallArray, FloatArray, arb, balls, contains_zero, is_finite, is_zero, precision, to_floats
from ngm.engine.linear import matmul, solve
from ngm.engine.structure import classes

__all__ = ["FreeStates", "RestStates", "System", "find_rest", "is_stable"]

#: How many combinations of solutions of single blocks are followed.
MOST_CANDIDATES = 64
#: Random starts of Newton's method for a block of several unknowns.
STARTS = 80
#: How many times the bits in force are tried in turn before a block counts as singular.
TIMES = (1, 2, 8)


class System(Protocol):
    """Net flow of n unknowns in one kind of number."""

    def flow(self, x: Any) -> tuple[Any, Any]:
        """Return what enters and what leaves at x, (n, k) each for x of shape (n, k) or (n,)."""
        ...

    def slope(self, x: Any) -> Any:
        """Return the derivative of (entering - leaving) at x of shape (n,), (n, n)."""
        ...


class FreeStates(Exception):  # noqa: N818 - it is a finding, not a mistake
    """Unknowns whose equations are singular: nothing fixes them, or they never rest. `members`: their indices.

    `restless`: those among them that something enters all the same, so that no number of them is at rest.
    """

    def __init__(self, members: tuple[int, ...], restless: tuple[int, ...] = ()) -> None:
        super().__init__(members)
        self.members, self.restless = members, restless


@dataclass(frozen=True, slots=True)
class RestStates:
    """States at rest, as arrays (n,) of balls or doubles, and whether each is non-negative and stable."""

    states: tuple[Any, ...]
    nonnegative: tuple[bool, ...]
    stable: tuple[bool, ...]


def is_stable(slope: FloatArray, *, discrete: bool = False) -> bool:
    """Return whether deviations die out: eigenvalues of the slope have negative real parts, beyond rounding.

    `discrete`: the slope is that of what a step adds, and the eigenvalues of I + slope have a modulus below 1.
    """
    if not len(slope):
        return True
    values = np.linalg.eigvals(slope)
    if discrete:
        return bool(np.max(np.abs(1 + values)) < 1 - 1e-13)
    return bool(np.max(values.real) < -1e-13 * max(1e-300, float(np.max(np.abs(slope)))))


def find_rest(floats: System, exact: System | None, size: int, *, discrete: bool = False) -> RestStates:
    """Return the states at rest of a system of `size` unknowns.

    Parameters
    ----------
    floats, exact : System
        The same equations in doubles and in balls; without `exact` the states are doubles.
    discrete : bool
        The net flow is what a step adds: stability is decided by I + slope.

    Raises
    ------
    FreeStates
        Some unknowns are fixed by nothing.
    """
    if size == 0:
        return RestStates((np.empty(0, dtype=object if exact is not None else float),), (True,), (True,))
    with np.errstate(all="ignore"):
        return _Search(floats, exact, size, discrete).run()


class _Search:
    def __init__(self, floats: System, exact: System | None, size: int, discrete: bool) -> None:
        self.floats, self.exact, self.n, self.discrete = floats, exact, size, discrete
        self.rng = np.random.default_rng(20030)
        probes = [np.exp(self.rng.normal(size=size)) * scale for scale in (1.0, 37.0, 1e-3)]
        slopes = [np.asarray(self._slope(x)) for x in probes]
        usable = [s for s in slopes if np.all(np.isfinite(s))]
        self.pattern = np.any([s != 0 for s in slopes], axis=0) | ~np.all([np.isfinite(s) for s in slopes], axis=0)
        # Where the slope is the same at three random points in every entry, the net flow is affine there.
        self.curved = ~np.all([np.isclose(s, slopes[0], rtol=1e-11, atol=0) for s in slopes], axis=0)
        if len(usable) < len(slopes):
            self.curved |= self.pattern

    def _slope(self, x: Any) -> Any:
        return self.floats.slope(x)

    def _net(self, x: Any) -> Any:
        entering, leaving = self.floats.flow(x)
        return entering - leaving

    def run(self) -> RestStates:
        blocks = classes(self.pattern | np.eye(self.n, dtype=bool))
        states = self._follow(blocks) if self.curved.any() else [self._affine(blocks)]
        nonnegative, stable = [], []
        for x in states:
            numbers = to_floats(x) if x.dtype == object else x
            nonnegative.append(bool(np.all(numbers >= -1e-12 * max(1e-300, float(np.max(np.abs(numbers)))))))
            slope = np.asarray(self._slope(numbers))
            stable.append(bool(np.all(np.isfinite(slope))) and is_stable(slope, discrete=self.discrete))
        return RestStates(tuple(states), tuple(nonnegative), tuple(stable))

    # --- affine systems ---------------------------------------------------------------------------

    def _affine(self, blocks: list[Any]) -> Any:
        if self.exact is None:
            slope = np.asarray(self._slope(np.zeros(self.n)))
            constant = self._net(np.zeros(self.n))[:, 0]
            plain = np.zeros(self.n)
            for block in blocks:
                right = constant[block] + slope[block] @ plain
                plain[block] = self._solve_floats(slope[np.ix_(block, block)], -right, block)
            return plain
        free: list[int] = []
        restless: list[int] = []
        for times in TIMES:
            with precision(times * ctx.prec):
                slope, constant = self._affine_parts()
                x = balls(np.zeros(self.n))
                free, restless = [], []
                for block in blocks:
                    right = _plus(constant[block], slope[block], x)
                    solved = _solve_balls(slope[np.ix_(block, block)], right)
                    if solved is None:
                        free += [int(k) for k in block]
                        alone = len(block) == 1 and not contains_zero(right[0])
                        restless += [int(k) for k in block if alone]
                    else:
                        x[block] = solved
                if not free:
                    return x
        raise FreeStates(tuple(sorted(free)), tuple(restless))

    def _affine_parts(self) -> tuple[BallArray, BallArray]:
        """Return slope and constant of an affine net flow, from its value at 0 or, where it has none there, at 1."""
        assert self.exact is not None
        for start in (np.zeros(self.n), np.ones(self.n)):
            x = balls(start)
            slope = self.exact.slope(x)
            entering, leaving = self.exact.flow(x)
            net = (entering - leaving)[:, 0]
            if is_finite(net) and is_finite(slope):
                break
        constant = net if not start.any() else net - slope.sum(axis=1)
        return slope, constant

    def _solve_floats(self, matrix: FloatArray, right: FloatArray, block: Any) -> FloatArray:
        scale = float(np.max(np.abs(matrix), initial=0.0))
        if not np.any(right) and scale > 0:
            return np.zeros(len(right))
        if scale == 0 or np.linalg.cond(matrix) > 1e14:
            raise FreeStates(tuple(int(k) for k in block))
        return np.asarray(lu_solve(lu_factor(matrix), right))

    # --- other systems: block by block, following every solution ----------------------------------

    def _follow(self, blocks: list[Any]) -> list[Any]:
        states = [np.zeros(self.n)]
        for block in blocks:
            found = []
            for x in states:
                for y in self._block(block, x):
                    new = x.copy()
                    new[block] = y
                    found.append(new)
            states = found[:MOST_CANDIDATES]
        if self.exact is None:
            return list(states)
        enclosed = [self._enclose(x) for x in states]
        return [x for x in enclosed if x is not None]

    def _block(self, block: Any, x: FloatArray) -> list[FloatArray]:
        def net(y: FloatArray) -> FloatArray:
            full = np.repeat(x.reshape(-1, 1), y.shape[1], axis=1)
            full[block] = y
            rates: FloatArray = np.broadcast_to(np.asarray(self._net(full)), (self.n, y.shape[1]))
            return np.asarray(rates[block])

        def slope(y: FloatArray) -> FloatArray:
            full = x.copy()
            full[block] = y
            return np.asarray(np.asarray(self._slope(full))[np.ix_(block, block)])

        size = len(block)
        if not self.curved[np.ix_(block, block)].any():
            matrix = slope(np.ones(size))
            return [self._solve_floats(matrix, matrix @ np.ones(size) - net(np.ones((size, 1)))[:, 0], block)]
        found: list[FloatArray] = []
        if not np.any(net(np.zeros((size, 1)))):
            found.append(np.zeros(size))
        found += _scan(net) if size == 1 else self._newton(net, slope, size)
        return _distinct(found)

    def _newton(self, net: Any, slope: Any, size: int) -> list[FloatArray]:
        found = []
        for k in range(STARTS):
            y = np.exp(self.rng.uniform(np.log(1e-4), np.log(1e7), size))
            if k % 4 == 3:
                y[self.rng.random(size) < 0.5] = 0.0
            elif k % 2:
                y[:] = y[0] * np.exp(self.rng.normal(size=size) * 0.3)
            solution = _damped_newton(net, slope, y)
            if solution is not None:
                found.append(solution)
        return found

    # --- enclosures -------------------------------------------------------------------------------

    def _enclose(self, start: FloatArray) -> BallArray | None:
        """Return balls around the exact solution next to `start`, None where its slope is singular."""
        exact = self.exact
        assert exact is not None
        scale = max(1e-300, float(np.max(np.abs(start), initial=0.0)))
        live = np.abs(start) > 1e-11 * scale
        with precision(ctx.prec):
            zero_rows = exact.flow(balls(np.where(live, start, 0.0)))
            for k in np.flatnonzero(~live):
                if not (is_zero(zero_rows[0][k, 0]) and is_zero(zero_rows[1][k, 0])):
                    live[k] = True
        members = np.flatnonzero(live)
        for times in TIMES[:2]:
            with precision(times * ctx.prec):
                found = self._krawczyk(np.where(live, start, 0.0), members)
                if found is not None:
                    return found
        return None

    def _krawczyk(self, start: FloatArray, members: Any) -> BallArray | None:
        exact = self.exact
        assert exact is not None
        x = balls(start)
        if not len(members):
            return x
        for _ in range(40):
            entering, leaving = exact.flow(x)
            slope = exact.slope(x)[np.ix_(members, members)]
            step = _solve_balls(slope, _middle((entering - leaving)[members, 0]))
            if step is None:
                return None
            new = _middle(x[members] - step)
            done = all(abs(a - b) <= abs(a) * arb(2) ** (30 - ctx.prec) for a, b in zip(new, x[members], strict=True))
            x[members] = new
            if done:
                break
        entering, leaving = exact.flow(x)
        slope = exact.slope(x)[np.ix_(members, members)]
        step = _solve_balls(slope, (entering - leaving)[members, 0])
        if step is None:
            return None
        try:
            inverse = _middle(solve(_middle(slope), balls(np.eye(len(members)))))
        except ZeroDivisionError:
            return None
        for widen in (2, 64, 4096):
            radius = [
                abs(s).upper() * widen + abs(v) * arb(2) ** (24 - ctx.prec)
                for s, v in zip(step, x[members], strict=True)
            ]
            box = x.copy()
            around = np.array([arb(v.mid(), r.upper()) for v, r in zip(x[members], radius, strict=True)], dtype=object)
            box[members] = around
            slope = exact.slope(box)[np.ix_(members, members)]
            remainder = balls(np.eye(len(members))) - matmul(inverse, slope)
            moved = matmul(remainder, (around - x[members]).reshape(-1, 1))[:, 0]
            correction = matmul(inverse, (entering - leaving)[members])[:, 0]
            image = x[members] - correction + moved
            if all(bool(b.contains(i)) for b, i in zip(around, image, strict=True)):
                x[members] = image
                return x
        return None


def _middle(values: BallArray) -> BallArray:
    return balls([v.mid() for v in values.ravel()]).reshape(values.shape)


def _plus(constant: BallArray, rows: BallArray, x: BallArray) -> BallArray:
    """Return -(constant + rows x), skipping what is exactly 0, so that exact zeros stay exact."""
    out = np.empty(len(constant), dtype=object)
    for i, row in enumerate(rows):
        total = constant[i]
        for a, b in zip(row, x, strict=True):
            if not (is_zero(a) or is_zero(b)):
                total = total + a * b
        out[i] = -total
    return out


def _solve_balls(matrix: BallArray, right: BallArray) -> BallArray | None:
    """Return the solution, None where the matrix may be singular; a zero right-hand side gives exact zeros."""
    if len(right) == 1:
        return None if contains_zero(matrix[0, 0]) else np.array([right[0] / matrix[0, 0]], dtype=object)
    try:
        solved = solve(matrix, right.reshape(-1, 1)).reshape(-1)
    except ZeroDivisionError:
        return None
    if all(is_zero(r) for r in right):
        return balls(np.zeros(len(right)))
    return np.asarray(solved)


def _scan(net: Any) -> list[FloatArray]:
    """Return the zeros of one function of one unknown where it changes sign, from 1e-12 to 1e15."""
    from scipy.optimize import brentq  # a fifth of a second, which few models need

    grid = np.logspace(-12, 15, 2000)
    values = np.asarray(net(grid.reshape(1, -1)))[0]
    found = []

    def at(y: float) -> float:
        return float(np.asarray(net(np.array([[y]])))[0, 0])

    for k in range(len(grid) - 1):
        a, b = values[k], values[k + 1]
        if a == 0:
            found.append(np.array([grid[k]]))
        elif np.isfinite(a) and np.isfinite(b) and a * b < 0:
            # One value and many at once may differ in the last bit: at a root on the grid that is a sign.
            a, b = at(grid[k]), at(grid[k + 1])
            if a * b >= 0:
                found.append(np.array([grid[k] if abs(a) <= abs(b) else grid[k + 1]]))
                continue
            root = brentq(at, grid[k], grid[k + 1], xtol=1e-300)
            near = abs(at(float(root)))
            if near <= 1e-6 * max(abs(a), abs(b)):  # a pole changes sign too, and is no root
                found.append(np.array([float(root)]))
    return found


def _damped_newton(net: Any, slope: Any, y: FloatArray) -> FloatArray | None:
    """Return a zero near y, None where the iteration does not settle."""
    value = np.asarray(net(y.reshape(-1, 1)))[:, 0]
    for _ in range(80):
        if not np.all(np.isfinite(value)):
            return None
        try:
            step = np.linalg.solve(slope(y), value)
        except np.linalg.LinAlgError:
            return None
        factor = 1.0
        while factor > 1e-4:
            trial = y - factor * step
            new = np.asarray(net(trial.reshape(-1, 1)))[:, 0]
            if np.all(np.isfinite(new)) and np.linalg.norm(new) <= np.linalg.norm(value) * (1 - 0.1 * factor):
                break
            factor /= 2
        else:
            return y if np.max(np.abs(step)) <= 1e-9 * max(1e-300, np.max(np.abs(y))) else None
        y, value = trial, new
        if np.max(np.abs(step)) <= 1e-14 * max(1e-300, float(np.max(np.abs(y)))):
            return y
    return y if np.max(np.abs(step)) <= 1e-9 * max(1e-300, float(np.max(np.abs(y)))) else None


def _distinct(found: list[FloatArray]) -> list[FloatArray]:
    """Return the solutions without repetitions, and without those that are clearly negative."""
    out: list[FloatArray] = []
    for y in found:
        scale = max(1e-300, float(np.max(np.abs(y))))
        if np.any(y < -1e-9 * scale):
            continue
        clean = np.where(np.abs(y) < 1e-11 * scale, 0.0, y)
        if not any(np.allclose(clean, other, rtol=1e-6, atol=1e-9 * scale) for other in out):
            out.append(clean)
    return out
