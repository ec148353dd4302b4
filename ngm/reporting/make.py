"""From a scenario to a report on disk: compute what it tells, write the form, and the companion file."""

from __future__ import annotations

import contextlib
import json
from collections.abc import Callable, Collection, Mapping
from dataclasses import dataclass
from datetime import date
from pathlib import Path
from typing import Any, TypeVar

import ngm
from ngm.analysis.solve import begin
from ngm.errors import NgmError, Problem, ScenarioError
from ngm.reporting.companion import companion as companion_of
from ngm.reporting.document import Document
from ngm.reporting.forms import FORMS, Files, write
from ngm.reporting.material import Material
from ngm.reporting.narrative import SECTIONS, narrate
from ngm.results import Solution
from ngm.results_control import Allocation
from ngm.results_course import Threshold
from ngm.results_mixing import Mixing
from ngm.scenario.exact import evaluate
from ngm.scenario.following import values_in_force
from ngm.scenario.model import Expression, Parameter, Scenario
from ngm.worker import LIMIT

__all__ = ["Report", "compose", "report"]

T = TypeVar("T")

#: Types up to which sensitivities, splits and mixing are computed for a report: each takes many solutions.
MOST_TYPES = 120
#: Types at infection up to which a supply is shared without being asked for.
MOST_SHARED = 40
#: Groups whose own matrix of contacts is looked at, where there is one for each.
MOST_WITHIN = 3
#: Parts that are absent for a reason that is no warning.
_QUIET = frozenset({"allocation", "first_weeks", "below_one"})
#: Infected types up to which flows are followed in a report, and interventions looked at below a number of 1: past it that
#: takes most of the time of a report.
MOST_FOLLOWED = 10
MOST_THRESHOLDS = 3
#: Formulas have so many times the seconds that they have alone: while the numbers are computed they share the machine.
BESIDE = 1.5


@dataclass(frozen=True, eq=False, slots=True)
class Report:
    """A report: its document, the companion object, and where it was written (None where it was not)."""

    document: Document
    companion: Mapping[str, Any]
    path: str | None = None
    form: str | None = None
    warnings: tuple[str, ...] = ()

    @property
    def sections(self) -> tuple[str, ...]:
        """Keys of the parts that it has."""
        return tuple(section.key for section in self.document.sections if section.blocks)

    def to_json(self) -> dict[str, Any]:
        """Return the object that `report --json` prints."""
        return {
            "path": self.path,
            "form": self.form,
            "sections": list(self.sections),
            "warnings": list(self.warnings),
        }

    def files(self, ending: str, name: str = "report") -> Files:
        """Return the report in one form, with what lies beside it."""
        return write(self.document, ending, name)

    def companion_text(self) -> str:
        """Return the companion file: every result, and every number of the report with its name."""
        return json.dumps(self.companion, ensure_ascii=False, indent=1) + "\n"


