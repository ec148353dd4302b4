"""Draws on the page: other numbers, correlations, how much is enough, how far the work is, formulas of the indices."""

from __future__ import annotations

import numpy as np
import pytest

import ngm
from ngm.analysis import slopes
from ngm.screens import long_work, shelf
from ngm.screens.state import AppState, Version
from ngm.wording import assured_words
from tests.screens.test_pages import metrics, start, words
from tests.screens.test_sensitivity import RANGED, button, cells, csv_of, joint, page, success

LESS = '\n[[intervention]]\nname = "Less contact"\n[[intervention.change]]\nparameter = "beta"\nmultiply = 0.2\n'


@pytest.fixture(autouse=True)
def _nothing_kept():
    yield
    for question in long_work._kept.subjects():
        long_work.forget(question)


def drawn(text=RANGED + LESS):
    at = page(text)
    button(at, "Draw").click().run()
    assert not at.exception
    return at


def told(at):
    return words(at).replace("\\", "")


def test_other_numbers_get_a_distribution_of_their_own():
    at = page()
    at.multiselect(key="sensitivity.of").set_value(["growth_rate", "T(I)"]).run()
    button(at, "Draw").click().run()
    assert not at.exception
    # By hand: r = beta - gamma: above 0 just where R0 = beta/gamma is above 1; T of the only type is R0.
    shown = metrics(at)
    assert shown["P(growth rate > 0)"] == shown["P(R0 > 1)"] == shown["P(T(I) > 1)"]
    rows = {row[0].replace("\\", ""): row[1].replace("\\", "") for row in cells(at, ["figure", r"growth\_rate"])}
    # By hand: beta uniform on 0.1 to 0.9, gamma on 0.1 to 0.3: mean 0.5 - 0.2.
    assert float(rows["mean"]) == pytest.approx(0.3, abs=0.001)
    # the command that prints the same
    assert any("--of growth_rate 'T(I)'" in code.value for code in at.code)


def test_sets_of_types_and_routes_are_offered():
    text, folder = shelf.read("age-groups-ember-cough.toml")
    at = start(AppState(now=Version(text, "age-groups-ember-cough.toml", folder, text)), "sensitivity")
    offered = at.multiselect(key="sensitivity.of").options
    # By hand: the growth rate, 4 types, 6 pairs and 4 triples, and up to 30 of the 16 entries.
    assert len(offered) == 1 + 4 + 6 + 4 + 16
    assert {"T(E[0-4], E[18-64])", "T(E[65+] <- E[0-4])"} <= set(offered)


def test_correlations_are_typed_a_pair_a_line():
    at = page()
    at.text_area(key="sensitivity.correlations").set_value("beta, gamma = 0.8").run()
    button(at, "Draw").click().run()
    assert not at.exception
    assert "they are defined for independent parameters only" in told(at)
    assert any("--correlate beta,gamma=0.8" in code.value for code in at.code)


@pytest.mark.parametrize(
    ("typed", "message"),
    [
        ("beta gamma 0.8", "expected A,B=NUMBER"),
        ("beta, sigma = 0.8", "'sigma' is not drawn"),
        ("beta, gamma = 1.2", "outside -1 to 1"),
    ],
)
def test_correlations_that_are_none_are_told(typed, message):
    at = page()
    at.text_area(key="sensitivity.correlations").set_value(typed).run()
    for one in [
        one for one in at.button if one.label == "Draw"
    ]:  # a pair that cannot be read is told before the button
        one.click().run()
    assert not at.exception
    assert message in told(at)


def test_how_much_of_an_intervention_is_enough():
    at = page(RANGED + LESS)
    beta, gamma = joint(2000)
    at.radio(key="sensitivity.source").set_value("from a file of joint draws").run()
    at.file_uploader(key="sensitivity.file").set_value(("draws.csv", csv_of(beta, gamma), "text/csv")).run()
    at.text_input(key="sensitivity.assurance").set_value("90 %").run()
    button(at, "Find what is enough").click().run()
    assert not at.exception
    # By hand: R0 (1 - 0.8 s) < 1; s is set by the draw at 90 % of R0.
    R0 = np.sort(beta / gamma)[int(np.ceil(0.9 * 2000)) - 1]
    needed = (1 - 1 / R0) / 0.8
    shown = success(at).replace("\\", "")
    assert (
        f"A strength of Less contact of {100 * needed:.4g} % brings the number below 1 in 90 % of the draws." in shown
    )
    # By hand: R0 = 2.5 at the values.
    assert f"At the scenario's own values {100 * (1 - 1 / 2.5) / 0.8:.4g} % would do." in shown


def test_how_much_of_a_vaccine_is_enough():
    at = drawn()
    at.selectbox(key="sensitivity.measure").select("a vaccine").run()
    at.text_input(key="sensitivity.efficacy").set_value("90 %").run()
    button(at, "Find what is enough").click().run()
    assert not at.exception
    # Second route: the same in Python.
    found = ngm.assured_coverage(ngm.loads(RANGED + LESS), 2000, efficacy=0.9, seed=1)
    shown = success(at).replace("\\", "") if found.needed is not None else told(at)
    assert assured_words(found) in shown
    assert any("coverage" in code.value and "--efficacy 0.9 --draws 2000" in code.value for code in at.code)


def test_an_assurance_that_is_none_is_told():
    at = drawn()
    at.text_input(key="sensitivity.assurance").set_value("2").run()
    button(at, "Find what is enough").click().run()
    assert not at.exception
    assert "between 0 and 1" in told(at)


def test_long_work_shows_how_far_it_is_and_can_be_stopped(monkeypatch):
    monkeypatch.setattr(long_work, "GRACE", 0.0)
    held = long_work._places
    held.acquire()
    held.acquire()  # nothing begins before both places are free again
    try:
        at = page()
        button(at, "Draw").click().run()
        assert not at.exception
        assert "P(R0 > 1)" not in metrics(at)
        at.button(key="sensitivity.work.stop").click().run()
        assert "Stopped: Drawing and computing." in told(at)
    finally:
        held.release()
        held.release()
    monkeypatch.setattr(long_work, "GRACE", 60.0)
    at.button(key="sensitivity.work.again").click().run()
    assert not at.exception
    assert "P(R0 > 1)" in metrics(at)


def test_formulas_of_the_indices(monkeypatch):
    monkeypatch.setattr(slopes, "LIMIT", 120.0)
    at = page()
    button(at, "Write them as formulas").click().run()
    assert not at.exception
    # By hand: R0 = beta/gamma.
    rows = {row[0]: row[1:] for row in cells(at, ["parameter", r"dR0\/dp", r"elasticity of R0"])}
    assert [cell.replace("\\", "") for cell in rows["beta"]] == ["1/gamma", "1"]
    assert [cell.replace("\\", "") for cell in rows["gamma"]] == ["-beta/gamma^2", "-1"]


def test_calibration_tells_what_is_attainable():
    at = page()
    at.text_input(key="sensitivity.value.R0").set_value("2.4").run()
    button(at, "Find the value").click().run()
    # By hand: beta from 0.1 to 0.9 at gamma = 0.2.
    assert "Over the values searched, R0 goes from 0.5 to 4.5." in told(at)
