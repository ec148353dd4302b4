"""What makes work quick: the guided start, pasted tables, the way to a problem, pictures saved and formulas copied."""

from __future__ import annotations

import csv
import io
import struct
import xml.etree.ElementTree as ET

import pytest
from playwright.sync_api import expect

from ngm.drafts import Store
from tests.browser.visit import PATIENCE
from tests.screens.texts import BROKEN, SIR


def test_five_questions_lead_a_newcomer_to_R0_by_keyboard(visit):
    visit.open()
    page = visit.page

    def press(name):
        button = visit.button(name)
        button.focus()
        page.keyboard.press("Enter")

    press("With five questions")
    for step in range(1, 6):
        expect(page.get_by_role("heading", name=f"Step {step} of 5")).to_be_visible(timeout=PATIENCE)
        visit.settled()
        if step == 3:
            visit.field("Infectious contacts (beta), per day").focus()
            page.keyboard.press("Control+a")
            page.keyboard.type("0.6")
            page.keyboard.press("Enter")
            visit.taken_up()
        press("Next" if step < 5 else "Open this model")
    visit.R0_is("3")  # by hand: 0.6 times 5 days


def test_a_table_is_pasted_and_a_problem_leads_to_its_field(visit, server):
    visit.open("derivation", Store(server.drafts).create(BROKEN, "a.toml").id)
    page = visit.page
    page.get_by_test_id("stMain").get_by_role("button", name="Go to Flows, row 1, Rate").click()
    visit.heading("Model")
    expect(page.get_by_role("heading", name="Flows", exact=True)).to_be_in_viewport(timeout=PATIENCE)
    page.get_by_text("Paste a table from a spreadsheet").click()
    box = page.get_by_label("Cells, pasted here with Ctrl+V")
    page.get_by_role("combobox", name="Into which table?").click()
    page.get_by_role("option", name="Parameters").click()
    visit.taken_up()
    box.fill("Name\tValue\tUnit\nbata\t0.8\t1/day")
    box.press("Control+Enter")
    visit.button("Take it over").click()
    visit.R0_is("4")  # by hand: the misspelt name has a value now, 0.8/0.2


@pytest.mark.parametrize("page", ["numbers", "outbreak"])
def test_every_picture_of_a_page_is_saved_and_read_back(visit, server, page, tmp_path):
    visit.open(page, Store(server.drafts).create(SIR, "a.toml").id)
    visit.at_rest()
    buttons = visit.page.get_by_role("button", name="Save the ")
    names = [str(name) for name in buttons.evaluate_all("all => all.map(b => b.getAttribute('aria-label'))")]
    shown = [name for name in names if visit.page.get_by_role("button", name=name, exact=True).is_visible()]
    assert len(shown) >= 3
    for name in shown:
        with visit.page.expect_download() as caught:
            visit.page.get_by_role("button", name=name, exact=True).click()
        path = tmp_path / caught.value.suggested_filename
        caught.value.save_as(path)
        if name.endswith("SVG"):
            root = ET.fromstring(path.read_text(encoding="utf-8"))
            assert root.tag.endswith("svg")
            assert len(list(root.iter())) > 10
        elif name.endswith("PNG"):
            content = path.read_bytes()
            assert content[:8] == b"\x89PNG\r\n\x1a\n"
            assert min(struct.unpack(">II", content[16:24])) > 60
        else:
            rows = list(csv.reader(io.StringIO(path.read_text(encoding="utf-8"))))
            assert len(rows) > 1
            assert len({len(row) for row in rows}) == 1


def test_matrices_and_formulas_are_copied_by_one_press(visit, server, context):
    context.grant_permissions(["clipboard-read", "clipboard-write"], origin=server.url)
    visit.open("derivation", Store(server.drafts).create(SIR, "a.toml").id)
    visit.at_rest()
    for name, told in (
        ("Copy K as CSV", ",I\nI,2.5\n"),
        ("Copy R0 as LaTeX", r"\frac{\beta}{\gamma}"),
        ("Copy R0 as plain text", "beta/gamma"),
    ):
        visit.page.get_by_role("button", name=name, exact=True).click()
        row = visit.page.get_by_role("group", name=name.partition(" as ")[0], exact=True)
        expect(row.get_by_text("Copied.")).to_be_visible()
        assert visit.page.evaluate("() => navigator.clipboard.readText()") == told
