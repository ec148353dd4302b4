"""What the report says and in which order; each part can be left out."""

from __future__ import annotations

from collections.abc import Callable, Collection
from dataclasses import replace

from ngm.reporting import (
    about_control,
    about_course,
    about_derivation,
    about_model,
    about_numbers,
    about_opinion,
    about_origin,
    about_outbreak,
    about_stated,
)
from ngm.reporting.document import Block, Bullets, Document, Formula, Line, Note, Paragraph, Section, Strong, Table
from ngm.reporting.material import Material, term
from ngm.reporting.numbers import number

__all__ = ["SECTIONS", "narrate", "summary"]

#: Key -> title, in the order of the report.
SECTIONS: dict[str, str] = {
    "summary": "Summary",
    "question": "Question, place, date and people",
    "diagram": "Flow diagram",
    "compartments": "Compartments",
    "flows": "Flows",
    "parameters": "Parameters",
    "groups": "Groups and contacts",
    "units": "Units and mean stays",
    "infection_free": "Infection-free state",
    "transmission": "Transmission F and transition V",
    "conditions": "Conditions A1 to A5",
    "next_generation": "Next-generation matrix K",
    "closed_form": "Closed form",
    "formula": "A formula compared",
    "R0": "R0, growth and doubling time",
    "season": "Over the season",
    "population": "Growth of the population",
    "classes": "Classes and period",
    "who_infects_whom": "Who infects whom",
    "pace": "Pace: generation interval",
    "chance": "Whether it takes off, by chance",
    "final_size": "How many in the end",
    "first_weeks": "The first weeks",
    "twin": "In steps or in continuous time",
    "control": "What control must reach",
    "splits": "Other splits of the flows",
    "interventions": "Interventions compared",
    "below_one": "Whether below one is enough",
    "allocation": "Allocation of a supply",
    "sensitivity": "Sensitivity",
    "uncertainty": "Uncertainty",
    "difference": "Difference from another version",
    "limits": "Limits and cautions",
    "checks": "How it was checked",
    "provenance": "Provenance",
    "references": "References",
    "names": "Numbers and their names",
    "checklist": "Checklist",
}


def narrate(m: Material, sections: Collection[str] | None = None) -> Document:
    """Return the report on a scenario's results.

    Parameters
    ----------
    m : Material
        The scenario and what was computed.
    sections : collection of str or None
        Keys of `SECTIONS`; None: all. Whatever their order here, they come in the order of the report.
    """
    told: set[str] = set()
    makers: dict[str, Callable[[], Section]] = {
        "summary": lambda: summary(m),
        "question": lambda: about_model.question(m),
        "diagram": lambda: about_model.diagram(m),
        "compartments": lambda: about_model.compartments(m),
        "flows": lambda: about_model.flows(m),
        "parameters": lambda: about_model.parameters(m),
        "groups": lambda: about_model.groups(m),
        "units": lambda: about_opinion.units(m),
        "infection_free": lambda: about_derivation.infection_free(m, told),
        "transmission": lambda: about_derivation.transmission(m, told),
        "conditions": lambda: about_derivation.conditions(m),
        "next_generation": lambda: about_derivation.next_generation(m, told),
        "closed_form": lambda: about_derivation.closed_form(m, told),
        "formula": lambda: about_opinion.formula(m),
        "R0": lambda: about_numbers.reproduction_number(m),
        "season": lambda: about_course.season(m),
        "population": lambda: about_stated.population(m),
        "classes": lambda: about_numbers.classes(m),
        "who_infects_whom": lambda: about_numbers.who_infects_whom(m),
        "pace": lambda: about_outbreak.pace(m),
        "chance": lambda: about_outbreak.chance(m),
        "final_size": lambda: about_outbreak.final_size(m),
        "first_weeks": lambda: about_course.first_weeks(m),
        "twin": lambda: about_outbreak.twin(m),
        "control": lambda: about_control.control(m),
        "splits": lambda: about_opinion.splits(m),
        "interventions": lambda: about_control.interventions(m),
        "below_one": lambda: about_course.below_one(m),
        "allocation": lambda: about_control.allocation(m),
        "sensitivity": lambda: about_control.sensitivity(m),
        "uncertainty": lambda: about_control.uncertainty(m),
        "difference": lambda: about_opinion.difference(m),
        "limits": lambda: about_origin.limits(m),
        "checks": lambda: about_origin.checks(m),
        "provenance": lambda: about_origin.provenance(m),
        "references": lambda: about_origin.references(m),
    }
    makers |= about_stated.instead(m)
    wanted = set(SECTIONS if sections is None else sections)
    made = [_wide_last(make()) for key, make in makers.items() if key in wanted]
    under: list[Line] = [(f"Written on {m.made_on} from scenario ", m.solution.digest, ".")]
    if "names" in wanted:
        made.append(about_origin.names(Document(m.scenario.title, tuple(under), tuple(made))))
    if "checklist" in wanted:
        out = [(key, title) for key, title in SECTIONS.items() if key not in wanted]
        made.append(about_origin.checklist(made, out))
    return Document(m.scenario.title, tuple(under), tuple(made))


