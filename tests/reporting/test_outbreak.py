"""The parts of the report on the course of an outbreak: told where they apply, absent with the reason elsewhere."""

from __future__ import annotations

import json

import pytest

from ngm.reporting.make import compose
from ngm.reporting.numbers import lookup
from tests.reporting import examples
from tests.reporting.test_document import words

PARTS = ("pace", "chance", "final_size", "twin")


def told(scenario):
    report = compose(scenario, sections=[*PARTS, "checklist"])
    return report, {section.key: section for section in report.document.sections}


def test_weekly_steps_say_which_number_to_report():
    report, sections = told(examples.shipped("weekly-steps"))
    text = words(report.document, "twin")
    for piece in ("1.431", "0.942428", "half a step less", "Which to report", "in steps of one week"):
        assert piece in text
    assert not sections["final_size"].blocks
    assert "continuous time" in sections["final_size"].why
    assert "steps" in words(report.document, "pace")


def test_a_closed_population_has_a_final_size():
    report, sections = told(examples.shipped("age-groups"))
    assert "63.1 %" in words(report.document, "final_size")
    assert not sections["twin"].blocks
    tree = json.loads(report.companion_text())
    found = [item for _, item in report.document.numbers()]
    assert len(found) > 20
    for item in found:
        assert lookup(tree, item.name) == pytest.approx(item.value, rel=1e-15), item.name


def test_births_are_named_where_there_is_no_final_size():
    _, sections = told(examples.shipped("seir"))
    assert 'flow 1 "Birth"' in sections["final_size"].why
    assert sections["pace"].blocks
    assert sections["chance"].blocks


def test_a_given_matrix_has_no_pace():
    _, sections = told(examples.shipped("ticks-and-mice"))
    assert "no time in it" in sections["pace"].why
    assert sections["chance"].blocks


def test_without_R0_every_part_is_absent():
    _, sections = told(examples.without_R0())
    assert all(not sections[key].blocks and sections[key].why for key in PARTS)
