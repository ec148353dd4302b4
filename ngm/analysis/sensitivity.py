"""Local sensitivity of R0 and of the growth rate: through the infection-free state, and through what follows a parameter.

A derivative is a difference quotient whose step is 2^-120 of the value, worked out with 400 bits: the numbers have some
100 correct digits, so that neither the step nor the rounding is seen in the sixteen that are returned. Nothing is
differentiated by hand, and whatever the numbers go through (a state solved for, a parameter that follows others) the
derivative goes through too.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from fractions import Fraction
from typing import Any

import numpy as np

from ngm.analysis.numbers import Numbers, decided_numbers
from ngm.analysis.point import MOST_EXACT
from ngm.analysis.steady import refuse_season
from ngm.engine.balls import nearest, precision, to_floats
from ngm.errors import DerivationError, NgmError, Problem
from ngm.expression.tree import Add, Number
from ngm.progress import advance, expect
from ngm.results_sensitivity import LocalIndex, Sensitivity
from ngm.scenario.model import Expression, Parameter, Scenario

__all__ = ["local_indices", "number_rows", "own_value", "own_values", "sensitivity"]

#: Bits of a difference quotient, and its step as a share of the value.
BITS = 400
STEP = Fraction(1, 2**120)
#: Rows (parameters times groups) up to which local indices are worked out for models past `MOST_EXACT` types.
MOST_LARGE_ROWS = 60
#: Types up to which a closed form is looked for, to be differentiated.
MOST_FOR_FORMULAS = 12
#: Seconds for the closed form that formulas are made from.
FORMULA_LIMIT = 4.0
LARGE_STEP = Fraction(1, 10**5)


def sensitivity(
    scenario: Scenario,
    *,
    draws: int | Mapping[str, Any] | None = None,
    seed: int = 0,
    formulas: bool | str = False,
    **more: Any,
) -> Sensitivity:
    """Return local indices of every parameter given as a number, and those of the entries of K.

    With `draws`, a number of draws or the draws themselves, also what the spread of the parameters does to R0
    (`ngm.uncertainty`, which gets `seed` and the other keywords). With `formulas`, derivative and elasticity as formulas too
    where R0 has a closed form: True derives it, a text is it.

    dR0/dp and (p/R0) dR0/dp, of the growth rate too; of an entry K[i, j]: v_i w_j / (v.w), v and w the left and right
    Perron vectors, and that times K[i, j]/R0.

    Raises
    ------
    ngm.DerivationError
        As `ngm.solve`; also where a state given as a plain number would leave its rest when a parameter changes.

    References
    ----------
    Caswell (2001) Matrix Population Models, chapter 9; Chitnis, Hyman & Cushing (2008) Bull. Math. Biol. 70:1272-1296
    (both from memory)
    """
    refuse_season(scenario, "sensitivity")
    found = decided_numbers(scenario)
    warnings = [*scenario.warnings, *found.point.infection_free.warnings]
    with precision(found.bits):
        R0, why = _root_with_slope(found)
        growth = found.growth
        entries = _entries(found) if R0 is not None and why is None else (None, None)
    if why is not None:
        warnings.append(why)
    local = local_indices(scenario, found, warnings) if why is None else _empty(scenario)
    if formulas and R0 is not None and why is None and len(found.template.types) <= MOST_FOR_FORMULAS:
        from ngm.analysis.slopes import with_formulas

        closed = _closed_form(scenario, warnings) if formulas is True else formulas
        local = local if closed is None else with_formulas(scenario, local, closed, R0)
    spread = None
    if draws is not None:
        from ngm.analysis.uncertainty import uncertainty

        spread = uncertainty(scenario, draws, seed=seed, **more)
        warnings += spread.warnings
    return Sensitivity(
        title=scenario.title,
        time_unit=scenario.time_unit,
        digest=scenario.digest,
        R0=R0,
        growth_rate=growth,
        types_at_infection=tuple(found.template.types[k] for k in found.at),
        local=local,
        entry_sensitivity=entries[0],
        entry_elasticity=entries[1],
        warnings=tuple(dict.fromkeys(warnings)),
        uncertainty=spread,
    )


def _closed_form(scenario: Scenario, warnings: list[str]) -> str | None:
    """Return R0 as a formula; None where it has none, or where the formulas took too long, which is told."""
    from ngm.analysis.solve import solve

    found = solve(scenario, limit=FORMULA_LIMIT)
    if found.closed_form is None:
        warnings += [warning for warning in found.warnings if "formulas" in warning]
    return found.closed_form


def _root_with_slope(found: Numbers) -> tuple[float | None, str | None]:
    """Return R0, and why there are no local indices where there are none."""
    if found.no_R0 is not None:
        return None, f"No local indices, since there is no R0: {found.no_R0}"
    if found.spectrum is None:
        return 0.0, "No local indices: no flow makes new infections near the infection-free state."
    if len(found.spectrum.leading) > 1:
        return nearest(found.spectrum.root), "No local indices: several classes attain R0, which has no slope there."
    return nearest(found.spectrum.root), None


def _entries(found: Numbers) -> tuple[Any, Any]:
    spec = found.spectrum
    if spec is None or spec.right is None or spec.left is None or not len(found.at) or found.K is None:
        return None, None
    right, left = _floats(spec.right), _floats(spec.left)
    R0, K = nearest(spec.root), to_floats(found.K)
    if R0 == 0:
        return None, None
    slopes = np.outer(left, right)
    shares = np.where(K != 0, slopes * K / R0, 0.0)
    return tuple(map(tuple, slopes.tolist())), tuple(map(tuple, shares.tolist()))


def _floats(values: Any) -> Any:
    return to_floats(values) if values.dtype == object else np.asarray(values, dtype=float)


def number_rows(scenario: Scenario) -> list[tuple[Parameter, int, str]]:
    """Return what gets a row: each parameter that is a number, group by group."""
    out = []
    for parameter in scenario.parameters.values():
        for k, item in enumerate(scenario.items(parameter.name, parameter.by)):
            if parameter.values[k if len(parameter.values) > 1 else 0].is_number:
                out.append((parameter, k, item))
    return out


def _empty(scenario: Scenario) -> tuple[LocalIndex, ...]:
    values = own_values(scenario)
    return tuple(LocalIndex(item, values[item], None, None, None, None) for _, _, item in number_rows(scenario))


def own_values(scenario: Scenario) -> dict[str, float]:
    """Return the value of each row in the parameter's own unit."""
    from ngm.derivation.evaluate import FLOATS
    from ngm.derivation.template import Template

    evaluator = Template(scenario).evaluator(FLOATS, {})
    out = {}
    for parameter, k, item in number_rows(scenario):
        tree = parameter.values[k if len(parameter.values) > 1 else 0].tree
        out[item] = float(evaluator.value(tree).ravel()[0])
    return out


