"""The pages on what lies below one and on the first weeks, and the season on that of the numbers."""

from __future__ import annotations

from pathlib import Path

import pytest

import ngm
from ngm.charts.style import short
from tests.screens.test_pages import metrics, start, state, words
from tests.screens.texts import SIR

ROOT = Path(__file__).resolve().parents[2]
FENMOOR = (ROOT / "scenarios" / "leaky-vaccine-fenmoor-itch.toml").read_text(encoding="utf-8")
SALLOW = (ROOT / "scenarios" / "seasonal-midges-sallow-fever.toml").read_text(encoding="utf-8")


def test_the_page_says_that_below_one_is_not_enough_and_from_where_on_it_is():
    at = start(state(FENMOOR), "below_one")
    at.multiselect(key="below_one.with").set_value(["Vaccination drive"]).run()
    assert not at.exception
    told = words(at)
    assert "below one, yet infection can persist" in told.replace("\\", "")
    scenario = ngm.loads(FENMOOR)
    by_contacts = ngm.threshold(scenario, intervention=scenario.interventions[0])
    assert f"It cannot persist below beta = {by_contacts.turning:.6g}" in told.replace("\\", "")
    assert metrics(at)["Control reproduction number now"] == short(by_contacts.R_now)
    # The same for the rate of vaccination: above it.
    at.selectbox(key="below_one.along").set_value("phi").run()
    by_rate = ngm.threshold(scenario, along="phi", intervention=scenario.interventions[0])
    assert f"It cannot persist above phi = {by_rate.turning:.6g}" in words(at).replace("\\", "")
    assert not at.exception


def test_forward_is_said_only_when_computed():
    at = start(state(FENMOOR), "below_one")
    assert "Forward at 1" in at.success[0].value
    closed = start(state(SIR), "below_one")
    assert not closed.exception
    assert bool(closed.success) == (ngm.threshold(ngm.loads(SIR)).direction == "forward")


def test_a_season_has_no_such_page():
    at = start(state(SALLOW), "below_one")
    assert not at.exception
    assert "steady years only" in words(at)


def test_first_weeks():
    at = start(state(SIR), "first_weeks")
    assert not at.exception
    assert "growth and mix come to what is expected" in words(at)
    at.text_input(key="first_weeks.horizon").set_value("x").run()
    assert at.error
    at.text_input(key="first_weeks.horizon").set_value("5").run()
    assert not at.error
    assert not at.exception
    # What is typed survives a look at another page.
    at.switch_page("views/numbers.py").run()
    at.switch_page("views/first_weeks.py").run()
    assert at.text_input(key="first_weeks.horizon").value == "5"


def test_the_season_stands_beside_what_misleads():
    at = start(state(SALLOW), "numbers")
    assert not at.exception
    year = ngm.solve(ngm.loads(SALLOW), limit=0).season
    shown = metrics(at)
    assert shown["R0 of the whole season"] == short(year.R0)
    assert shown["Averaged season (not R0)"] == short(year.averaged)
    assert shown["Worst moment, if it lasted (not R0)"] == short(year.worst)
    assert "proven" not in " ".join(str(c.value) for c in at.caption if "R0 ≤" in str(c.value))


@pytest.mark.parametrize(
    "page", ["derivation", "control", "sensitivity", "second_opinion", "mixing", "report", "model"]
)
def test_other_pages_open_with_a_season(page):
    at = start(state(SALLOW), page)
    assert not at.exception
