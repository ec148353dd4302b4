"""The derivation and the numbers of a scenario at its values."""

from __future__ import annotations

from collections.abc import Callable
from contextvars import copy_context
from threading import Thread
from typing import Any

import numpy as np

from ngm.analysis.caution import below_one_caution
from ngm.analysis.effective import effective
from ngm.analysis.numbers import Numbers, decided_numbers
from ngm.analysis.point import MOST_WRITTEN
from ngm.analysis.season_results import solution_over_the_year, without_season
from ngm.analysis.stated import as_stated, conditions_of, symbols_as_stated
from ngm.analysis.stated_entries import is_stated, nothing_new
from ngm.derivation.conditions import fifth_condition, first_conditions
from ngm.derivation.outline import outline
from ngm.derivation.terms import entry_terms
from ngm.engine.balls import nearest, outward, precision, to_floats
from ngm.engine.growth import doubling_time
from ngm.engine.spectrum import Spectrum
from ngm.results import Class, Matrix, Solution, Structure, Symbolic, Vector
from ngm.scenario.model import Scenario
from ngm.worker import LIMIT, WorkerFailed, symbols, warm

__all__ = ["Begun", "begin", "nearest_of", "solve"]

#: Formulas, and what is to be said where there are none.
Asked = tuple[Symbolic, list[str]]

#: Types at infection up to which the eigenvalues of K are listed.
MOST_EIGENVALUES = 500


def solve(scenario: Scenario, *, limit: float = LIMIT) -> Solution:
    """Return the derivation and the numbers of a scenario: F, V, K, R0 with bounds, structure, growth.

    Parameters
    ----------
    scenario : Scenario
        As `ngm.load` or `ngm.loads` gives it.
    limit : float
        Seconds for the formulas; past them the numbers come alone, with a warning. 0: no formulas.

    Raises
    ------
    ngm.DerivationError
        There is no infection-free state (or several), no transmission, or V is singular by structure.

    References
    ----------
    Diekmann, Heesterbeek & Roberts (2010) J. R. Soc. Interface 7:873-885; van den Driessche & Watmough (2002) Math.
    Biosci. 180:29-48
    """
    return _begun(scenario, limit).finished()


def begin(scenario: Scenario, *, limit: float = LIMIT) -> Begun:
    """Return the numbers of `solve` while its formulas are still being worked out beside; parameters as of `solve`."""
    begun = _begun(scenario, limit)
    begun.go_on()
    return begun


class Begun:
    """A solution whose numbers are there and whose formulas may not be yet."""

    def __init__(self, found: Numbers, out: dict[str, Any], formulas: Callable[[], Asked]) -> None:
        self._found, self._out, self._formulas = found, out, formulas
        self._thread: Thread | None = None
        self._answer: Asked | None = None

    def go_on(self) -> None:
        """Wait for the formulas in a thread: it computes nothing itself, so the precision of balls is nobody else's."""
        context = copy_context()  # whoever may stop the formulas still may
        self._thread = Thread(target=lambda: context.run(self._ask), daemon=True)
        self._thread.start()

    def _ask(self) -> None:
        self._answer = self._formulas()

    @property
    def numbers(self) -> Solution:
        """The solution without formulas."""
        out = {**self._out, "warnings": tuple(dict.fromkeys(self._out["warnings"]))}
        return Solution(**out, closed_form=None, symbolic=Symbolic())

    def finished(self) -> Solution:
        """Return the whole solution, once its formulas are there."""
        if self._thread is not None:
            self._thread.join()
        if self._answer is None:
            self._ask()
        assert self._answer is not None
        found, out = self._found, self._out
        symbolic = symbols_as_stated(found, self._answer[0])
        warnings = tuple(dict.fromkeys([*out["warnings"], *self._answer[1]]))
        closed = symbolic.closed_form if out["R0"] is not None and out.get("season") is None else None
        if closed is not None and found.point.infection_free.among > 1:
            warnings = (
                *warnings,
                "The closed form holds where the infection-free state is the one found here: of several states at rest it "
                "is the one that is stable at these values.",
            )
        return Solution(**{**out, "warnings": warnings}, closed_form=closed, symbolic=symbolic)


def _begun(scenario: Scenario, limit: float) -> Begun:
    if limit > 0:
        warm()  # the child gets ready while the numbers are computed
    found = decided_numbers(scenario)
    with precision(found.bits):
        out = solution_over_the_year(found, as_stated(found, _numbers(found)))
        if out["R0"] is not None and 0 < out["R0"] < 1:
            out["warnings"] += below_one_caution(found)
        out["effective"] = effective(found)
        if out.get("season") is not None:
            out["effective"] = without_season(out["effective"])
        if out["effective"] is not None and out["effective"].no_R is not None:
            out["warnings"].append(f"No effective number: {out['effective'].no_R}")
    return Begun(found, out, _symbols(found, limit))