def own_value(scenario: Scenario, parameter: str) -> float | None:
    """Return the value of a parameter in its own unit (of the first group); None where it follows others."""
    for owner, _, item in number_rows(scenario):
        if owner.name == parameter:
            return own_values(scenario)[item]
    return None


def moved(scenario: Scenario, parameter: Parameter, place: int, step: Fraction) -> Scenario:
    """Return the scenario with one number moved by a step, in the parameter's own unit."""
    values = list(parameter.values)
    tree = values[place].tree
    if isinstance(tree, Number):
        new: Any = Number(tree.value + step)
    else:
        new = Add(((1, tree), (1, Number(step))))
    values[place] = Expression("", new)
    return replace(
        scenario, parameters={**scenario.parameters, parameter.name: replace(parameter, values=tuple(values))}
    )


def local_indices(scenario: Scenario, base: Numbers, warnings: list[str]) -> tuple[LocalIndex, ...]:
    """Return the local indices at the scenario's values; `warnings` takes what is to be said of them."""
    exact = len(base.template.types) <= MOST_EXACT
    values, rows = own_values(scenario), number_rows(scenario)
    if not exact and len(rows) > MOST_LARGE_ROWS:
        warnings.append(
            f"{len(base.template.types)} types and {len(rows)} values: local indices are worked out for parameters that are "
            "the same in every group."
        )
        rows = [row for row in rows if not row[0].by]
    bits, share = (BITS, STEP) if exact else (base.bits, LARGE_STEP)
    out = []
    expect(len(rows))
    with precision(bits):
        middle = Numbers(scenario)
        for parameter, place, item in rows:
            advance()
            value = values[item]
            step = (Fraction(value) if value != 0 else Fraction(1)) * share
            try:
                slopes = _quotient(scenario, middle, parameter, place, step, exact)
            except NgmError as error:
                if not scenario.discrete:
                    raise _told(error, item) from None
                # Where all leave in a step, more cannot: the slope is that towards less.
                try:
                    slopes = _quotient(scenario, middle, parameter, place, -step, exact)
                except NgmError:
                    raise _told(error, item) from None
            out.append(_index(item, value, middle, slopes))
    return tuple(out)


