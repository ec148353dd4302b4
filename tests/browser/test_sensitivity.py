"""The way of an analyst with joint draws, in the browser: typed like a person, read from the screen."""

from __future__ import annotations

import numpy as np
import pytest
from playwright.sync_api import expect

from tests.browser.visit import PATIENCE
from tests.screens.test_draws import LESS
from tests.screens.test_sensitivity import RANGED, csv_of, joint


def test_other_numbers_how_much_is_enough_and_every_draw_saved(visit, tmp_path):
    beta, gamma = joint(2000)
    visit.start()
    visit.type_text(RANGED + LESS)
    visit.R0_is("2.5")
    visit.go("Sensitivity")
    page = visit.page
    page.get_by_text("from a file of joint draws").click()
    upload = {"name": "draws.csv", "mimeType": "text/csv", "buffer": csv_of(beta, gamma)}
    page.locator('input[type="file"]').first.set_input_files(upload)
    expect(page.get_by_test_id("stMetric").filter(has_text="P(R0 > 1)")).to_be_visible(timeout=PATIENCE)
    page.get_by_role("combobox", name="Also the distribution of").click()
    page.keyboard.type("growth")
    page.keyboard.press("Enter")
    page.keyboard.press("Escape")
    share = page.get_by_test_id("stMetric").filter(has_text="P(growth rate > 0)").get_by_test_id("stMetricValue")
    expect(share).to_be_visible(timeout=PATIENCE)
    # By hand: r = beta - gamma.
    assert float(share.inner_text()) == pytest.approx(np.mean(beta > gamma), abs=5e-5)
    visit.button("Find what is enough").click()
    # By hand: R0 (1 - 0.8 s) < 1 in 95 % of the draws.
    R0 = np.sort(beta / gamma)[1899]
    words = f"A strength of Less contact of {100 * (1 - 1 / R0) / 0.8:.4g} %"
    expect(page.get_by_test_id("stAlert").filter(has_text=words)).to_be_visible(timeout=PATIENCE)
    with page.expect_download() as saved:
        visit.button("Save every draw with its numbers as CSV").click()
    saved.value.save_as(tmp_path / "draws.csv")
    table = np.loadtxt(tmp_path / "draws.csv", delimiter=",", skiprows=1)
    assert table.shape == (2000, 6)
    assert table[:, 3] == pytest.approx(beta / gamma, rel=1e-12)
    assert table[:, 4] == pytest.approx(beta - gamma, abs=1e-12)


def test_joint_draws_their_distribution_the_plane_and_a_wanted_R0(visit):
    beta, gamma = joint()
    visit.start()
    visit.type_text(RANGED)
    visit.R0_is("2.5")
    visit.go("Sensitivity")
    page = visit.page
    expect(page.get_by_text("One parameter at a time", exact=False).first).to_be_visible(timeout=PATIENCE)
    page.get_by_text("from a file of joint draws").click()
    upload = {"name": "draws.csv", "mimeType": "text/csv", "buffer": csv_of(beta, gamma)}
    page.locator('input[type="file"]').first.set_input_files(upload)
    share = page.get_by_test_id("stMetric").filter(has_text="P(R0 > 1)").get_by_test_id("stMetricValue")
    expect(share).to_be_visible(timeout=PATIENCE)
    # Second route: R0 = beta/gamma on the arrays themselves.
    assert float(share.inner_text()) == pytest.approx(np.mean(beta / gamma > 1), abs=5e-5)
    expect(page.get_by_label("Distribution of R0 over 10,000 draws", exact=False).first).to_be_visible()
    expect(page.get_by_label("Partial rank correlation of each parameter", exact=False).first).to_be_visible()
    expect(page.get_by_label("R0 over beta", exact=False).first).to_be_visible(timeout=PATIENCE)
    expect(page.get_by_text("on its orange side")).to_be_visible()
    field = visit.field("Wanted R0")
    field.click()
    page.keyboard.press("Control+a")
    page.keyboard.type("2.4")
    page.keyboard.press("Enter")
    visit.taken_up()
    visit.button("Find the value").click()
    # By hand: beta = 2.4 * 0.2.
    expect(page.get_by_test_id("stAlert").filter(has_text="beta = 0.48 1/day")).to_be_visible(timeout=PATIENCE)
    visit.button("Take over beta = 0.48 into the scenario").click()
    visit.R0_is("2.4")
