"""The page on outbreaks, without a browser. Numbers: by hand, for the plain model of `texts`, and for weekly steps."""

from __future__ import annotations

import math

import pytest

from ngm.screens import shelf
from ngm.screens.registry import PAGES
from ngm.screens.state import AppState, Version
from tests.screens.test_pages import STATES, metrics, start, text_of, words

PAGE = "outbreak"
CLOSED = """
[scenario]
title = "Closed, invented"
time_unit = "day"
[compartments]
S = { infected = false }
I = { infected = true }
R = { infected = false }
[parameters]
beta = { value = 0.4 }
[[flow]]
from = "S"
to = "I"
rate = "beta * S * I / 1000"
kind = "transmission"
[[flow]]
from = "I"
to = "R"
rate = "0.2 * I"
kind = "transition"
[infection_free]
S = 1000
R = 0
[[intervention]]
name = "Masks"
change = [ { parameter = "beta", multiply = 0.75 } ]
"""


def opened(text, folder=None):
    return start(AppState(now=Version(text, "x.toml", folder, text)), PAGE)


@pytest.mark.parametrize("held", [key for key in STATES if key not in ("broken", "hostile")])
def test_the_page_opens_in_every_state(held):
    at = start(STATES[held], PAGE)
    assert not at.exception
    assert at.title[0].value == "Outbreak"


def test_three_parts_of_a_closed_population():
    at = opened(CLOSED)
    assert not at.exception
    shown = metrics(at)
    # R0 = 2: attack rate 0.7968 (published, see the engine's tests); mean interval 1/0.2, growth 0.4 - 0.2.
    assert shown["Share of the susceptible infected"] == "79.7 %"
    assert shown["Infected in all"] == "797"
    assert shown["Mean generation interval, days"] == "5"
    assert shown["Growth rate, per day"] == "0.2"
    assert [header.value for header in at.header][:3] == ["How many in the end", "By chance", "Pace"]
    chance = next(table.value for table in at.table if "dies out" in table.value.columns)
    assert chance["dies out"].tolist() == [r"0\.5"]


def test_cases_and_interventions_are_asked_for_and_kept():
    at = opened(CLOSED)
    at = at.multiselect(key="outbreak.introduce").set_value(["I"]).run()
    at = at.text_input(key="outbreak.introduce.I").set_value("3").run()
    assert metrics(at)["Probability of a large outbreak from 3 I"] == "0.875"  # 1 - 1/2^3, by hand
    at = at.multiselect(key="outbreak.with").set_value(["Masks"]).run()
    assert metrics(at)["Control reproduction number"] == "1.5"
    # by hand: 1 - (2/3)^3
    assert float(metrics(at)["Probability of a large outbreak from 3 I"]) == pytest.approx(1 - (2 / 3) ** 3, abs=1e-4)
    at = at.text_input(key="outbreak.introduce.I").set_value("some").run()
    assert "is no number" in words(at)
    assert not at.exception


def test_time_is_chosen_on_the_page_of_the_scenario():
    at = start(AppState(now=Version(CLOSED, "x.toml", None, CLOSED)), "scenario")
    key = next(box.key for box in at.selectbox if box.label == "Time")
    at = at.selectbox(key=key).select_index(1).run()
    assert 'time = "discrete"' in text_of(at)
    key = next(box.key for box in at.selectbox if box.label == "Time")
    at = at.selectbox(key=key).select_index(0).run()
    assert text_of(at) == CLOSED


@pytest.mark.parametrize("page", [page.name for page in PAGES])
def test_every_page_works_in_weekly_steps(page):
    text, folder = shelf.read("weekly-steps-tarn-croup.toml")
    at = start(AppState(now=Version(text, "x.toml", folder, text)), page)
    assert not at.exception
    assert not at.error
    assert metrics(at)["R0: basic reproduction number"] == "1.431"


@pytest.mark.parametrize("stem", ["ticks-and-mice-quill-fever", "mosquito-stages-saltings"])
def test_matrices_in_place_of_flows(stem):
    text, folder = shelf.read(f"{stem}.toml")
    at = opened(text, folder)
    assert not at.exception
    assert "By chance" in [header.value for header in at.header]
    assert "In steps or in continuous time" not in [header.value for header in at.header]


def test_a_vaccine():
    at = opened(CLOSED)
    at = at.text_input(key="outbreak.coverage").set_value("50 %").run()
    assert metrics(at)["Control reproduction number"].startswith("1")
    at = at.text_input(key="outbreak.coverage").set_value("30 %").run()
    assert metrics(at)["Control reproduction number"] == "1.4"
    at = at.text_input(key="outbreak.coverage").set_value("30").run()
    assert "For 30 % write 0.30" in words(at).replace("\\", "")
    assert not at.exception


def test_where_the_final_size_does_not_apply_the_flows_are_named():
    text, folder = shelf.read("seir-velmar-fever.toml")
    at = opened(text, folder)
    told = words(at).replace("\\", "")
    assert "does not apply" in told
    assert 'flow 1 "Birth"' in told
    assert "In steps or in continuous time" in [header.value for header in at.header]


def test_a_weekly_model_says_why_its_number_and_the_continuous_one_differ_and_which_to_report():
    text, folder = shelf.read("weekly-steps-tarn-croup.toml")
    at = opened(text, folder)
    assert not at.exception
    told = words(at).replace("\\", "")
    for piece in ("Why they differ", "about half a step less", "Which to report", "in steps of one week"):
        assert piece in told
    table = next(table.value for table in at.table if "Factor per step" in table.value.columns)
    numbers = [float(x.replace("\\", "")) for x in table["R0"]]
    # By hand: K = 0.9 . 0.9 (1 + 0.15 . 0.2/0.5)/0.6; hazards -ln(1 - e), shared in proportion.
    at_home = -math.log(0.4)
    assert numbers[0] == pytest.approx(0.81 * (1 + 0.15 * 0.2 / 0.5) / 0.6, rel=1e-3)
    bay = -math.log(0.5)
    assert numbers[1] == pytest.approx(0.81 * (1 / at_home + 0.25 * 0.2 / bay), rel=1e-3)
    assert numbers[2] == numbers[0]
