"""Models whose matrices stand in the file: what is said of a K as given, and of a projected population.

Both take the same way to F, V, K and R0 as flows do (`ngm.scenario.stated`). Here is what is theirs: for a K there are no
flows, no time and no conditions to test; for a population F + T projects the stages from step to step, and its root and
vectors say whether it grows, in which structure, and what each stage is worth.
"""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np

from ngm.analysis.matrices import as_floats
from ngm.analysis.numbers import Numbers
from ngm.analysis.stated_entries import sizes_of
from ngm.engine.balls import nearest
from ngm.engine.linear import below_zero, identity
from ngm.engine.spectrum import Spectrum, spectrum
from ngm.results import Condition, Projected, Symbolic, Vector

__all__ = ["as_stated", "conditions_of", "projected", "symbols_as_stated"]


def as_stated(found: Numbers, out: dict[str, Any]) -> dict[str, Any]:
    """Return the fields of a solution as they are for matrices that stand in the file; `out` holds those of flows.

    A K as given keeps what follows from K alone; a projection has no infection-free state, and vectors of F + T besides.
    """
    scenario = found.scenario
    if scenario.given is not None:
        nothing = dict.fromkeys(
            ("infection_free", "F", "V", "K_large", "growth_rate", "growth_factor", "doubling_time")
        )
        sizes = sizes_of(scenario, found.point.evaluator)
        return {**out, **nothing, "form": "K as given", "conditions": (), "terms": (), "sizes": sizes}
    if scenario.projection is None:
        return out
    about = projected(found)
    out["warnings"] += about.notes
    return {**out, "form": "projection", "infection_free": None, "terms": (), "projected": about}


def symbols_as_stated(found: Numbers, symbolic: Symbolic) -> Symbolic:
    """Return the formulas that there are for matrices that stand in the file."""
    if found.scenario.given is not None:
        steps = tuple(step for step in symbolic.steps if step.kind == "class")
        return replace(symbolic, F=None, V=None, infection_free=None, steps=steps)
    return replace(symbolic, infection_free=None) if found.scenario.projection is not None else symbolic


def projected(found: Numbers) -> Projected:
    """Return what F + T says of a population: root, vectors, period, elasticities.

    With w and v the right and the left vector of A = F + T, the slope of its root by an entry is v_i w_j / (v.w), and the
    elasticity that times the entry over the root; those of births and transitions together add up to 1.

    References
    ----------
    Caswell (2001) Matrix Population Models, chapters 4 and 9 (from memory)
    """
    births, transitions = found.F, identity(len(found.V), found.V) - found.V
    stages = found.template.types
    if below_zero(births).any():
        return Projected(stages, None, None, None, None, None)
    spec = spectrum(births + transitions)
    notes: list[str] = []
    period = spec.cycle
    leading = [stages[int(k)] for c in spec.leading for k in spec.classes[c]]
    if spec.right is None or spec.left is None:
        notes.append(_why_no_vectors(spec))
        return Projected(stages, None, None, period, None, None, tuple(notes))
    if period is not None and period > 1:
        whole = "F + T" if spec.irreducible else f"F + T on {', '.join(leading[:6])}"
        notes.append(
            f"The structure keeps oscillating: {whole} has period {period}, so the shares of the stages never settle but "
            f"return after {period} steps. Growth factor and vectors hold for averages over {period} steps."
        )
    right, left = as_floats(spec.right), as_floats(spec.left)
    right, left = right / right.sum(), left / left[np.flatnonzero(left)[0]]
    root = nearest(spec.root)
    slopes = np.outer(left, right) / float(left @ right)
    shares = [_rows(as_floats(part) * slopes / root) for part in (births, transitions)]
    return Projected(stages, tuple(right.tolist()), tuple(left.tolist()), period, shares[0], shares[1], tuple(notes))


def _why_no_vectors(spec: Spectrum) -> str:
    if not spec.leading:
        return "The population is gone after a few steps whatever it starts with: there is no stable structure."
    return "Several classes of stages share the growth factor: the stable structure depends on the start, and none is shown."


def _rows(values: Any) -> tuple[Vector, ...]:
    return tuple(tuple(row) for row in values.tolist())


def conditions_of(found: Numbers) -> tuple[Condition, ...]:
    """Return A1 to A5 as they read for births F and transitions T of a population."""
    T = identity(len(found.V), found.V) - found.V
    negative = any(value < 0 for part in (found.F, T) for value in part.ravel().tolist())
    shares = as_floats(T).sum(axis=0)
    more = [name for name, share in zip(found.template.types, shares, strict=True) if share > 1 + 1e-12]
    first = (
        "An entry of births or transitions is negative."
        if negative
        else "No entry of births or transitions is negative."
    )
    second = (
        f"More than all members of {', '.join(more[:6])} are found a step later: the column of T adds up to more than 1."
        if more
        else "No more members of a stage are found a step later than there were: each column of T adds up to at most 1."
    )
    regular = found.broken is None
    fifth = "Without births every member is gone in the end: rho(T) < 1."
    return (
        Condition("A1", not negative, first),
        Condition("A2", not more, second),
        Condition("A3", True, "New members arrive in the stages by births only, as the file divides them."),
        Condition("A4", True, "Without members none are born: births and transitions are multiples of the stages."),
        Condition(
            "A5", regular, fifth if regular else f"Without births not all members are gone in the end: {found.no_R0}"
        ),
    )
