"""Where the groups of a scenario sit in an array.

Every array of the derivation has one axis for each dimension of the scenario, in the order of the file, and one more, the
last, for whatever is done many times over (the columns of a matrix, a scan of starting points). An axis over which a
thing does not vary has length 1, so that numpy's broadcasting is the contract's rule "the same in every group".
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

from ngm.scenario.model import Scenario

__all__ = ["Array", "Space"]

Array = np.ndarray[Any, np.dtype[Any]]


@dataclass(frozen=True)
class Space:
    """The axes of a scenario: names and sizes of its dimensions."""

    dimensions: tuple[str, ...]
    sizes: tuple[int, ...]

    @classmethod
    def of(cls, scenario: Scenario) -> Space:
        """Return the axes of a scenario."""
        return cls(tuple(scenario.dimensions), tuple(len(d.groups) for d in scenario.dimensions.values()))

    @cached_property
    def _axis(self) -> dict[str, int]:
        return {name: k for k, name in enumerate(self.dimensions)}

    @cached_property
    def _layouts(self) -> dict[tuple[str, ...], tuple[tuple[int, ...], int, bool]]:
        return {}

    def _layout(self, by: tuple[str, ...]) -> tuple[tuple[int, ...], int, bool]:
        """Return the shape, the number of copies, and whether `by` is in the order of the file; asked for all the time."""
        if by not in self._layouts:
            shape = tuple(n if name in by else 1 for name, n in zip(self.dimensions, self.sizes, strict=True))
            self._layouts[by] = shape, math.prod(self.size(name) for name in by), by == self.ordered(set(by))
        return self._layouts[by]

    def axis(self, dimension: str) -> int:
        """Return the axis of a dimension."""
        return self._axis[dimension]

    def size(self, dimension: str) -> int:
        """Return the number of groups of a dimension."""
        return self.sizes[self._axis[dimension]]

    def ordered(self, dimensions: frozenset[str] | set[str]) -> tuple[str, ...]:
        """Return the dimensions in the order of the file."""
        return tuple(name for name in self.dimensions if name in dimensions)

    def shape(self, by: tuple[str, ...]) -> tuple[int, ...]:
        """Return the shape, without the last axis, of something that varies over `by`."""
        return self._layout(by)[0]

    def count(self, by: tuple[str, ...]) -> int:
        """Return the number of copies of something grouped `by` these dimensions."""
        return self._layout(by)[1]

    def spread(self, flat: Array, by: tuple[str, ...]) -> Array:
        """Return copies listed in the order of `by` (first axis) as an array over the space; the last axis is kept."""
        tail = flat.shape[1:] if flat.ndim > 1 else (1,)
        array = flat.reshape(*(self.size(name) for name in by), *tail)
        order = sorted(range(len(by)), key=lambda k: self._axis[by[k]])
        array = array.transpose(*order, len(by)) if by else array
        return array.reshape(*self.shape(by), *tail)

    def flatten(self, array: Array, by: tuple[str, ...]) -> Array:
        """Return an array over the space as copies in the order of `by` (first axis); the last axis is kept."""
        shape, count, in_order = self._layout(by)
        if in_order and array.shape[:-1] == shape:
            return array.reshape(count, array.shape[-1])
        full = np.broadcast_to(array, (*shape, array.shape[-1]))
        axes = [self._axis[name] for name in by]
        rest = [k for k in range(len(self.sizes)) if k not in axes]
        moved = full.transpose(*axes, *rest, len(self.sizes))
        return moved.reshape(count, array.shape[-1])

    def index_of(self, inner: tuple[str, ...], outer: tuple[str, ...]) -> Array:
        """Return, for each copy of something grouped by `outer`, the copy of `inner` (a part of it) that it belongs to."""
        flat = np.arange(self.count(inner)).reshape(-1, 1)
        array = np.broadcast_to(self.spread(flat, inner), (*self.shape(outer), 1))
        return self.flatten(np.ascontiguousarray(array), outer)[:, 0]
