"""A trace as a function of arrays: one draw in each place, every operation done for all draws at once.

A `Program` is plain data (it can be sent to another process). Nothing in it is text to be executed: it is a list of
operations by name, done one after the other by numpy. Every operation acts draw by draw, so a draw's result does not
depend on which draws it is computed with.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from ngm.derivation.tracing import Trace, Traced
from ngm.expression.parse import parse
from ngm.expression.tree import Add, Apply, Call, Multiply, Name, Negate, Node, Number, Power, Total, fold

__all__ = ["LANES", "Program", "compiled", "formulas"]

FloatArray = npt.NDArray[np.float64]

#: Arrays have a multiple of this many places: numpy does what is left over at the end of an array by other instructions,
#: and an exponential may then differ in its last digit.
LANES = 64
#: Doubles that one round of operations may use: what a processor keeps close at hand.
WORKING_SET = 1 << 17
MOST_WIDE, LEAST_WIDE = 16384, 128


def _step(values: FloatArray, out: FloatArray) -> None:
    np.sign(values, out)
    tie = out == 0
    out += 1
    out *= 0.5
    out[tie] = np.nan


_OPERATIONS: dict[str, Any] = {
    "add": np.add,
    "subtract": np.subtract,
    "multiply": np.multiply,
    "divide": np.divide,
    "power": np.power,
    "max": np.maximum,
    "min": np.minimum,
    "negative": np.negative,
    "exp": np.exp,
    "log": np.log,
    "sqrt": np.sqrt,
    "step": _step,
}
_OF_ONE = frozenset({"negative", "exp", "log", "sqrt", "step"})


@dataclass(frozen=True)
class Program:
    """A straight-line program.

    Attributes
    ----------
    inputs : int
        How many arrays it takes.
    constants : tuple of float
    steps : tuple of (str, int, int, int)
        Operation, place of the result, places of its operands (-1: none). Places count inputs, constants and then
        `slots` working arrays, which are used again when what they hold is needed no more.
    outputs : tuple of int
        Places of the results.
    """

    inputs: int
    constants: tuple[float, ...]
    slots: int
    steps: tuple[tuple[str, int, int, int], ...]
    outputs: tuple[int, ...]

    @property
    def width(self) -> int:
        """How many draws to do at a time."""
        wide = WORKING_SET // max(1, min(self.slots + self.inputs, 64))
        return max(LEAST_WIDE, min(MOST_WIDE, wide // LANES * LANES))

    def run(self, inputs: Sequence[FloatArray]) -> FloatArray:
        """Return the outputs, (len(outputs), N), for inputs of N draws each; what has no value is nan or infinite.

        Parameters
        ----------
        inputs : sequence of (N,) arrays
            Contiguous.
        """
        return self.screened(inputs, ())[0]

    def screened(self, inputs: Sequence[FloatArray], extremes: Sequence[str]) -> tuple[FloatArray, list[float]]:
        """Return the first outputs, and of each of the last ones its largest or smallest value alone.

        Parameters
        ----------
        inputs : sequence of (N,) arrays
            Contiguous.
        extremes : sequence of {"max", "min"}
            One for each of the last outputs: these arrays are never written out. The value is nan where one of N is.

        Returns
        -------
        out : (len(outputs) - len(extremes), N) array
        worst : list of float
        """
        if len(inputs) != self.inputs:
            raise ValueError(f"{len(inputs)} inputs for a program of {self.inputs}")
        size = len(inputs[0]) if inputs else 0
        kept = len(self.outputs) - len(extremes)
        out = np.empty((kept, size))
        width = min(self.width, -(-size // LANES) * LANES)
        work = np.empty((self.slots, width))
        spare = np.empty((self.inputs, width))
        steps = [(_OPERATIONS[name], at, a, b) for name, at, a, b in self.steps]
        reductions = [np.maximum.reduce if kind == "max" else np.minimum.reduce for kind in extremes]
        seen: list[list[float]] = [[] for _ in extremes]
        with np.errstate(all="ignore"):
            for start in range(0, size, width):
                stop = min(start + width, size)
                part = out[:, start:stop]
                values = self._round(steps, [array[start:stop] for array in inputs], work, spare, part)
                n = stop - start
                for found, reduce, at in zip(seen, reductions, self.outputs[kept:], strict=True):
                    value = values[at]
                    found.append(value if isinstance(value, float) else reduce(value[:n]))
            worst = [float(reduce(found)) if found else np.nan for found, reduce in zip(seen, reductions, strict=True)]
        return out, worst

    def _round(
        self, steps: list[Any], inputs: list[FloatArray], work: FloatArray, spare: FloatArray, out: FloatArray
    ) -> list[Any]:
        """Run the steps for one width of draws, put the first outputs into `out`, and return the value of every place."""
        n = out.shape[1]
        full = -(-n // LANES) * LANES
        if full != n:
            for row, array in zip(spare, inputs, strict=True):
                row[:n], row[n:full] = array, array[-1]
            inputs = [row[:full] for row in spare]
        values: list[Any] = [*inputs, *self.constants, *(row[:full] for row in work)]
        for operation, at, a, b in steps:
            if b < 0:
                operation(values[a], out=values[at])
            else:
                operation(values[a], values[b], out=values[at])
        for row, at in zip(out, self.outputs, strict=False):
            row[:] = values[at] if isinstance(values[at], float) else values[at][:n]
        return values


def compiled(trace: Trace, outputs: Sequence[Traced]) -> Program:
    """Return the program that computes these numbers, and nothing that they do not need."""
    needed = {number.place for number in outputs}
    last: dict[int, int] = {}
    order: list[int] = []
    for place in range(len(trace.operations) - 1, -1, -1):
        if place not in needed:
            continue
        name, a, b = trace.operations[place]
        if name in ("input", "constant"):
            continue
        order.append(place)
        for operand in (a,) if name in _OF_ONE else (a, b):
            needed.add(operand)
            last.setdefault(operand, place)
    order.reverse()
    constants = sorted(place for place in needed if trace.operations[place][0] == "constant")
    n = len(trace.inputs)
    where = {number.place: k for k, number in enumerate(trace.inputs)}
    where |= {place: n + k for k, place in enumerate(constants)}
    first = n + len(constants)
    kept = {number.place for number in outputs}
    free: list[int] = []
    slots = 0
    steps = []
    for place in order:
        name, a, b = trace.operations[place]
        operands = (a,) if name in _OF_ONE else (a, b)
        sources = [where[operand] for operand in operands]
        # An array may be overwritten by the operation that reads it last.
        free += [
            where[operand]
            for operand in dict.fromkeys(operands)
            if last[operand] == place and operand not in kept and where[operand] >= first
        ]
        if free and name != "step":
            at = free.pop()
        else:
            at = first + slots
            slots += 1
        where[place] = at
        steps.append((name, at, sources[0], sources[1] if len(sources) > 1 else -1))
    values = tuple(float(trace.numbers[place].value or 0.0) for place in constants)
    return Program(n, values, slots, tuple(steps), tuple(where[number.place] for number in outputs))


def formulas(texts: Sequence[str], names: Sequence[str], abbreviations: Mapping[str, str] | None = None) -> Program:
    """Return formulas in the expression syntax as one program of the arrays of `names`.

    Parameters
    ----------
    texts : sequence of str
        As results write them: ``beta*sigma/(sigma + mu)``; names may carry groups, ``sigma[65+]``.
    names : sequence of str
        The inputs, in order.
    abbreviations : mapping of str to str
        Names that stand for formulas, each after those that it uses.

    Raises
    ------
    KeyError
        A name is neither an input nor an abbreviation.
    ExpressionError
        A text cannot be read.
    ValueError
        A formula holds a matrix or a sum over groups.

    Examples
    --------
    >>> formulas(["beta/gamma"], ["beta", "gamma"]).run([np.array([0.4, 0.6]), np.array([0.2, 0.2])]).round(12).tolist()
    [[2.0, 3.0]]
    """
    trace = Trace()
    known = {name: trace.input(nonnegative=False) for name in names}

    def read(text: str) -> Traced:
        return fold(parse(text, items=True), lambda node, parts: _combined(trace, known, node, parts))

    for name, text in (abbreviations or {}).items():
        known[name] = read(text)
    return compiled(trace, [read(text) for text in texts])


def _combined(trace: Trace, known: Mapping[str, Traced], node: Node, parts: list[Traced]) -> Traced:
    match node:
        case Number(value=value):
            return trace.constant(float(value))
        case Name():
            return known[node.item]
        case Add(terms=terms):
            total = parts[0]
            for (sign, _), part in zip(terms[1:], parts[1:], strict=True):
                total = total + part if sign > 0 else total - part
            return total
        case Multiply(factors=factors):
            total = parts[0]
            for (sign, _), part in zip(factors[1:], parts[1:], strict=True):
                total = total * part if sign > 0 else total / part
            return total
        case Negate():
            return 0.0 - parts[0]
        case Power():
            return trace.power(*parts)
        case Call(function=function):
            return trace.call(function, tuple(parts))
        case Total() | Apply():
            raise ValueError("a formula over draws has no matrices and no sums over groups")
