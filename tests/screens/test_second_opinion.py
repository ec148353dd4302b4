"""The page on second opinions, without a browser. Numbers: by hand, for the plain model of `texts`."""

from __future__ import annotations

import pytest

from ngm.screens import shelf
from ngm.screens.state import AppState, Version
from tests.screens.test_pages import STATES, metrics, start, state, words

PAGE = "second_opinion"


@pytest.mark.parametrize("held", [key for key in STATES if key not in ("broken", "hostile")])
def test_the_page_opens_in_every_state(held):
    at = start(STATES[held], PAGE)
    assert not at.exception
    assert at.title[0].value == "Second opinion"


def typed(at, formula):
    return at.text_input(key="second_opinion.formula").set_value(formula).run()


def test_a_formula_is_compared():
    at = start(STATES["loaded"], PAGE)
    assert metrics(at)["R0: basic reproduction number"] == "2.5"
    at = typed(at, "beta / gamma")
    assert "✓ equal" in at.success[0].value
    at = typed(at, "sqrt(beta / gamma)")
    assert any("✖ root" in warning.value for warning in at.warning)
    at = typed(at, "bata / gamma")
    assert "Did you mean" in words(at)
    assert not at.exception


def test_stays_and_splits_of_a_shelf_scenario():
    text, folder = shelf.read("waterborne-karsk-flux.toml")
    at = start(AppState(now=Version(text, "w.toml", folder, text)), PAGE)
    assert not at.exception
    assert "The units fit" in words(at)
    assert "flow 4: enters W from outside" in words(at)
    assert "Not to be compared between models that split differently: **R0**" in words(at)


@pytest.mark.parametrize("page", ["model", "scenario", "numbers", "second_opinion"])
def test_what_is_converted_stands_above_the_number(page):
    text = shelf.read("seir-velmar-fever.toml")[0].replace(
        "gamma = { value = 1.4, unit", "gamma = { value = 0.35, unit"
    )
    at = start(state(text), page)
    told = [element.value.replace("\\", "") for element in at.caption if "Converted" in element.value]
    assert any("gamma: 0.35 1/week = 0.05 1/day, once in 20 day" in one for one in told)


def test_a_slip_is_told_on_every_page_with_results():
    text = shelf.read("seir-velmar-fever.toml")[0].replace(
        'value = 1.4, unit = "1/week"', 'value = 1.4, unit = "1/day"'
    )
    for page in ("model", "scenario", "numbers", "control"):
        assert "Were week and day mixed up?" in words(start(state(text), page)).replace("\\", "")


def test_another_model_is_compared():
    at = start(state(shelf.read("seir-velmar-fever.toml")[0]), PAGE)
    at = at.selectbox(key="second_opinion.other").set_value("vaccination-copper-spots.toml").run()
    assert not at.exception
    assert "From that to what is typed now, R0 goes from" in words(at)
