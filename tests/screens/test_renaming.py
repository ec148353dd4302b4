"""A new name typed into a table of page Model, without a browser."""

from __future__ import annotations

from tests.screens.test_pages import STATES, edit_rows, start, text_of, words


def test_a_new_name_is_followed_and_the_other_tables_show_it():
    at = start(STATES["loaded"], "model")
    before = text_of(at)
    assert "gamma * I" in before
    at = edit_rows(at, "parameters", edited={1: {"name": "recovery"}})
    assert not at.exception
    assert "gamma" not in text_of(at)
    assert "recovery * I" in text_of(at)
    flows = at.session_state[f"model.flow.{at.session_state['ngm'].forms}.base"]
    assert "recovery * I" in list(flows["rate"])
    assert "R0: basic reproduction number" in {metric.label for metric in at.metric}


def test_a_name_that_is_taken_is_told():
    at = start(STATES["loaded"], "model")
    at = edit_rows(at, "parameters", edited={1: {"name": "beta"}})
    assert not at.exception
    assert "gamma * I" in text_of(at)
    assert "gamma" in words(at)
