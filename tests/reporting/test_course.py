"""The season, the first weeks and what lies below one in the report: every number has a name that leads to it."""

from __future__ import annotations

import pytest

import ngm
from ngm.reporting.make import compose
from ngm.reporting.numbers import lookup
from tests.reporting.examples import shipped

PARTS = ["season", "first_weeks", "below_one"]


def made(scenario):
    return compose(scenario, sections=PARTS, made_on="2026-01-01")


def sections(report):
    return {section.key: section for section in report.document.sections}


def text_of(report):
    return " ".join(
        piece if isinstance(piece, str) else getattr(piece, "text", getattr(piece, "shown", ""))
        for section in report.document.sections
        for block in section.blocks
        for line in ([block.line] if hasattr(block, "line") else getattr(block, "items", ()))
        for piece in line
    )


@pytest.mark.parametrize("part", ["fenmoor", "sallow", "velmar"])
def test_numbers_have_names(part):
    report = made(shipped(part))
    for _, number in report.document.numbers():
        assert lookup(report.companion, number.name) == number.value


def test_below_one_is_told_with_what_brings_it_there():
    report = made(shipped("fenmoor"))
    found = sections(report)
    assert found["below_one"].status == "present"
    assert "below one, yet infection can persist" in text_of(report)
    assert found["season"].status == "absent"
    assert [f.name for f in report.document.figures()] == [
        "first-weeks",
        "endemic-states-1",
        "endemic-states-2",
        "endemic-states-3",
    ]


def test_a_season_is_told_and_what_lies_below_one_is_not():
    report = made(shipped("sallow"))
    found = sections(report)
    assert found["season"].status == "present"
    assert found["below_one"].status == "absent"
    assert "season" in found["below_one"].why


def test_the_bounds_of_a_season_are_not_called_proven(tmp_path):
    path = tmp_path / "r.md"
    ngm.report(shipped("sallow"), path, sections=["summary", "R0", "checks", "closed_form"])
    told = path.read_text(encoding="utf-8")
    assert "proven" not in told
    assert "Floquet exponent" in told