def report(
    scenario: Scenario,
    to: str | Path,
    *,
    sections: Collection[str] | None = None,
    companion: bool = False,
    allocation: Allocation | None = None,
    supply: float | None = None,
    sharing: Mapping[str, Any] | None = None,
    draws: int | None = None,
    seed: int = 0,
    formula: str | None = None,
    before: Scenario | None = None,
    made_on: str | None = None,
    command: str | None = None,
) -> Report:
    """Write a report on a scenario: the derivation ready to hand in.

    Parameters
    ----------
    scenario : Scenario
    to : str or Path
        The file; its ending is the form: ``.html .md .tex .docx .pdf``. Figures of ``.md`` and ``.tex`` lie beside it in
        ``NAME-figures/``.
    sections : collection of str or None
        Keys of the parts wanted (`ngm.reporting.narrative.SECTIONS`); None: all.
    companion : bool
        Whether to write ``NAME.json`` beside it: all results, and each number of the report with its name.
    allocation : Allocation or None
        A result of `ngm.allocate` to be told.
    supply, sharing : float or None, mapping or None
        Where there is no `allocation`: the supply to be shared, and what else `ngm.allocate` takes by keyword. Without a
        supply, a model with groups is told the smallest that is enough and its best share.
    draws, seed : int or None, int
        Draws from the distributions of the parameters, for the section on uncertainty; None: no draws.
    formula : str or None
        A formula from elsewhere to be compared with R0, as `ngm.formula` takes it.
    before : Scenario or None
        Another version of the model; what differs from it is told.
    made_on, command : str or None
        The date and the command that the report names; today and the plain command where left out.

    Returns
    -------
    Report

    Raises
    ------
    ScenarioError
        Another ending, an unknown section, a folder that is not there or cannot be written to.
    DerivationError
        The model has no derivation.
    """
    path = Path(to)
    ending = path.suffix.lower()
    if ending not in FORMS:
        raise ScenarioError(
            [Problem("--to", f"the ending must be one of {' '.join(FORMS)}, not {path.suffix[:20]!r}.")]
        )
    if not path.parent.is_dir():
        raise ScenarioError([Problem("--to", f"there is no folder {str(path.parent)[:200]!r}.")])
    made = compose(
        scenario,
        sections=sections,
        allocation=allocation,
        supply=supply,
        sharing=sharing,
        draws=draws,
        seed=seed,
        formula=formula,
        before=before,
        made_on=made_on,
        command=command or f"python -m ngm report FILE --to {path.name}",
    )
    files = made.files(ending, path.stem)
    try:
        path.write_bytes(files.main)
        for name, content in files.beside.items():
            beside = path.parent / name
            beside.parent.mkdir(exist_ok=True)
            beside.write_bytes(content)
        if companion:
            path.with_suffix(".json").write_text(made.companion_text(), encoding="utf-8")
    except OSError as error:
        raise ScenarioError([Problem("--to", f"cannot be written: {error.strerror}.")]) from error
    return Report(made.document, made.companion, str(path), ending[1:], made.warnings)


def compose(
    scenario: Scenario,
    *,
    sections: Collection[str] | None = None,
    allocation: Allocation | None = None,
    supply: float | None = None,
    sharing: Mapping[str, Any] | None = None,
    draws: int | None = None,
    seed: int = 0,
    formula: str | None = None,
    before: Scenario | None = None,
    made_on: str | None = None,
    command: str = "python -m ngm report FILE --to report.pdf",
) -> Report:
    """Compute what a report tells and return it, written nowhere; parameters as those of `report`."""
    unknown = [key for key in sections or () if key not in SECTIONS]
    if unknown:
        raise ScenarioError([Problem("sections", f"{unknown[0][:80]!r} is none of {', '.join(SECTIONS)}.")])
    wanted = set(SECTIONS if sections is None else sections)
    # The formulas take as long as much of the rest: they are worked out beside it, and are given more time for that.
    begun = begin(scenario, limit=BESIDE * LIMIT)
    solution = begun.numbers
    said = _Said()
    small = len(solution.types) <= MOST_TYPES
    if len(solution.types) > MOST_FOLLOWED:
        for part in ("first_weeks", "below_one"):
            said.why[part] = f"not computed for more than {MOST_FOLLOWED} infected types: ask for it by itself"
    shared = allocation
    if shared is None and "allocation" in wanted:
        if supply is not None:
            shared = ngm.allocate(scenario, supply, **(sharing or {}))
        elif sharing:
            shared = _least_supply(scenario, solution, sharing, said)
        else:
            shared = said.tried("allocation", lambda: _least_supply(scenario, solution, {}, said))
    material = Material(
        scenario=scenario,
        control=ngm.control(scenario) if wanted & {"summary", "control"} else None,
        comparison=said.tried("interventions", lambda: ngm.compare(scenario))
        if "interventions" in wanted and scenario.interventions
        else None,
        sensitivity=said.tried(
            "sensitivity",
            lambda: ngm.sensitivity(scenario, draws=draws, seed=seed) if draws else ngm.sensitivity(scenario),
        )
        if wanted & {"summary", "sensitivity", "uncertainty"} and small
        else None,
        allocation=shared,
        values=_values(scenario),
        made_on=made_on or date.today().isoformat(),
        command=command,
        mixing=_mixing(scenario) if "groups" in wanted and small else {},
        supplied=allocation is not None or supply is not None,
        outbreak=said.tried("outbreak", lambda: ngm.outbreak(scenario))
        if wanted & {"pace", "chance", "final_size"} and small
        else None,
        twin=ngm.twin(scenario)
        if "twin" in wanted and small and solution.discrete and solution.form == "flows"
        else None,
        units=said.tried("units", lambda: ngm.units(scenario)) if "units" in wanted else None,
        splits=said.tried("splits", lambda: ngm.splits(scenario)) if "splits" in wanted and small else None,
        course=said.tried("first_weeks", lambda: ngm.course(scenario))
        if "first_weeks" in wanted and len(solution.types) <= MOST_FOLLOWED
        else None,
        thresholds=said.tried("below_one", lambda: _thresholds(scenario)) or ()
        if "below_one" in wanted and len(solution.types) <= MOST_FOLLOWED
        else (),
        # What was asked for in so many words is refused in words, and not left out.
        formula=ngm.formula(scenario, formula) if formula is not None and "formula" in wanted else None,
        difference=ngm.difference(before, scenario) if before is not None and "difference" in wanted else None,
        why=said.why,
        solution=begun.finished(),
    )
    solution = material.solution
    document = narrate(material, sections)
    warnings = tuple(dict.fromkeys([*scenario.warnings, *solution.warnings, *said.warnings]))
    return Report(document, companion_of(material, document), warnings=warnings)


