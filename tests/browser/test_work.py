"""The work of a modeller, in the browser: from nothing to R0, changes, uploads, downloads, by keyboard."""

from __future__ import annotations

import json
import tomllib

import pytest
from playwright.sync_api import expect

from tests.screens.texts import SIR


def test_a_newcomer_types_three_compartments_by_hand_and_gets_R0(visit):
    visit.start("Quite empty")
    visit.go("Model")
    for row, (name, infected) in enumerate([("S", "no"), ("I", "yes"), ("R", "no")]):
        visit.add_row("Compartments", row, [name, "", infected])
    visit.add_row("Flows", 0, ["S", "I", "beta * S * I / N", "transmission"])
    visit.add_row("Flows", 1, ["I", "R", "gamma * I", "transition"])
    visit.add_row("Parameters", 0, ["beta", "1/2"])
    visit.add_row("Parameters", 1, ["gamma", "0.2"])
    visit.add_row("Definitions", 0, ["N", "S + I + R"])
    visit.add_row("Infection-free state", 0, ["S", "1000"])
    visit.add_row("Infection-free state", 1, ["R", "0"])
    visit.R0_is("2.5")  # by hand: beta/gamma
    visit.go("Derivation")
    visit.R0_is("2.5")


def test_an_edited_rate_gives_a_new_R0_and_undo_and_redo_lead_back_and_forth(visit):
    visit.start()
    visit.type_text(SIR)
    visit.R0_is("2.5")
    visit.go("Model")
    visit.cell("Parameters", 0, 2, "0.8")
    visit.R0_is("4")  # by hand: 0.8/0.2
    visit.cell("Parameters", 1, 2, "0.4")
    visit.R0_is("2")
    visit.button("Undo last change").click()
    visit.R0_is("4")
    visit.button("Redo").click()
    visit.R0_is("2")
    visit.go("Versions")
    expect(visit.page.get_by_test_id("stCode")).to_contain_text('+gamma = { value = 0.4, unit = "1/day" }')
    visit.button("Go back to version 3").click()
    visit.R0_is("4")


def test_a_value_that_is_none_is_kept_and_said_at_its_table(visit):
    visit.start()
    visit.type_text(SIR)
    visit.R0_is("2.5")
    visit.go("Model")
    visit.cell("Parameters", 0, 2, "0,8")
    expect(visit.page.get_by_text("in this table")).to_be_visible()
    expect(visit.page.get_by_text("1 problem to put right")).to_be_visible()
    visit.cell("Parameters", 0, 2, "0.8")
    visit.R0_is("4")


@pytest.mark.parametrize(
    ("name", "content", "said"),
    [("wrong.toml", b"\xff\xfe\x00", "was not opened"), ("half.toml", b"[scenario\n", "problem")],
)
def test_a_wrong_file_is_told_in_words(visit, name, content, said):
    visit.open()
    visit.page.locator('input[type="file"]').first.set_input_files(
        [{"name": name, "mimeType": "application/toml", "buffer": content}]
    )
    expect(visit.page.get_by_test_id("stAlert").filter(has_text=said).first).to_be_visible()
    visit.settled()


def test_a_file_of_ones_own_is_opened(visit):
    visit.open()
    visit.page.locator('input[type="file"]').first.set_input_files(
        [{"name": "mine.toml", "mimeType": "application/toml", "buffer": SIR.encode()}]
    )
    visit.R0_is("2.5")
    expect(visit.source()).to_have_value(SIR)


def test_downloads_hold_what_is_on_the_screen(visit, tmp_path):
    visit.start()
    visit.type_text(SIR)
    visit.R0_is("2.5")
    with visit.page.expect_download() as caught:
        visit.button("Download this scenario").click()
    path = tmp_path / "a.toml"
    caught.value.save_as(path)
    assert path.read_text(encoding="utf-8") == SIR
    assert tomllib.loads(path.read_text(encoding="utf-8"))["parameters"]["beta"]["value"] == 0.5
    visit.go("Versions")
    with visit.page.expect_download() as caught:
        visit.button("Download this draft with its history").click()
    path = tmp_path / "a.json"
    caught.value.save_as(path)
    history = json.loads(path.read_text(encoding="utf-8"))
    assert history["versions"][-1]["text"] == SIR
    # And back: a new draft with the same history.
    draft = visit.draft()
    visit.page.locator('input[type="file"]').first.set_input_files(path)
    visit.page.wait_for_url(lambda url: draft not in url)
    visit.R0_is("2.5")


def test_from_the_start_page_to_a_model_by_keyboard_alone(visit):
    visit.open()
    keys = visit.page.keyboard

    def tab_to(name: str) -> None:
        for _ in range(80):
            keys.press("Tab")
            told = visit.page.evaluate("() => document.activeElement.innerText || ''")
            if told.strip() == name:
                return
        raise AssertionError(f"{name} cannot be reached with the Tab key")

    tab_to("With S, I and R to begin with")
    keys.press("Enter")
    visit.stored_as(1)
    visit.page.evaluate("() => document.activeElement.blur()")
    tab_to("Model")
    keys.press("Enter")
    visit.heading("Model")
    visit.cell("Compartments", 1, 2, "Infective")
    visit.stored_as(2)
    visit.page.evaluate("() => document.activeElement.blur()")
    tab_to("Undo last change")
    keys.press("Enter")
    visit.stored_as(1)
