"""A reviewer with a paper in hand, an analyst whose rate is per week, and a new name, in the browser."""

from __future__ import annotations

from playwright.sync_api import expect

from tests.browser.visit import PATIENCE
from tests.published.test_one_host import SEIR
from tests.screens.texts import SIR

WEEKLY = SIR.replace('gamma = { value = 0.2, unit = "1/day" }', 'gamma = { value = 1.4, unit = "1/week" }')


def test_a_reviewer_learns_whether_the_printed_formula_is_R0_and_where_not(visit):
    visit.start()
    visit.type_text(SEIR.text)
    visit.R0_is("3.974")
    visit.go("Second opinion")
    printed = visit.field("R0 as printed, in the syntax of the rates or in simple LaTeX")
    printed.fill(r"R_0 = \frac{\beta}{\gamma + \mu}")  # the chance of surviving the latent period is forgotten
    printed.press("Enter")
    expect(visit.page.get_by_text("✖ different")).to_be_visible(timeout=PATIENCE)
    expect(
        visit.page.get_by_text("They differ, for example, here: the model's R0 is 3.974, the formula 3.984.")
    ).to_be_visible(timeout=PATIENCE)
    expect(visit.page.get_by_role("cell", name="sigma", exact=True).last).to_be_visible(timeout=PATIENCE)
    printed.fill(r"R_0 = \frac{\beta\sigma}{(\sigma + \mu)(\gamma + \mu)}")
    printed.press("Enter")
    expect(visit.page.get_by_text("✓ equal")).to_be_visible(timeout=PATIENCE)
    expect(visit.page.get_by_text("proven with symbols")).to_be_visible(timeout=PATIENCE)
    visit.at_rest()


def test_a_rate_per_week_is_seen_per_day_above_every_result(visit):
    assert WEEKLY != SIR
    visit.start()
    visit.type_text(WEEKLY)
    visit.R0_is("2.5")
    visit.go("Model")
    visit.cell("Parameters", 1, 2, "0.35")
    visit.R0_is("10")  # by hand: 0.5/0.05
    for page in ("Model", "Reproduction numbers", "Second opinion"):
        visit.go(page)
        told = visit.page.get_by_text("gamma: 0.35 1/week = 0.05 1/day, once in 20 day").first
        expect(told).to_be_visible(timeout=PATIENCE)
        number = visit.page.get_by_test_id("stMetric").first
        expect(number).to_be_visible(timeout=PATIENCE)
        assert told.bounding_box()["y"] < number.bounding_box()["y"]


def test_a_new_name_in_a_table_goes_into_the_flows(visit):
    visit.start()
    visit.type_text(SIR)
    visit.R0_is("2.5")
    visit.go("Model")
    visit.type_into("Parameters", 1, 1, "recovery")
    visit.page.keyboard.press("Enter")
    expect(visit.grid("Flows").locator("#glide-cell-3-1")).to_have_text("recovery * I", timeout=PATIENCE)
    visit.R0_is("2.5")