class _Said:
    """What could not be computed, and why: a report on the rest is still worth having."""

    def __init__(self) -> None:
        self.why: dict[str, str] = {}

    def tried(self, part: str, compute: Callable[[], T]) -> T | None:
        """Return a result, or None and keep the reason."""
        try:
            return compute()
        except NgmError as error:
            self.why[part] = " ".join(str(error).split())
            return None

    @property
    def warnings(self) -> list[str]:
        """The reasons as warnings."""
        return [f"{SECTIONS[part]}: {why}" for part, why in self.why.items() if part not in _QUIET]


def _least_supply(scenario: Scenario, solution: Solution, sharing: Mapping[str, Any], said: _Said) -> Allocation | None:
    """Return the best share of the smallest supply that is enough, where there are groups."""
    if not scenario.dimensions:
        said.why["allocation"] = "not computed: no supply was given"
    elif solution.R0 is None or solution.R0 <= 1:
        said.why["allocation"] = "not computed: no supply was given, and R0 is not above 1"
    elif len(solution.types_at_infection) > MOST_SHARED:
        said.why["allocation"] = "not computed: no supply was given, and the model is large"
    else:
        least = ngm.allocate(scenario, 0.0, **sharing).smallest
        if least.supply is not None:
            return ngm.allocate(scenario, least.supply, **sharing)
        said.why["allocation"] = f"no supply was given, and none is enough: {least.why}"
    return None


def _thresholds(scenario: Scenario) -> tuple[Threshold, ...]:
    """Return what lies below a number of 1 without interventions, and with the first of those that bring it there."""
    found = [ngm.threshold(scenario)]
    for intervention in scenario.interventions:
        if len(found) > MOST_THRESHOLDS:
            break
        with contextlib.suppress(NgmError):  # the comparison of interventions tells why one cannot be evaluated
            one = ngm.threshold(scenario, intervention=intervention, limit=0)
            if one.R_now is not None and one.R_now < 1 and one.direction is not None:
                found.append(one)
    return tuple(found)


def _mixing(scenario: Scenario) -> dict[str, tuple[Mixing, ...]]:
    """Return what is to be said of each matrix of contacts; matrices by which members move are none."""
    out: dict[str, tuple[Mixing, ...]] = {}
    for name, matrix in scenario.matrices.items():
        places = scenario.dimensions[matrix.within].groups[:MOST_WITHIN] if matrix.within else (None,)
        try:
            out[name] = tuple(ngm.mixing(scenario, name, within=place) for place in places)
        except NgmError:
            continue
    return out


def _values(scenario: Scenario) -> dict[str, tuple[float, ...]]:
    """Return the values in force of each parameter, those that follow others included."""

    def ignore(parameter: Parameter, index: int, message: str, expression: Expression, position: int) -> None:
        raise ScenarioError(
            [Problem(f"parameters.{parameter.name}, value {index + 1}", message, expression.text, position)]
        )

    out = {
        name: tuple(map(float, found))
        for name, found in values_in_force(scenario.parameters, scenario.dimensions, ignore).items()
    }
    for name, parameter in scenario.parameters.items():
        if name not in out:
            # One object for all groups is evaluated once.
            nodes = parameter.in_force()
            seen = {id(node): node for node in nodes}
            found = {key: float(evaluate(node)) for key, node in seen.items()}
            out[name] = tuple(found[id(node)] for node in nodes)
    return out