def _numbers(found: Numbers) -> dict[str, Any]:
    scenario, template, point = found.scenario, found.template, found.point
    small = found.point.exact and len(template.types) <= MOST_WRITTEN
    warnings = [*scenario.warnings, *point.infection_free.warnings, *point.reciprocity_warnings()]
    if not small:
        warnings.append(
            f"{len(template.types)} types: matrices are not written out, and the bounds are those of the matrix as rounded."
        )
    if len(found.at) == 0:
        warnings.append(nothing_new(scenario))
    r = found.growth
    doubling = None if r is None else doubling_time(r)
    spec = found.spectrum
    R0: float | None = None
    bounds: tuple[float, float] | None = None
    per_cycle: float | None = None
    structure: Structure | None = None
    right = left = None
    if found.no_R0 is None:
        if spec is None:
            R0, bounds, per_cycle = 0.0, (0.0, 0.0), 0.0
            structure = Structure(False, None, ())
        else:
            bounds = outward(spec.root)
            R0 = min(max(nearest(spec.root), bounds[0]), bounds[1])
            if R0 == 0:
                per_cycle = 0.0
            elif spec.cycle is not None:
                per_cycle = nearest(spec.root**spec.cycle)
            right, left = _vector(spec.right), _vector(spec.left)
            structure = _structure(found, spec)
            if len(spec.leading) > 1 and R0 > 0:
                warnings.append("Several classes attain R0: the stable distribution is not unique.")
    conditions = _conditions(found, warnings)
    eigenvalues: tuple[tuple[float, float], ...] = ()
    if found.K is not None and 0 < len(found.at) <= MOST_EIGENVALUES:
        values = np.linalg.eigvals(_plain(found.K))
        order = np.argsort(-np.abs(values), kind="stable")
        eigenvalues = tuple((float(values[k].real), float(values[k].imag)) for k in order)
    if found.no_R0 is not None:
        warnings.append(f"No R0: {found.no_R0}")
    return {
        "title": scenario.title,
        "time_unit": scenario.time_unit,
        "digest": scenario.digest,
        "types": template.types,
        "type_labels": {
            item: scenario.compartments[name].label or name
            for name in template.infected
            for item in scenario.items(name, template.by(name))
        },
        "infection_free": _state(found),
        "residual": point.infection_free.residual,
        "F": _matrix(found.F) if small else None,
        "V": _matrix(found.V) if small else None,
        "K_large": _matrix(found.K_large) if small and found.K_large is not None else None,
        "types_at_infection": tuple(template.types[k] for k in found.at),
        "K": _matrix(found.K) if small and found.K is not None else None,
        "R0": R0,
        "no_R0": found.no_R0,
        "R0_bounds": bounds,
        "per_cycle": per_cycle,
        "right": right,
        "left": left,
        "structure": structure,
        "growth_rate": r,
        "growth_factor": found.factor,
        "discrete": scenario.discrete,
        "doubling_time": None if doubling is None else nearest_of(doubling),
        "conditions": tuple(conditions),
        "warnings": warnings,
        "eigenvalues": eigenvalues,
        "terms": () if is_stated(scenario) else entry_terms(template),
    }


def _conditions(found: Numbers, warnings: list[str]) -> list[Any]:
    if found.scenario.given is not None:
        return []  # there are no flows that they could be tested on
    if found.scenario.projection is not None:
        return list(conditions_of(found))
    conditions = first_conditions(found.template, found.plain_matrices)
    regular = found.broken is None
    stable = found.point.is_stable_without_infection()
    conditions.append(fifth_condition(stable, regular, found.no_R0, discrete=found.scenario.discrete))
    for condition in conditions:
        if not condition.holds:
            warnings.append(f"{condition.name} does not hold: {condition.detail}")
    return conditions


def _structure(found: Numbers, spec: Spectrum) -> Structure:
    types = [found.template.types[k] for k in found.at]
    out = []
    for number, (members, root, period) in enumerate(zip(spec.classes, spec.roots, spec.periods, strict=True)):
        rate = None if period is None else found.class_growth(number)
        out.append(
            Class(
                tuple(types[int(k)] for k in members),
                nearest(root),
                period,
                rate,
            )
        )
    return Structure(spec.irreducible, spec.period, tuple(out))


def _symbols(found: Numbers, limit: float) -> Callable[[], Asked]:
    """Return what asks for the formulas; all that it needs of the numbers is read here."""
    nothing: Asked = (Symbolic(), [])
    if limit <= 0 or not len(found.template.types):
        return lambda: nothing
    point, template, scenario = found.point, found.template, found.scenario
    if not template.is_written_out:
        if not scenario.dimensions:
            return lambda: nothing
        free = scenario.infection_free
        alone = frozenset(name for name, given in free.items() if len({value.tree for value in given}) > 1)
        plan = outline(scenario)
        return lambda: _asked(plan, {}, {}, {}, limit, outlined=True, stand_alone=alone)
    values: dict[str, float] = {}
    for name, parameter in scenario.parameters.items():
        flat = _plain(template.space.flatten(point.evaluator.name(name), parameter.by))[:, 0]
        values.update(zip(scenario.items(name, parameter.by), flat.tolist(), strict=True))
    branches = {
        s.name: [int(v) for v in _plain(point.evaluator.names[s.name]).ravel()] for s in template.at_rest.selectors
    }
    state = _state(found)
    return lambda: _asked(scenario, state, values, branches, limit)


def _asked(*arguments: Any, **options: Any) -> Asked:
    try:
        return symbols(*arguments, **options), []
    except WorkerFailed as failed:
        return Symbolic(), [f"No formulas: {failed}"]


def _state(found: Numbers) -> dict[str, float]:
    template = found.template
    out: dict[str, float] = {}
    for name in template.uninfected:
        flat = _plain(template.space.flatten(np.asarray(found.point.state[name]), template.by(name)))[:, 0]
        out.update(zip(found.scenario.items(name, template.by(name)), flat.tolist(), strict=True))
    return out


def _plain(values: Any) -> Any:
    return to_floats(values) if values.dtype == object else np.asarray(values, dtype=float)


def nearest_of(value: Any) -> float:
    """Return a ball or a double as a double."""
    return float(value) if isinstance(value, float) else nearest(value)


def _matrix(values: Any) -> Matrix:
    return tuple(tuple(row) for row in _plain(values).tolist())


def _vector(values: Any) -> Vector | None:
    return None if values is None else tuple(_plain(values).tolist())
