"""Every page: opens without a complaint, has nothing that a screen reader stumbles over, fits a phone."""

from __future__ import annotations

from pathlib import Path

import pytest
from playwright.sync_api import expect

from ngm.screens.registry import PAGES

AXE = Path(__file__).resolve().parents[2] / ".cache" / "axe" / "node_modules" / "axe-core" / "axe.min.js"

#: Not ours: what Streamlit draws around its own parts and gives no way to change. Of a wide formula, which scrolls, the
#: check asks for a tab stop in the page's text; browsers give it one by themselves, as the test after the next sees.
NOT_OURS = [[".stAppToolbar"], [".stDataFrame"], [".katex-display"]]


@pytest.fixture(scope="module")
def draft(server, context) -> str:
    """Return a draft of the example with groups, contacts and interventions."""
    from tests.browser.visit import Visit

    visit = Visit(context.new_page(), server.url)
    visit.open()
    chosen = visit.page.get_by_role("combobox").first
    chosen.click()
    chosen.press_sequentially("age-groups")
    visit.page.get_by_role("option", name="age-groups").first.click()
    visit.settled()
    visit.button("Open this scenario").click()
    visit.stored_as(1)
    key = visit.draft()
    visit.page.close()
    return key


@pytest.mark.parametrize("page", PAGES, ids=lambda page: page.name)
def test_a_page_opens_with_a_scenario_and_without(visit, draft, page):
    path = "" if page is PAGES[0] else page.name
    visit.open(path)
    visit.open(path, draft)
    visit.heading(page.title)
    expect(visit.page.get_by_test_id("stMetric").first).to_be_visible()


@pytest.mark.parametrize("page", PAGES, ids=lambda page: page.name)
def test_a_page_is_accessible(visit, draft, page):
    if not AXE.is_file():
        pytest.skip("axe-core is not there: it comes with npm, which this machine does not have")
    visit.open("" if page is PAGES[0] else page.name, draft)
    visit.heading(page.title)
    visit.at_rest()
    visit.page.add_script_tag(path=AXE)
    found = visit.page.evaluate(
        "async exclude => (await axe.run({exclude}, {runOnly: ['wcag2a', 'wcag2aa']})).violations.map("
        "v => v.id + ': ' + v.help + ' ' + v.nodes.map(n => n.html.slice(0, 160)).slice(0, 3).join(' | '))",
        NOT_OURS,
    )
    assert found == []


def test_a_wide_formula_is_scrolled_by_keyboard(visit, draft):
    visit.page.set_viewport_size({"width": 390, "height": 844})
    visit.open("derivation", draft)
    visit.heading("Derivation")
    visit.at_rest()
    wide = "e => e.matches('.katex-display') && e.scrollWidth > e.clientWidth + 13"
    assert visit.page.evaluate(f"() => [...document.querySelectorAll('.katex-display')].some({wide})")
    for _ in range(150):
        visit.page.keyboard.press("Tab")
        if visit.page.evaluate(f"() => ({wide})(document.activeElement)"):
            break
    before = visit.page.evaluate("() => document.activeElement.scrollLeft")
    visit.page.keyboard.press("ArrowRight")
    visit.page.wait_for_function("before => document.activeElement.scrollLeft > before", arg=before)


@pytest.mark.parametrize("page", PAGES, ids=lambda page: page.name)
def test_a_page_fits_a_phone(visit, draft, page):
    visit.page.set_viewport_size({"width": 390, "height": 844})
    visit.open("" if page is PAGES[0] else page.name, draft)
    visit.heading(page.title)
    wide = visit.page.evaluate("() => document.querySelector('[data-testid=stMain]').scrollWidth")
    assert wide <= 390
