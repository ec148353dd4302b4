"""The page Report, without a browser: its words, and what is computed only where it is asked for."""

from __future__ import annotations

import pytest

from ngm.screens import shelf
from ngm.screens.state import AppState, Version
from tests.screens.test_pages import STATES, start, words

PAGE = "report"


def opened(name):
    text, folder = shelf.read(name)
    return start(AppState(now=Version(text, name, folder, text)), PAGE)


def held(at):
    return at.session_state["ngm"].now.text


@pytest.mark.parametrize("name", [key for key in STATES if key not in ("broken", "hostile")])
def test_the_page_opens_in_every_state(name):
    at = start(STATES[name], PAGE)
    assert not at.exception
    assert at.title[0].value == "Report"


def test_words_and_lists_go_into_the_scenario():
    at = opened("seir-velmar-fever.toml")
    field = next(f for f in at.text_input if f.label == "Place")
    at = field.set_value("Velmar, which is invented").run()
    area = next(f for f in at.text_area if f.label.startswith("What must not"))
    at = area.set_value("No forecast.\n\n  Nothing on severity. ").run()
    assert not at.exception
    assert 'place = "Velmar, which is invented"' in held(at)
    assert 'limits = ["No forecast.", "Nothing on severity."]' in held(at)
    area = next(f for f in at.text_area if f.label.startswith("What must not"))
    at = area.set_value("").run()
    assert "limits" not in held(at)


def test_what_is_asked_for_is_in_the_report(monkeypatch):
    from ngm.screens import report_cache

    seen = []
    compose = report_cache.compose

    def spy(*given):
        seen.append(compose(*given))
        return seen[-1]

    monkeypatch.setattr(report_cache, "compose", spy)
    at = opened("age-groups-ember-cough.toml")
    assert "uncertainty" not in seen[-1].sections
    # No supply: the smallest that is enough, for there are groups.
    assert seen[-1].companion["allocate"]["best"]["R0"] == pytest.approx(1, abs=1e-9)
    at.text_input(key="report.draws").set_value("100")
    at.text_input(key="report.seed").set_value("7")
    at.text_input(key="report.supply").set_value("50 000")
    at.text_input(key="report.formula").set_value("q / gamma")
    at = at.selectbox(key="report.before").set_value("sixteen-ages-marl-cough.toml").run()
    assert not at.exception
    assert {"uncertainty", "formula", "difference", "allocation"} <= set(seen[-1].sections)
    assert seen[-1].companion["sensitivity"]["global"]["draws"] == 100
    assert seen[-1].companion["sensitivity"]["global"]["seed"] == 7
    assert seen[-1].companion["allocate"]["supply"] == 50_000
    assert seen[-1].companion["formula"]["verdict"] == "different"


@pytest.mark.parametrize(
    ("field", "typed", "told"),
    [
        ("draws", "many", "is no number"),
        ("draws", "2.5", "a whole number"),
        ("supply", "-3", "is no supply"),
        ("efficacy", "1.5", "efficacy"),
        ("formula", "bata / 2", "not defined"),
    ],
)
def test_a_wrong_entry_is_told(field, typed, told):
    at = opened("age-groups-ember-cough.toml")
    at = at.text_input(key=f"report.{field}").set_value(typed).run()
    assert not at.exception
    assert told in words(at)
