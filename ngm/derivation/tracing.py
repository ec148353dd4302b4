"""Numbers that remember how they were computed: the derivation run once, to be repeated for many draws.

A `Traced` is a number or the place of an operation in a list. Handed to the derivation as its arithmetic, it leaves behind
the straight-line program that gives F, V and K from the parameters: equal operations are noted once, numbers are folded,
and what is 0 by structure disappears. `ngm.derivation.compile` turns the list into a function of arrays.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np

from ngm.derivation.space import Array

__all__ = ["Guard", "Trace", "Traced", "TracedArithmetic"]

#: Whole powers up to this one are written as products.
MOST_MULTIPLIED = 4


@dataclass(frozen=True, slots=True)
class Guard:
    """What must hold of a traced number at every draw, found by a comparison while tracing.

    `strict`: above 0; else not below it. `why`: what is to be said where it does not hold.
    """

    number: Traced
    strict: bool
    why: str


class Traced:
    """One number of a trace.

    Attributes
    ----------
    place : int
        Its place in the trace's list.
    value : float or None
        The number, where it depends on no input.
    nonnegative : bool
        True where no inputs can make it negative: it is put together without a subtraction.
    curved : bool
        True where it depends on an unknown state.
    """

    __slots__ = ("curved", "nonnegative", "place", "trace", "value")

    def __init__(self, trace: Trace, place: int, value: float | None, nonnegative: bool, curved: bool) -> None:
        self.trace, self.place, self.value = trace, place, value
        self.nonnegative, self.curved = nonnegative, curved

    def _of(self, other: object) -> Traced:
        return other if isinstance(other, Traced) else self.trace.constant(float(other))  # type: ignore[arg-type]

    def __add__(self, other: object) -> Traced:
        return self.trace.add(self, self._of(other))

    __radd__ = __add__

    def __sub__(self, other: object) -> Traced:
        return self.trace.subtract(self, self._of(other))

    def __rsub__(self, other: object) -> Traced:
        return self.trace.subtract(self._of(other), self)

    def __mul__(self, other: object) -> Traced:
        return self.trace.multiply(self, self._of(other))

    __rmul__ = __mul__

    def __truediv__(self, other: object) -> Traced:
        return self.trace.divide(self, self._of(other))

    def __rtruediv__(self, other: object) -> Traced:
        return self.trace.divide(self._of(other), self)

    def __eq__(self, other: object) -> bool:
        if isinstance(other, Traced):
            return self is other
        return self.value is not None and self.value == other

    def __ne__(self, other: object) -> bool:
        return not self == other

    def __hash__(self) -> int:
        return self.place

    def __gt__(self, other: object) -> bool:
        """Whether it is above 0; for an unknown number yes, and a guard is left."""
        self._against_zero(other)
        if self.value is None:
            self.trace.guards.append(Guard(self, True, self.trace.doing))
            return True
        return self.value > 0

    def __lt__(self, other: object) -> bool:
        """Whether it is below 0; for an unknown number no, and a guard is left unless it cannot be."""
        self._against_zero(other)
        if self.value is None:
            if not self.nonnegative:
                self.trace.guards.append(Guard(self, False, self.trace.doing))
            return False
        return self.value < 0

    def _against_zero(self, other: object) -> None:
        if other != 0:
            raise TypeError("a traced number can only be compared with 0")


class Trace:
    """The list of operations, and the ways to add to it.

    Attributes
    ----------
    operations : list of (str, int, int)
        Name and operands by place; an input has its number in place of the first, a constant has none.
    inputs : list of Traced
    guards : list of Guard
    doing : str
        What a comparison that comes up is about.
    """

    def __init__(self) -> None:
        self.operations: list[tuple[str, int, int]] = []
        self.numbers: list[Traced] = []
        self.inputs: list[Traced] = []
        self.guards: list[Guard] = []
        self.doing = ""
        self._known: dict[tuple[str, int, int], Traced] = {}
        self._constants: dict[tuple[float, float], Traced] = {}

    def input(self, *, nonnegative: bool, curved: bool = False) -> Traced:
        """Return a new input."""
        number = self._append(("input", len(self.inputs), 0), None, nonnegative, curved)
        self.inputs.append(number)
        return number

    def constant(self, value: float) -> Traced:
        """Return a constant; equal ones are one."""
        key = (value, math.copysign(1.0, value)) if value == value else (math.inf, math.nan)
        if key not in self._constants:
            self._constants[key] = self._append(("constant", 0, 0), value, value >= 0, False)
        return self._constants[key]

    def _append(self, operation: tuple[str, int, int], value: float | None, nonnegative: bool, curved: bool) -> Traced:
        number = Traced(self, len(self.operations), value, nonnegative, curved)
        self.operations.append(operation)
        self.numbers.append(number)
        return number

    def _note(self, name: str, a: Traced, b: Traced | None, nonnegative: bool) -> Traced:
        key = (name, a.place, -1 if b is None else b.place)
        found = self._known.get(key)
        if found is None:
            curved = a.curved or (b is not None and b.curved)
            found = self._known[key] = self._append(key, None, nonnegative, curved)
        return found

    # --- arithmetic ---------------------------------------------------------------------------------------------------

    def add(self, a: Traced, b: Traced) -> Traced:
        """Return a + b."""
        if a.value is not None:
            if b.value is not None:
                return self.constant(a.value + b.value)
            if a.value == 0:
                return b
        elif b.value == 0:
            return a
        if b.place < a.place:
            a, b = b, a
        return self._note("add", a, b, a.nonnegative and b.nonnegative)

    def subtract(self, a: Traced, b: Traced) -> Traced:
        """Return a - b."""
        if a.value is not None and b.value is not None:
            return self.constant(a.value - b.value)
        if b.value == 0:
            return a
        if a is b:
            return self.constant(0.0)
        if a.value == 0:
            return self._note("negative", b, None, False)
        return self._note("subtract", a, b, False)

    def multiply(self, a: Traced, b: Traced) -> Traced:
        """Return a * b; 0 where one factor is an exact 0."""
        if a.value is not None and b.value is not None:
            return self.constant(a.value * b.value)
        if a.value == 0 or b.value == 0:
            return self.constant(0.0)
        if a.value == 1:
            return b
        if b.value == 1:
            return a
        if b.place < a.place:
            a, b = b, a
        return self._note("multiply", a, b, (a.nonnegative and b.nonnegative) or a is b)

    def divide(self, a: Traced, b: Traced) -> Traced:
        """Return a / b; a constant that is no number where b is an exact 0."""
        if b.value is not None:
            if b.value == 0:
                return self.constant(math.nan)
            if a.value is not None:
                return self.constant(a.value / b.value)
            if b.value == 1:
                return a
        elif a.value == 0:
            return self.constant(0.0)
        return self._note("divide", a, b, a.nonnegative and b.nonnegative)

    def power(self, a: Traced, b: Traced) -> Traced:
        """Return a to the power of b; small whole powers as products."""
        if a.value is not None and b.value is not None:
            with np.errstate(all="ignore"):
                return self.constant(float(np.float64(a.value) ** np.float64(b.value)))
        if b.value is not None:
            if b.value == 0.5:
                return self._note("sqrt", a, None, True)
            whole = int(b.value) if b.value == int(b.value) and abs(b.value) <= MOST_MULTIPLIED else None
            if whole is not None:
                out = self.constant(1.0)
                for _ in range(abs(whole)):
                    out = self.multiply(out, a)
                return out if whole >= 0 else self.divide(self.constant(1.0), out)
        return self._note("power", a, b, a.nonnegative)

    def call(self, function: str, arguments: tuple[Traced, ...]) -> Traced:
        """Return exp, log, sqrt, max or min."""
        first = arguments[0]
        if all(argument.value is not None for argument in arguments):
            with np.errstate(all="ignore"):
                values = [np.float64(argument.value or 0.0) for argument in arguments]
                ufunc = {"exp": np.exp, "log": np.log, "sqrt": np.sqrt, "max": np.maximum, "min": np.minimum}[function]
                return self.constant(float(ufunc(*values)))
        if function in ("max", "min"):
            second = arguments[1]
            signs = (first.nonnegative, second.nonnegative)
            return self._note(function, first, second, any(signs) if function == "max" else all(signs))
        return self._note(function, first, None, function != "log")

    def step(self, a: Traced) -> Traced:
        """Return 1 where a is above 0, 0 where it is below, and no number at 0."""
        if a.value is not None:
            return self.constant(math.nan if a.value == 0 else float(a.value > 0))
        return self._note("step", a, None, True)


class TracedArithmetic:
    """A trace's numbers, in the shape in which the derivation asks for arithmetic (see `evaluate.Algebra`)."""

    dtype: type = object

    def __init__(self, trace: Trace) -> None:
        self.trace = trace
        self._power = np.frompyfunc(trace.power, 2, 1)

    def number(self, value: Fraction) -> object:
        """Return a constant."""
        return self.trace.constant(float(value))

    def add(self, a: Array, b: Array) -> Array:
        """Return a + b."""
        return np.asarray(a + b)

    def subtract(self, a: Array, b: Array) -> Array:
        """Return a - b."""
        return np.asarray(a - b)

    def multiply(self, a: Array, b: Array) -> Array:
        """Return a * b."""
        return np.asarray(a * b)

    def divide(self, a: Array, b: Array) -> Array:
        """Return a / b."""
        return np.asarray(a / b)

    def power(self, a: Array, b: Array) -> Array:
        """Return a to the power of b."""
        return np.asarray(self._power(a, b))

    def call(self, function: str, arguments: tuple[Array, ...]) -> Array:
        """Return exp, log, sqrt, max or min."""
        one: Callable[..., Traced] = lambda *parts: self.trace.call(function, parts)  # noqa: E731
        return np.asarray(np.frompyfunc(one, len(arguments), 1)(*arguments))

    def matmul(self, a: Array, b: Array) -> Array:
        """Return the matrix product, sums of what is not 0 only."""
        zero = self.trace.constant(0.0)
        out: Array = np.empty((a.shape[0], b.shape[1]), dtype=object)
        rows: list[list[Any]] = a.tolist()
        for column, entries in enumerate(b.T.tolist()):
            there = [(k, entry) for k, entry in enumerate(entries) if entry.value != 0]
            for i, row in enumerate(rows):
                total = zero
                for k, entry in there:
                    if row[k].value != 0:
                        total = total + row[k] * entry
                out[i, column] = total
        return out
