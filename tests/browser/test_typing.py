"""Values typed into a table by somebody who does not wait for the page."""

from __future__ import annotations

import random
import tomllib

import pytest

from ngm.drafts import Store
from tests.screens.texts import SIR

#: Milliseconds between two keys of somebody who types fast, and between hand and mouse.
KEY, HAND = 45, 200


def typed(visit, text):
    visit.page.keyboard.type(text, delay=KEY)


def clicked(visit, row):
    """Click on the value of a parameter, as a hand moves there."""
    canvas = visit.grid("Parameters").locator("canvas").first
    canvas.scroll_into_view_if_needed()
    box = canvas.bounding_box()
    # Columns: mark 35, name 110, value 200 pixels wide; rows 35 high below the headings.
    x, y = box["x"] + 205, box["y"] + 35 * (row + 1) + 17
    visit.page.mouse.move(x, y, steps=6)
    visit.page.wait_for_timeout(HAND)  # a grid finds out in a drawing of its own which cell the mouse is over
    visit.page.mouse.click(x, y, delay=KEY)
    visit.page.wait_for_timeout(HAND)


def by_mouse(visit, first, second):
    clicked(visit, 0)
    typed(visit, first)
    visit.page.wait_for_timeout(HAND)
    clicked(visit, 1)
    typed(visit, second)
    visit.page.keyboard.press("Enter")


def by_enter(visit, first, second):
    clicked(visit, 0)
    typed(visit, first)
    visit.page.keyboard.press("Enter")
    typed(visit, second)
    visit.page.keyboard.press("Enter")


def by_tab(visit, first, second):
    clicked(visit, 0)
    typed(visit, first)
    for key in ("Tab", "ArrowLeft", "ArrowDown"):
        visit.page.keyboard.press(key, delay=KEY)
    typed(visit, second)
    visit.page.keyboard.press("Enter")


@pytest.mark.parametrize("way", [by_mouse, by_enter, by_tab], ids=lambda way: way.__name__)
def test_two_values_typed_one_right_after_the_other_are_both_kept(visit, server, way):
    draft = Store(server.drafts).create(SIR, "a.toml")
    visit.open("model", draft.id)
    visit.R0_is("2.5")
    visit.at_rest()
    chance = random.Random(4)
    for _ in range(3):
        first, second = (f"0.{chance.randrange(11, 99)}" for _ in range(2))
        way(visit, first, second)
        visit.page.wait_for_timeout(1500)
        visit.settled()
        held = tomllib.loads(Store(server.drafts).get(draft.id).text)["parameters"]
        assert [held["beta"]["value"], held["gamma"]["value"]] == [float(first), float(second)]


def test_a_cell_with_a_choice_is_typed_at_once_too(visit, server):
    draft = Store(server.drafts).create(SIR, "a.toml")
    visit.open("model", draft.id)
    visit.R0_is("2.5")
    visit.at_rest()
    visit.select("Compartments", 2, 3)
    typed(visit, "yes")
    visit.page.keyboard.press("Enter")
    visit.stored_as(2)
    assert tomllib.loads(Store(server.drafts).get(draft.id).text)["compartments"]["R"]["infected"] is True
