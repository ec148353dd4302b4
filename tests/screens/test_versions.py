"""Drafts as the pages handle them, without a browser."""

from __future__ import annotations

from streamlit.testing.v1 import AppTest

from ngm.drafts import Store
from tests.screens.test_pages import MAIN, STATES, edit_rows, metrics, start, text_of, visit, words
from tests.screens.texts import SIR


def test_the_address_leads_back_to_the_last_edit():
    at = start(STATES["loaded"], "model")
    edit_rows(at, "parameters", edited={0: {"value": "0.8"}})
    key = at.session_state["ngm"].draft
    assert Store().get(key).text == text_of(at)
    again = AppTest.from_file(str(MAIN), default_timeout=60)
    again.query_params["draft"] = key
    again.run()
    assert text_of(again) == SIR.replace("0.5", "0.8")
    assert metrics(again)["R0: basic reproduction number"] == "4"


def test_two_versions_are_compared_and_the_older_restored():
    at = start(STATES["loaded"], "model")
    edit_rows(at, "parameters", edited={0: {"value": "0.8"}, 1: {"value": "0.1"}})
    visit(at, "versions")
    assert not at.exception
    rows = next(t.value for t in at.table if "quantity" in t.value.columns).to_numpy().tolist()
    # By hand: 0.5/0.2 and 0.8/0.1; the change is 8/2.5 - 1.
    assert [cell.replace("\\", "") for cell in rows[0]] == ["R0", "2.5", "8", "+220 %"]
    assert "+beta = { value = 0.8" in words(at)
    at.button(key="versions.restore").click().run()
    assert text_of(at) == SIR


def test_a_store_that_cannot_be_used_is_said_and_work_goes_on(monkeypatch, tmp_path):
    (tmp_path / "file").write_text("")
    monkeypatch.setattr("ngm.screens.state._store", lambda: Store(tmp_path / "file" / "drafts.sqlite"))
    at = start(STATES["loaded"], "model")
    assert "not being stored" in words(at)
    edit_rows(at, "parameters", edited={0: {"value": "0.8"}})
    assert metrics(at)["R0: basic reproduction number"] == "4"
