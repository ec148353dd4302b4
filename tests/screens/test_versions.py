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
    moved = next(t.value for t in at.table if "because of" in t.value.columns).to_numpy().tolist()
    told = [[cell.replace("\\", "") for cell in row] for row in moved]
    # By hand: F is beta, V gamma, K beta/gamma; each moves by what it is made of.
    assert [row[:4] for row in told] == [
        ["F[I, I]", "0.5", "0.8", "+60 %"],
        ["V[I, I]", "0.2", "0.1", "-50 %"],
        ["K[I, I]", "2.5", "8", "+220 %"],
    ]
    assert "beta" in told[0][4]
    assert "gamma" in told[1][4]
    parts = next(t.value for t in at.table if "mean over all orders" in t.value.columns).to_numpy().tolist()
    # By hand: beta alone 4 - 2.5 = 1.5, gamma alone 5 - 2.5 = 2.5; in order 1.5 and 4; means (1.5 + 3)/2, (4 + 2.5)/2.
    assert [[float(cell.replace("\\", "")) for cell in row[1:]] for row in parts] == [[1.5, 2.25], [4.0, 3.25]]
    at.button(key="versions.restore").click().run()
    assert text_of(at) == SIR


def test_two_drafts_and_a_scenario_of_the_shelf_are_compared():
    at = start(STATES["loaded"], "scenario")
    first = at.session_state["ngm"].draft
    at.button(key="scenario.new").click().run()
    visit(at, "versions")
    at.radio(key="versions.with").set_value("another draft or scenario").run()
    options = at.selectbox(key="versions.other").options
    assert any(first[:6] in option for option in options)  # the one that was open before
    at.selectbox(key="versions.other").set_value(next(o for o in options if first[:6] in o)).run()
    assert not at.exception
    assert "nothing to compare" in words(at)  # the new one is no model yet
    at.text_input(key="versions.address").set_value("http://127.0.0.1/versions?draft=nowhere").run()
    assert "no draft at that address" in words(at)
    at.text_input(key="versions.address").set_value(f"http://127.0.0.1/?draft={first}").run()
    assert "no draft at that address" not in words(at)
    assert SIR.splitlines()[2] in words(at)


def test_a_note_is_kept_on_a_version():
    at = start(STATES["loaded"], "model")
    edit_rows(at, "parameters", edited={0: {"value": "0.8"}})
    visit(at, "versions")
    at.text_input(key="versions.note.1").set_value("before the meeting *").run()
    at.button(key="versions.annotate").click().run()
    assert Store().versions(at.session_state["ngm"].draft)[-1].note == "before the meeting *"
    assert any("before the meeting" in str(option) for option in at.selectbox[0].options)


def test_a_draft_is_thrown_away_and_brought_back():
    at = start(STATES["loaded"], "versions")
    key = at.session_state["ngm"].draft
    assert at.button(key="versions.discard").disabled
    at.checkbox(key=f"versions.sure.{key}").check().run()
    at.button(key="versions.discard").click().run()
    assert not at.exception
    assert Store().get(key) is None
    assert at.session_state["ngm"].now is None
    at.button(key="gone.back").click().run()
    assert text_of(at) == SIR
    assert Store().get(key).text == SIR


def test_the_address_of_a_draft_thrown_away_says_so():
    draft = Store().create(SIR, "a.toml")
    Store().discard(draft.id)
    at = AppTest.from_file(str(MAIN), default_timeout=60)
    at.query_params["draft"] = draft.id
    at.run()
    assert "thrown away" in words(at)
    at.button(key="gone.back").click().run()
    assert text_of(at) == SIR


def test_drafts_are_listed_to_their_owner_alone_and_thrown_away_by_nobody_else(monkeypatch):
    store = Store()
    mine = store.create(SIR, "mine.toml", owner="ada@example.org")
    theirs = store.create(SIR, "theirs.toml", owner="ben@example.org")
    monkeypatch.setattr("ngm.screens.state.owner", lambda: "ada@example.org")
    at = AppTest.from_file(str(MAIN), default_timeout=60)
    at.query_params["draft"] = theirs.id  # an address that was passed on
    at.run()
    visit(at, "versions")
    told = words(at)
    assert mine.id in told
    assert theirs.id not in told
    assert "versions.discard" not in [button.key for button in at.button]


def test_a_store_that_cannot_be_used_is_said_and_work_goes_on(monkeypatch, tmp_path):
    (tmp_path / "file").write_text("")
    monkeypatch.setattr("ngm.screens.state._store", lambda: Store(tmp_path / "file" / "drafts.sqlite"))
    at = start(STATES["loaded"], "model")
    assert "not being stored" in words(at)
    edit_rows(at, "parameters", edited={0: {"value": "0.8"}})
    assert metrics(at)["R0: basic reproduction number"] == "4"
