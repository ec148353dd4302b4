"""From a scenario to a report on disk: compute what it tells, write the form, and the companion file."""

from __future__ import annotations

import json
from collections.abc import Collection, Mapping
from dataclasses import dataclass
from datetime import date
from pathlib import Path
from typing import Any

import ngm
from ngm.errors import NgmError, Problem, ScenarioError
from ngm.reporting.checks import check
from ngm.reporting.document import Document
from ngm.reporting.forms import FORMS, Files, write
from ngm.reporting.material import Material
from ngm.reporting.narrative import SECTIONS, narrate
from ngm.results_control import Allocation, Comparison
from ngm.results_sensitivity import Sensitivity
from ngm.scenario.exact import evaluate
from ngm.scenario.following import values_in_force
from ngm.scenario.model import Expression, Parameter, Scenario

__all__ = ["Report", "compose", "report"]

#: Types up to which sensitivities are computed for a report: each parameter takes two solutions.
MOST_TYPES = 120


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
    draws: int | None = None,
    seed: int = 0,
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
        A result of `ngm.allocate` to be told as well.
    draws, seed : int or None, int
        Draws from the distributions of the parameters, for the section on uncertainty; None: no draws.
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
        draws=draws,
        seed=seed,
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
    draws: int | None = None,
    seed: int = 0,
    made_on: str | None = None,
    command: str = "python -m ngm report FILE --to report.pdf",
) -> Report:
    """Compute what a report tells and return it, written nowhere."""
    unknown = [key for key in sections or () if key not in SECTIONS]
    if unknown:
        raise ScenarioError([Problem("sections", f"{unknown[0][:80]!r} is none of {', '.join(SECTIONS)}.")])
    wanted = set(SECTIONS if sections is None else sections)
    solution = ngm.solve(scenario)
    control = ngm.control(scenario) if wanted & {"summary", "control"} else None
    said: list[str] = []
    comparison: Comparison | None = None
    sensitivity: Sensitivity | None = None
    if "interventions" in wanted and scenario.interventions:
        try:
            comparison = ngm.compare(scenario)
        except NgmError as error:
            said.append(f"Interventions could not be compared: {error}")
    if wanted & {"sensitivity", "uncertainty"} and len(solution.types) <= MOST_TYPES:
        try:
            sensitivity = ngm.sensitivity(scenario, draws=draws, seed=seed) if draws else ngm.sensitivity(scenario)
        except NgmError as error:
            said.append(f"Sensitivity could not be computed: {error}")
    material = Material(
        scenario,
        solution,
        control,
        comparison,
        sensitivity,
        allocation,
        _values(scenario),
        made_on or date.today().isoformat(),
        command,
    )
    document = narrate(material, sections)
    warnings = tuple(dict.fromkeys([*scenario.warnings, *solution.warnings, *said]))
    return Report(document, _companion(material, document), warnings=warnings)


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


def _companion(m: Material, document: Document) -> dict[str, Any]:
    found = check(m)
    bounds = m.solution.R0_bounds
    matrices = {
        name: {
            "values": [[[float(v) for v in row] for row in block] for block in matrix.blocks],
            "row_sums": [[float(sum(row)) for row in block] for block in matrix.blocks],
        }
        for name, matrix in m.scenario.matrices.items()
        if sum(len(block) ** 2 for block in matrix.blocks) <= 100_000
    }
    own = m.sensitivity.local if m.sensitivity is not None else ()
    tree: dict[str, Any] = {
        "title": m.scenario.title,
        "digest": m.solution.digest,
        "written_on": m.made_on,
        "solve": m.solution.to_json(),
        "control": None if m.control is None else m.control.to_json(),
        "compare": None if m.comparison is None else m.comparison.to_json(),
        "sensitivity": None if m.sensitivity is None else m.sensitivity.to_json(),
        "allocation": None if m.allocation is None else _allocation(m.allocation),
        "report": {
            "residual": m.solution.residual,
            "parameters": {name: list(values[:1000]) for name, values in m.values.items()},
            "matrices": matrices,
            "sensitivity": [{"value": index.value} for index in own],
            "checks": {
                "product": found.product,
                "root": found.root,
                "closed": found.closed,
                "width": None if bounds is None else bounds[1] - bounds[0],
            },
        },
    }
    tree["numbers"] = [
        {"name": item.name, "value": item.value, "shown": item.shown, "section": key}
        for key, item in document.numbers()
    ]
    return tree


def _allocation(a: Allocation) -> dict[str, Any]:
    ways = (a.best, *a.rules)
    return {
        "groups": list(a.groups),
        "sizes": list(a.sizes),
        "supply": a.supply,
        "lower_bound": a.lower_bound,
        "shares": [
            {"rule": w.rule, "R0": w.R0, "spent": w.spent, "coverage": list(w.coverage), "doses": list(w.doses)}
            for w in ways
        ],
    }
