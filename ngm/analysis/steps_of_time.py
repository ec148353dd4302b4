"""Discrete time: what is left of each type after a step, and the refusal of exits that add up to more than all there is.

T = I - V is the share of each type that is in each type a step later without new infection. V is the same difference of
losses and gains as in continuous time, so nothing else of the derivation changes.

Source: Allen & van den Driessche (2008) J. Difference Equ. Appl. 14:1127-1147 (from memory).
"""

from __future__ import annotations

from typing import Any

import numpy as np

from ngm.analysis.matrices import as_floats
from ngm.derivation.evaluate import Evaluator
from ngm.derivation.expand import arrow_blocks
from ngm.derivation.space import Array
from ngm.derivation.template import Template, flow_name
from ngm.engine.blocks import BlockMatrix, Diagonal
from ngm.errors import DerivationError, Problem

__all__ = ["MORE_THAN_ALL", "overdrawn", "refuse_overdrawn", "refuse_overdrawn_blocks"]

#: Exits that add up to more than this in doubles are more than all; in balls, what is proven to be more than 1.
MORE_THAN_ALL = 1 + 1e-12
MOST_TOLD = 5


def overdrawn(V: Array) -> list[tuple[int, int]]:
    """Return the entries (row, column) of T = I - V that are negative."""
    numbers = as_floats(V)
    out = []
    for i, j in np.argwhere(numbers > np.where(np.eye(len(numbers), dtype=bool), 1 - 1e-9, 0.0)):
        left: Any = (1 if i == j else 0) - V[i, j]
        if bool(left < 0) and (V.dtype == object or i != j or numbers[i, j] > MORE_THAN_ALL):
            out.append((int(i), int(j)))
    return out


def refuse_overdrawn(template: Template, evaluator: Evaluator, V: Array) -> None:
    """Refuse a model in discrete time in which an entry of T is negative.

    Raises
    ------
    DerivationError
        With the flows out of each such type, and what they add up to.
    """
    found = overdrawn(V)
    if not found:
        return
    numbers = as_floats(V)
    blocks = arrow_blocks(template, evaluator, template.arrows, template.infected)
    at = template.offsets(template.infected)
    problems = []
    for i, j in found[:MOST_TOLD]:
        ways = []
        for block in blocks:
            if block.leaves is None:
                continue
            copies = np.flatnonzero(np.asarray(block.leaves).ravel() == i)
            column = j - at[block.column]
            if 0 <= column < block.block.shape[1]:
                share = float(sum(as_floats(block.block)[copies, column]))
                if share != 0:
                    name = block.arrow.label
                    if block.arrow.number is not None:
                        name = flow_name(template.scenario, block.arrow.number)
                    ways.append((name, share, block.arrow.number))
        problems.append(_problem(template, i, j, ways, float(numbers[i, j])))
    raise DerivationError(problems)


def _problem(template: Template, i: int, j: int, ways: list[tuple[str, float, int | None]], total: float) -> Problem:
    step = template.scenario.time_unit
    named = " and ".join(f"{name} ({share:.6g})" for name, share, _ in ways)
    numbers = [number for *_, number in ways if number is not None]
    key: tuple[str | int, ...] = ("flow", numbers[-1] - 1, "rate") if numbers else ("flow",)
    where = f"flows out of {template.types[i]}"
    if i != j:
        message = (
            f"{named}: they take members out of {template.types[i]} because of {template.types[j]}, so that a share of T would "
            "be negative. In discrete time what leaves a compartment is a share of its own members."
        )
    else:
        message = (
            f"{named} add up to {total:.6g} of its members in one {step}, and no more than all of them can leave. Shorten the "
            "step, or give the shares that leave within a step: of a rate r that is 1 - exp(-r)."
        )
    return Problem(where, message, key=key)


def refuse_overdrawn_blocks(template: Template, V: BlockMatrix) -> None:
    """Refuse, as `refuse_overdrawn` does, a large model whose matrices are not written out.

    Raises
    ------
    DerivationError
        With the compartment and the flows out of it.
    """
    for part, name in enumerate(template.infected):
        for chain in V.blocks.get((part, part), []):
            if not chain.is_local:
                continue
            (factor,) = chain.factors
            assert isinstance(factor, Diagonal)
            most = float(np.max(chain.sign * factor.values))
            if most > MORE_THAN_ALL:
                flows = [n for n, flow in enumerate(template.scenario.flows, 1) if flow.source == name]
                named = " and ".join(flow_name(template.scenario, n) for n in flows)
                raise DerivationError(
                    Problem(
                        f"flows out of {name}",
                        f"{named or 'movements'} add up to {most:.6g} of its members in one {template.scenario.time_unit} in "
                        "some group, and no more than all of them can leave. Shorten the step, or give the shares that leave "
                        "within a step: of a rate r that is 1 - exp(-r).",
                        key=("flow", flows[-1] - 1, "rate") if flows else ("flow",),
                    )
                )
