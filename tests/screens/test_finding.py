"""From a problem to its field."""

from __future__ import annotations

import pytest

from ngm.errors import Problem
from ngm.screens.finding import ELSEWHERE, Place, place_of
from ngm.screens.registry import PAGES
from tests.screens.test_pages import STATES, start, words


@pytest.mark.parametrize(
    ("key", "place"),
    [
        (("flow", 1, "rate"), Place("views/model.py", "Flows", "Flows, row 2, Rate")),
        (("parameters", "beta", "value"), Place("views/model.py", "Parameters", "Parameters, beta, Value")),
        (("definitions", "N"), Place("views/model.py", "Definitions", "Definitions, N")),
        (("scenario", "title"), Place("views/scenario.py", "Scenario", "Scenario")),
        ((), None),
        (("nonsense", 3), None),
    ],
)
def test_a_problem_leads_to_its_field(key, place):
    assert place_of(Problem("", "", key=key)) == place


def test_the_places_are_pages():
    assert {page for page, _ in ELSEWHERE.values()} <= {page.path for page in PAGES}


@pytest.mark.parametrize("page", ["derivation", "scenario", "model"])
def test_every_page_offers_the_way_to_a_problem(page):
    at = start(STATES["broken"], page)
    button = at.button(key="finding.status.0")
    assert button.label == "Go to Flows, row 1, Rate"
    button.click().run()
    assert not at.exception
    assert at.title[0].value == "Model"
    assert "bata" in words(at)
