"""The guided start: five questions to a first model."""

from __future__ import annotations

from itertools import product

import pytest

import ngm
from ngm.screens.guide import Answers, written
from ngm.screens.start import AFTER, CONTACTS, TURNOVER
from tests.screens.test_pages import metrics, start, text_of, words


@pytest.mark.parametrize(("wanes", "per_head", "turnover"), list(product([False, True], repeat=3)))
def test_every_answer_makes_a_model_with_the_number_worked_out_by_hand(wanes, per_head, turnover):
    a = Answers("A", "week", wanes, per_head, 0.4 if per_head else 0.0004, 5.0, 100.0, 1000.0, turnover, lifetime=50.0)
    # By hand: contacts per week times the mean infectious stay; deaths end it too, a year having 365.25/7 weeks.
    leaving = 1 / 5 + (7 / (365.25 * 50) if turnover else 0)
    solution = ngm.solve(ngm.loads(written(a)))
    assert solution.R0 == pytest.approx(0.4 / leaving, rel=1e-12)
    assert solution.time_unit == "week"


def test_a_title_may_hold_what_it_likes():
    title = 'He said "R0" \\ and\n[x] 🧮'
    assert ngm.loads(written(Answers(title))).title.split() == title.split()


def test_five_steps_lead_to_R0():
    at = start()
    at.button(key="scenario.guided").click().run()
    assert "Step 1 of 5" in at.subheader[0].value
    at.text_input(key="start.title").set_value("Harbour cough").run()
    at.button(key="start.next").click().run()
    at.radio(key="start.after").set_value(AFTER[1]).run()
    at.button(key="start.next").click().run()
    at.radio(key="start.contacts").set_value(CONTACTS[0]).run()
    # The value comes together with the press of the button.
    at.text_input(key="start.beta").set_value("0.5")
    at.button(key="start.next").click().run()
    at.text_input(key="start.infectious").set_value("8").run()
    at.text_input(key="start.immune").set_value("0").run()
    assert "a number above 0 is needed" in words(at)
    assert at.button(key="start.next").disabled
    at.text_input(key="start.immune").set_value("90").run()
    at.button(key="start.back").click().run()
    assert at.text_input(key="start.beta").value == "0.5"
    at.button(key="start.next").click().run()
    at.button(key="start.next").click().run()
    assert metrics(at)["R0: basic reproduction number"] == "4"  # by hand: 0.5 times 8
    at.radio(key="start.turnover").set_value(TURNOVER[0]).run()
    at.button(key="start.open").click().run()
    assert not at.exception
    assert 'title = "Harbour cough"' in text_of(at)
    assert metrics(at)["R0: basic reproduction number"] == "4"
    # The guide can be begun anew, and left.
    at.button(key="scenario.guided").click().run()
    at.button(key="start.leave").click().run()
    assert 'title = "Harbour cough"' in text_of(at)
