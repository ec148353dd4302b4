"""How the results were checked, by routes that the results themselves did not take."""

from __future__ import annotations

import math
from dataclasses import dataclass

from ngm.expression.parse import parse
from ngm.expression.tree import Name
from ngm.reporting.material import Material
from ngm.results import Matrix
from ngm.scenario.exact import NoValueError, Value, evaluate

__all__ = ["Checks", "check"]

#: Types up to which K_large V is multiplied out.
MOST_TYPES = 60


@dataclass(frozen=True, slots=True)
class Checks:
    """What the checks found; None where a check does not apply.

    product : float or None
        Largest difference between K_large V and F, as a share of the largest entry of F.
    root : float or None
        Difference between R0 and the largest modulus of the eigenvalues of K, found by another route.
    closed : float or None
        The closed form, evaluated at the values in force.
    sign : bool or None
        Whether R0 - 1 and the growth rate have the same sign.
    """

    product: float | None
    root: float | None
    closed: float | None
    sign: bool | None


def check(m: Material) -> Checks:
    """Check the results of a report against each other."""
    s = m.solution
    if s.R0 is None:
        return Checks(None, None, None, None)
    product = None
    if s.F and s.V and s.K_large and len(s.types) <= MOST_TYPES:
        product = _product(s.K_large, s.V, s.F)
    root = None
    if s.eigenvalues:
        root = abs(max(math.hypot(re, im) for re, im in s.eigenvalues) - s.R0)
    r = s.growth_rate
    near = r is None or abs(s.R0 - 1) < 1e-9 or abs(r) < 1e-12
    sign = None if r is None or near or not s.types_at_infection else (s.R0 > 1) == (r > 0)
    return Checks(product, root, _closed(m), sign)


def _product(K: Matrix, V: Matrix, F: Matrix) -> float:
    """Return the largest entry of K V - F over the largest of F: the definition of K, without an inverse."""
    size = max((abs(value) for row in F for value in row), default=0.0)
    if size == 0:
        return 0.0
    rows = range(len(F))
    return max(abs(sum(K[i][k] * V[k][j] for k in rows) - F[i][j]) for i in rows for j in rows) / size


def _closed(m: Material) -> float | None:
    if m.solution.closed_form is None:
        return None
    known: dict[str, Value] = {}
    for name, parameter in m.scenario.parameters.items():
        for item, value in zip(m.scenario.items(name, parameter.by), m.values.get(name, ()), strict=False):
            known[item] = value

    def lookup(name: Name) -> Value:
        if name.item not in known:
            raise NoValueError(f"{name.item} has no value", name.position)
        return known[name.item]

    try:
        found = evaluate(parse(m.solution.closed_form, items=True, matrices=None), lookup)
    except NoValueError:
        return None
    return float(found)