def _wide_last(section: Section) -> Section:
    """Return a section with what needs pages on their sides at its end, so that it breaks no page in two."""
    wide = [block for block in section.blocks if isinstance(block, Table | Formula) and block.wide]
    rest = [block for block in section.blocks if block not in wide]
    if not wide or section.blocks[-len(wide) :] == tuple(wide):
        return section
    told = Paragraph(("What is too wide for the page stands at the end of this part.",))
    return replace(section, blocks=(*rest, told, *wide))


def summary(m: Material) -> Section:
    """Say in plain words what was asked, the number and what it means, what control must reach, and how sure it is."""
    s = m.solution
    asked = m.scenario.report.get("question")
    blocks: list[Block] = [
        Paragraph((Strong("Asked: "), asked if isinstance(asked, str) else "the scenario states no question."))
    ]
    if s.R0 is None:
        blocks.append(
            Note((Strong("No R0. "), "At these values the model has no basic reproduction number: ", s.no_R0 or ""))
        )
    else:
        blocks += [Paragraph(_found(m)), *_control(m)]
    blocks.append(Paragraph(_sure(m)))
    blocks.append(
        Paragraph(
            (
                "This is a number of a model, no forecast and no medical advice. It says nothing of speed or "
                "severity, and decisions "
                "rest with the responsible authority. See Limits and cautions.",
            )
        )
    )
    return Section("summary", "Summary", tuple(blocks))


def _found(m: Material) -> Line:
    s = m.solution
    assert s.R0 is not None
    if s.form == "projection":
        return about_stated.found(m)
    if s.R0 > 1:
        meaning = "above 1: where nobody is infected yet, the infection can spread"
    elif s.R0 < 1:
        meaning = "below 1: where nobody is infected yet, the infection dies out after some cases"
    else:
        meaning = "exactly 1, the threshold"
    out: Line = (
        Strong("Found: "),
        "R0 is ",
        number(s.R0, "solve.R0"),
        f", {meaning}. One typical case causes this many new infections in the next generation.",
    )
    period = s.structure.period if s.structure is not None else None
    if period is not None and period > 1:
        out += (
            f" A cycle takes {period} generations (host to vector to host, say): over a whole cycle a case becomes ",
            number(s.per_cycle, "solve.per_cycle"),
            " cases. R0 is per generation.",
        )
    if s.doubling_time is not None:
        out += (
            " At first the number of cases doubles every ",
            number(s.doubling_time, "solve.doubling_time"),
            f" {m.unit}s.",
        )
    return out


def _control(m: Material) -> list[Block]:
    c = m.control
    if c is None or m.solution.R0 is None or m.solution.R0 <= 1:
        return []
    items: list[Line] = []
    for k, t in enumerate(c.type_reproduction):
        whole = len(t.types) == len(m.solution.types_at_infection)
        if len(items) == 6 or not (len(t.types) == 1 or whole):
            continue
        if t.critical_effort is None:
            items.append((*term(t.types), ": no share is enough alone, the rest sustains the infection"))
        elif t.T is not None:
            key = f"control.type_reproduction[{k}].critical_effort"
            alike = ", all types alike" if whole and len(t.types) > 1 else ""
            items.append(
                (*term(t.types), alike + ": ", number(t.critical_effort, key), f" ({100 * t.critical_effort:.1f} %)")
            )
    if not items:
        return []
    what = "births into a stage" if m.solution.form == "projection" else "infections of a type"
    words = f"the share of all {what} to be prevented to bring the number to 1, if that one alone is acted on."
    return [Paragraph((Strong("Control must reach: "), words)), Bullets(tuple(items))]


def _sure(m: Material) -> Line:
    missing = sum(1 for p in m.scenario.parameters.values() if not (p.source or p.follows))
    drawn = m.spread is not None
    words = ""
    if m.solution.R0 is not None:
        sure = (
            "certain to the last digits (proven bounds)"
            if m.solution.season is None
            else "good to the error that is told"
        )
        words = f"the arithmetic is {sure}. The values are not covered by that: "
    words += (
        f"{missing} of {len(m.scenario.parameters)} parameters have no source"
        if missing
        else "every parameter names its source"
    )
    words += (
        ", and draws from their ranges are in Uncertainty." if drawn else ", and their uncertainty was not computed."
    )
    return (Strong("How sure: "), words)