def _quotient(
    scenario: Scenario, middle: Numbers, parameter: Parameter, place: int, step: Fraction, exact: bool
) -> tuple[float | None, float | None]:
    above = Numbers(moved(scenario, parameter, place, step))
    _check_rest(middle, above, step)
    assert middle.spectrum is not None
    if above.no_R0 is not None or above.spectrum is None:
        return None, None
    low, width = middle, step
    if not exact:
        low, width = Numbers(moved(scenario, parameter, place, -step)), 2 * step
    assert low.spectrum is not None
    by = Fraction(1) / width
    dR = (above.spectrum.root - low.spectrum.root) * by.numerator / by.denominator
    if above.growth_ball is None or low.growth_ball is None:
        return nearest_or_middle(dR, exact), None
    dr = (above.growth_ball - low.growth_ball) * by.numerator / by.denominator
    return nearest_or_middle(dR, exact), nearest_or_middle(dr, exact)


def nearest_or_middle(value: Any, exact: bool) -> float:
    """Return the double nearest to a quotient; of one whose terms were doubles, the middle of its ball."""
    return nearest(value) if exact else float(value.mid())


def _index(item: str, value: float, middle: Numbers, slopes: tuple[float | None, float | None]) -> LocalIndex:
    dR, dr = slopes
    assert middle.spectrum is not None
    R0, r = nearest(middle.spectrum.root), middle.growth
    elasticity = None if dR is None or R0 == 0 else dR * value / R0
    growth_elasticity = None if dr is None or not r else dr * value / r
    return LocalIndex(item, value, dR, elasticity, dr, growth_elasticity)


def _check_rest(middle: Numbers, above: Numbers, step: Fraction) -> None:
    """Refuse where a state given as a plain number is moved off rest by the step, however small it is."""
    before, after = middle.point.infection_free.net_flows, above.point.infection_free.net_flows
    tolerance = float(abs(step)) * 1e-6
    for label, (net, gross) in after.items():
        old = before[label][0]
        change = abs(net - old)
        if gross > 0 and float(change.lower() if hasattr(change, "lower") else change) > tolerance * gross:
            name = label.split("[")[0]
            raise DerivationError(
                Problem(
                    f"infection_free.{name}",
                    f"{label} is given as a number that leaves its rest when a parameter changes. Write it as an expression in "
                    f"the parameters, or leave {name} out and it is solved for.",
                    key=("infection_free", name),
                )
            )


def _told(error: NgmError, item: str) -> DerivationError:
    return DerivationError([replace(p, where=f"sensitivity to {item}: {p.where}") for p in error.problems])
