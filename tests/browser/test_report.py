"""The report as HTML, opened from the disk in a browser: accessible, formulas in a font that has them, nothing fetched."""

from __future__ import annotations

import pytest

from ngm.reporting.make import compose
from tests.browser.test_pages import AXE
from tests.reporting import examples

SCENARIOS = {
    "vectors": lambda: examples.shipped("vector-borne"),
    "groups": lambda: examples.shipped("age-groups"),
    "ten states": examples.islands,
    "no R0": examples.without_R0,
    "hostile": examples.hostile,
}


@pytest.fixture(scope="module", params=SCENARIOS.values(), ids=SCENARIOS)
def page(request, context, tmp_path_factory):
    """Open a report; in the end it must not have asked for anything or complained."""
    path = tmp_path_factory.mktemp("report") / "report.html"
    made = compose(request.param(), made_on="2026-01-02")
    path.write_bytes(made.files(".html").main)
    opened = context.new_page()
    asked, complaints = [], []
    opened.on("request", lambda r: asked.append(r.url))
    opened.on("pageerror", lambda error: complaints.append(str(error)))
    opened.on("console", lambda message: complaints.append(message.text) if message.type == "error" else None)
    opened.goto(path.as_uri())
    opened.evaluate("document.fonts.ready")
    yield opened
    opened.close()
    assert [url for url in asked if not url.startswith(("file:", "data:"))] == []
    assert complaints == []


@pytest.mark.parametrize("scheme", ["light", "dark"])
@pytest.mark.parametrize("width", [1280, 390])
def test_it_is_accessible(page, scheme, width):
    if not AXE.is_file():
        pytest.skip("axe-core is not there: it comes with npm, which this machine does not have")
    page.emulate_media(color_scheme=scheme)
    page.set_viewport_size({"width": width, "height": 900})
    page.evaluate(AXE.read_text(encoding="utf-8"))
    # Everything that it looks at, contrast included. A heading of a row that is a formula it takes for empty: it does
    # not read MathML, those who listen to the page do.
    found = page.evaluate(
        "async () => (await axe.run(document, {rules: {'empty-table-header': {enabled: false}}})).violations.map("
        "v => v.id + ': ' + v.help + ' ' + v.nodes.map(n => n.html.slice(0, 160)).slice(0, 3).join(' | '))"
    )
    assert found == []


def test_contrast_is_looked_at(page):
    if not AXE.is_file():
        pytest.skip("axe-core is not there: it comes with npm, which this machine does not have")
    page.evaluate(AXE.read_text(encoding="utf-8"))
    passed = page.evaluate("async () => (await axe.run(document)).passes.map(rule => rule.id)")
    assert {"color-contrast", "heading-order", "image-alt", "html-has-lang", "region"} <= set(passed)


def test_formulas_have_their_font_and_brackets_stretch(page):
    assert page.evaluate("[...document.fonts].map(f => f.family + ' ' + f.status)") == ["Report Math loaded"]
    heights = page.evaluate(
        """() => [...document.querySelectorAll('mtable')].map(table => {
            const high = e => e.getBoundingClientRect().height;
            return [high(table.previousElementSibling), high(table), high(table.nextElementSibling)];
        })"""
    )
    assert all(min(before, after) >= 0.8 * inside for before, inside, after in heights)
    # Every sign of a formula is in the font: one that is not has the width of the box that stands for it.
    missing = page.evaluate(
        r"""() => {
            const pen = document.createElement('canvas').getContext('2d');
            const signs = new Set([...document.querySelectorAll('math *')].filter(e => !e.children.length
                && !e.matches('annotation')).flatMap(e => [...e.textContent]).filter(c => !/\s/.test(c)));
            return [...signs].filter(c => {
                pen.font = '40px "Report Math", serif';
                const ours = pen.measureText(c).width;
                pen.font = '40px "Report Math", monospace';
                return Math.abs(ours - pen.measureText(c).width) > 0.01;
            });
        }"""
    )
    assert missing == []


def test_nothing_is_wider_than_a_phone_but_what_scrolls(page):
    page.set_viewport_size({"width": 390, "height": 844})
    assert page.evaluate("document.documentElement.scrollWidth") <= 390
