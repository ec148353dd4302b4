"""The only reader and writer of scenario files.

`loads` and `load` check everything and raise one error with every problem found. The edits take the text of a file and
return it with one thing changed: comments, order and spacing stay, so that one edit is one line of difference.
"""

from __future__ import annotations

from contextlib import suppress
from dataclasses import replace
from pathlib import Path

from ngm.errors import Problem, ScenarioError
from ngm.scenario.check import check
from ngm.scenario.document import read_text, to_data
from ngm.scenario.draft import Draft
from ngm.scenario.edit import delete, insert, move, rename, set_value
from ngm.scenario.fields import EnoughError, Findings
from ngm.scenario.model import Expression, GivenMatrix, Intervention, Projection, Scenario
from ngm.scenario.read import read
from ngm.scenario.slips import slips
from ngm.scenario.stated import compartments_of, flows_of, internal_names
from ngm.scenario.unit_check import check_units

__all__ = ["delete", "insert", "load", "loads", "move", "rename", "set_value"]


def load(path: str | Path) -> Scenario:
    """Return the scenario of a file.

    Parameters
    ----------
    path : str or Path
        A ``.toml`` file in UTF-8, at most 16 MB. Matrix files are looked for in its folder.

    Raises
    ------
    ScenarioError
        With every problem found (`problems`).
    """
    return loads(read_text(path), folder=str(Path(path).resolve().parent))


def loads(text: str, folder: str | None = None) -> Scenario:
    """Return the scenario that a text holds.

    Parameters
    ----------
    text : str
        The content of a scenario file.
    folder : str, optional
        Where matrix files are looked for; without it, a scenario that names one is refused.

    Raises
    ------
    ScenarioError
        With every problem found (`problems`).
    """
    # the mark that some editors put before UTF-8 is no part of the text
    text = text.removeprefix("\ufeff")
    data = to_data(text)
    draft = Draft(Findings())
    with suppress(EnoughError):
        read(draft, data, folder)
        check(draft)
    if draft.found.problems:
        raise ScenarioError(draft.found.problems)
    scenario = _with_units(draft, _scenario(draft, text, folder))
    return replace(scenario, warnings=(*scenario.warnings, *(f"Units: {finding}" for finding in slips(scenario))))


def _with_units(draft: Draft, scenario: Scenario) -> Scenario:
    """Return the scenario with a warning for what does not fit in its units; refuse it where they are strict."""
    check = check_units(scenario)
    if scenario.strict_units and check.findings:
        problems = []
        for finding in check.findings:
            key = tuple(draft.typed.get(part, part) if isinstance(part, str) else part for part in finding.key)
            problems.append(Problem(finding.where, f'{finding.message} (units = "strict")', key=key))
        raise ScenarioError(problems)
    if not check.given or not check.findings:
        return scenario
    wrong = [f"Units: {finding}" for finding in check.findings if finding.kind != "missing"]
    # A remark in place of a unit has a warning of its own where it speaks of time.
    open_ones = [
        name
        for name in (finding.where.partition(".")[2] for finding in check.findings if finding.kind == "missing")
        if scenario.parameters[name].unit is None
    ]
    if open_ones:
        named = ", ".join(open_ones[:6]) + (", …" if len(open_ones) > 6 else "")
        wrong.append(
            f"Units: the {'flows' if draft.form is None else 'entries'} need a unit for {named}, and the file gives none."
        )
    return replace(scenario, warnings=(*scenario.warnings, *wrong))


def _state(draft: Draft, section: str) -> dict[str, tuple[Expression, ...]]:
    return {name: tuple(placed.expression for placed in entries) for name, entries in draft.states[section].items()}


def _stated(draft: Draft) -> tuple[GivenMatrix | None, Projection | None]:
    """Return the matrices that stand in the file, as one of the two forms."""
    rows = {
        name: tuple(tuple(placed.expression for placed in row) for row in table) for name, table in draft.stated.items()
    }
    if draft.form == "next_generation":
        return GivenMatrix(draft.types, rows["K"], rows["sizes"][0] if "sizes" in rows else ()), None
    if draft.form == "projection":
        return None, Projection(draft.types, rows["births"], rows["transitions"])
    return None, None


def _renamed(draft: Draft, names: dict[str, str]) -> list[Intervention]:
    """Return the interventions with types under the names that they have as compartments."""
    out = []
    for intervention in draft.interventions:
        changes = tuple(
            replace(change, name=names[change.name]) if change.what in ("susceptibility", "infectivity") else change
            for change in intervention.changes
        )
        out.append(replace(intervention, changes=changes))
    return out


def _scenario(draft: Draft, text: str, folder: str | None) -> Scenario:
    given, projection = _stated(draft)
    names = internal_names(draft.types, draft.roles)
    stated = given or projection
    if stated is not None:
        draft.compartments = compartments_of(names, draft.types)
    return Scenario(
        title=draft.title,
        time_unit=draft.time_unit,
        compartments=draft.compartments,
        parameters=draft.parameters,
        definitions=draft.definitions,
        flows=tuple(flow for flow, _ in draft.flows) if stated is None else flows_of(stated, names),
        dimensions=draft.dimensions,
        matrices=draft.matrices,
        movements=tuple(draft.movements),
        infection_free=_state(draft, "infection_free"),
        state_now=_state(draft, "state_now"),
        interventions=tuple(
            draft.interventions if stated is None else _renamed(draft, dict(zip(draft.types, names, strict=True)))
        ),
        report=draft.report,
        summary=draft.summary,
        strict_units=draft.strict_units,
        discrete=draft.discrete,
        given=given,
        projection=projection,
        warnings=tuple(draft.found.warnings),
        text=text,
        folder=folder,
    )
