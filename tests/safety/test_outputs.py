"""Hostile texts in what is printed, returned, drawn, stored and shown on pages."""

from __future__ import annotations

import json
import re
import sqlite3
import unicodedata
from pathlib import Path

import pytest

import ngm
from ngm.__main__ import main
from ngm.charts.graphs import Arrow, Stage, flow_diagram, who_infects_whom
from ngm.drafts.store import Store
from ngm.scenario.edit import set_value
from ngm.screens.registry import PAGES
from ngm.screens.state import AppState, Version
from tests.safety.texts import FIELDS, TEXTS, TURNS, filled, rotated
from tests.screens.test_pages import start

VERBS = ("solve", "control", "compare", "sensitivity", "units", "splits")


#: What steers a terminal or turns the direction of reading.
_STEERING = TEXTS["controls"] + TEXTS["directions"]


def steers(text: str) -> set[str]:
    return {c for c in text if c != "\n" and (unicodedata.category(c)[0] == "C" or c in "\u2028\u2029")}


@pytest.mark.parametrize("verb", VERBS)
def test_nothing_steers_a_terminal(verb: str, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = tmp_path / "hostile.toml"
    path.write_text(filled(dict.fromkeys(FIELDS, _STEERING)).text, encoding="utf-8")
    assert main([verb, str(path)]) == 0
    told = capsys.readouterr()
    assert not steers(told.out)
    assert not steers(told.err)
    assert main([verb, str(path), "--json"]) == 0
    printed = capsys.readouterr().out
    assert not steers(printed)
    assert json.loads(printed)["warnings"] is not None


@pytest.mark.parametrize("field", FIELDS)
def test_nothing_in_a_refusal_steers_a_terminal(field: str) -> None:
    """Each field with all texts and a fault beside it: the message may quote the field."""
    scenario = filled({field: "\n".join(TEXTS.values())})
    with pytest.raises(ngm.ScenarioError) as caught:
        ngm.loads(scenario.text.replace('"q*S*C(I/N)"', '"qq*S*C(I/N)"').replace("multiply = 0.5", "multiply = -1"))
    told = str(caught.value)
    assert not steers(told)
    assert len(told) < 2000


def test_JSON_keeps_every_text() -> None:
    """What is shown as a box elsewhere is whole where a program reads it."""
    for turn in range(TURNS):
        scenario = rotated(turn)
        assert json.loads(json.dumps(ngm.solve(scenario, limit=0).to_json()))["title"] == scenario.title


def bare_of(dot: str) -> str:
    """Return DOT without its quoted strings, after which nothing of a user may be left."""
    return re.sub(r'"(?:\\.|[^"\\])*"', "", dot)


@pytest.mark.parametrize("text", TEXTS.values(), ids=TEXTS)
def test_DOT(text: str) -> None:
    stages = [Stage("S", text, False), Stage("I", text, True)]
    graphs = [flow_diagram(stages, [Arrow("S", "I", "transmission", text, text), Arrow("I", "", text, "g", text)])]
    harmless = flow_diagram(
        [Stage("S", "x", False), Stage("I", "x", True)],
        [Arrow("S", "I", "transmission", "x", "x"), Arrow("I", "", "y", "g", "x")],
    )
    label = "".join(c for c in text if c not in ",[]'\"")
    graphs.append(who_infects_whom(ngm.solve(filled({"group": label}), limit=0)))
    for graph in graphs:
        assert graph is not None
        assert "evil" not in bare_of(graph.dot)
        assert not steers(graph.dot)
    assert harmless is not None
    assert graphs[0] is not None
    assert bare_of(graphs[0].dot) == bare_of(harmless.dot)


def test_SQL(tmp_path: Path) -> None:
    store = Store(tmp_path / "drafts.sqlite")
    kept = []
    for name, text in TEXTS.items():
        draft = store.create(text, name=text)
        store.save(draft.id, draft.rev, text + name)
        kept.append((draft.id, text + name))
    for key, text in kept:
        found = store.get(key)
        assert found is not None
        assert found.text == text
    assert all(store.get(text) is None for text in TEXTS.values())
    with sqlite3.connect(tmp_path / "drafts.sqlite") as db:
        assert db.execute("SELECT count(*) FROM drafts").fetchone() == (len(TEXTS),)


def test_ids_of_drafts_cannot_be_guessed(tmp_path: Path) -> None:
    """At least 128 bits from the system's source of chance; nothing of one id is in the next."""
    store = Store(tmp_path / "drafts.sqlite")
    ids = [store.create("x", name="x").id for _ in range(200)]
    assert len(set(ids)) == len(ids)
    assert all(re.fullmatch(r"[A-Za-z0-9_-]{22,}", key) for key in ids)
    # of 24 places, two ids share 24/64 = 0.4 on average; 12 would be one pair in 10^15
    assert max(sum(a == b for a, b in zip(x, y, strict=True)) for x in ids[:40] for y in ids[:40] if x != y) < 12


@pytest.mark.parametrize("text", TEXTS.values(), ids=TEXTS)
def test_an_edit_writes_any_text(text: str) -> None:
    scenario = filled({})
    for path in (("scenario", "title"), ("flow", 0, "label"), ("parameters", "q", "label"), ("report", "place")):
        edited = set_value(scenario.text, path, text)
        assert ngm.loads(edited).flows[0].rate.text == "q*S*C(I/N)"
    assert ngm.loads(set_value(scenario.text, ("scenario", "title"), text)).title == text


#: An escaped sign, a piece of code, or a link of the program's own.
_QUOTED = re.compile(r"\\[!-/:-@\[-`{-~]|`[^`\n]*`|\]\(/\?draft=")
#: What of the texts would do something in Markdown as Streamlit reads it.
_ACTIVE = (
    "<script",
    "<img",
    "<svg",
    "<a ",
    "](",
    ":red[",
    ":material/",
    ":smile:",
    "$\\input",
    "&lt;",
    "<br>",
    "__c__",
)


@pytest.mark.parametrize("page", PAGES, ids=lambda page: page.name)
def test_pages(page) -> None:
    for turn in (0, 3):
        text = rotated(turn).text
        at = start(AppState(now=Version(text, "hostile.toml", None, text)), page.name)
        assert not at.exception
        kinds = (at.markdown, at.caption, at.error, at.info, at.warning, at.success, at.title, at.header, at.subheader)
        told = [element.value for kind in kinds for element in kind]
        told += [element.label for kind in (at.button, at.checkbox, at.toggle, at.radio, at.metric) for element in kind]
        told += [element.label for kind in (at.selectbox, at.multiselect, at.text_input, at.tabs) for element in kind]
        told += [element.label for element in at.expander]
        told += [option for element in at.radio for option in element.options]
        for value in told:
            bare = _QUOTED.sub("", str(value))
            assert not [mark for mark in _ACTIVE if mark in bare], value
