"""The store of drafts: versions, two writers, undo and redo, history to take along, its schema."""

from __future__ import annotations

import json
import random
import sqlite3
import stat
import threading
import zlib

import pytest

from ngm.drafts import Conflict, DraftError, Saved, Store, place, schema


@pytest.fixture
def store(tmp_path):
    return Store(tmp_path / "below" / "drafts.sqlite")


def save(store, draft, text, **options):
    answer = store.save(draft.id, draft.rev, text, **options)
    assert isinstance(answer, Saved)
    return answer.draft


def filled(store, draft, contents, said):
    """Store texts until that is refused in these words; return the draft as it was before."""
    for content in contents:
        try:
            draft = save(store, draft, content)
        except DraftError as error:
            refusal = str(error)
            break
    else:
        refusal = ""
    assert said in refusal
    return draft


def texts(store, key):
    return [store.text(key, version.number) for version in store.versions(key)]


def test_every_edit_is_a_version_and_another_store_sees_it(store):
    draft = store.create("one", "a.toml", origin="shelf", note="opened", good=True)
    draft = save(store, draft, "two")
    draft = save(store, draft, "three\nΛ 🧮", note="why")
    again = Store(store.path).get(draft.id)
    assert again == draft
    assert (again.text, again.valid, again.name, again.origin) == ("three\nΛ 🧮", "one", "a.toml", "shelf")
    listed = store.versions(draft.id)
    assert [v.number for v in listed] == [3, 2, 1]
    assert [v.note for v in listed] == ["why", "", "opened"]
    assert listed[0].time >= listed[2].time > 1.5e9
    assert texts(store, draft.id) == ["three\nΛ 🧮", "two", "one"]


def test_the_same_text_is_no_new_version(store):
    draft = store.create("one", "a.toml")
    assert save(store, draft, "one") == draft
    assert len(store.versions(draft.id)) == 1


def test_the_second_of_two_writers_is_told_and_neither_edit_is_lost(store):
    draft = store.create("base", "a.toml")
    mine = theirs = draft
    theirs = save(store, theirs, "theirs")
    answer = store.save(mine.id, mine.rev, "mine", base=mine.head)
    assert isinstance(answer, Conflict)
    assert answer.theirs == theirs == store.get(draft.id)
    assert store.text(draft.id, answer.aside) == "mine"
    assert store.versions(draft.id)[0].aside
    assert not theirs.later  # what lies beside the head is not what Redo leads to
    kept = store.move(draft.id, answer.theirs.rev, answer.aside)
    assert isinstance(kept, Saved)
    assert kept.draft.text == "mine"
    assert texts(store, draft.id) == ["mine", "theirs", "base"]


def test_of_many_threads_one_wins_each_time_and_nothing_is_lost(store):
    key = store.create("0", "a.toml").id
    answers = []

    def work(name):
        for k in range(10):
            draft = store.get(key)
            answers.append(store.save(key, draft.rev, f"{name}{k}", base=draft.head))

    threads = [threading.Thread(target=work, args=(name,)) for name in "abcd"]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert len(answers) == 40
    assert set(texts(store, key)) == {"0", *(f"{name}{k}" for name in "abcd" for k in range(10))}
    assert store.get(key).rev == 1 + sum(isinstance(answer, Saved) for answer in answers)


def test_undo_and_redo_move_along_what_is_stored(store):
    draft = store.create("one", "a.toml")
    assert store.undo(draft.id, draft.rev) is None
    for text in ("two", "three"):
        draft = save(store, draft, text)
    draft = store.undo(draft.id, draft.rev).draft
    assert (draft.text, draft.earlier, draft.later) == ("two", True, True)
    draft = store.undo(draft.id, draft.rev).draft
    assert (draft.text, draft.earlier, draft.later) == ("one", False, True)
    draft = store.redo(draft.id, draft.rev).draft
    assert draft.text == "two"
    draft = save(store, draft, "another")  # from here Redo leads nowhere, and "three" stays in the list
    assert store.redo(draft.id, draft.rev) is None
    assert texts(store, draft.id) == ["another", "three", "two", "one"]
    draft = store.undo(draft.id, draft.rev).draft
    assert store.redo(draft.id, draft.rev).draft.text == "another"


def test_undo_on_an_old_revision_is_a_conflict(store):
    draft = store.create("one", "a.toml")
    old = save(store, draft, "two")
    save(store, old, "three")
    assert isinstance(store.undo(old.id, old.rev), Conflict)
    assert store.get(old.id).text == "three"


def test_the_last_good_text_is_found_along_the_line(store):
    draft = store.create("good", "a.toml", good=True)
    draft = save(store, draft, "bad")
    assert save(store, draft, "worse").valid == "good"
    assert store.create("bad", "a.toml").valid is None


def test_a_draft_is_taken_along_with_its_history(store, tmp_path):
    draft = store.create("one", "a.toml", origin="shelf", good=True)
    draft = save(store, draft, "two Λ", note="better")
    draft = store.undo(draft.id, draft.rev).draft
    other = Store(tmp_path / "other.sqlite")
    brought = other.bring_in(store.export(draft.id).encode())
    assert brought.id != draft.id
    assert (brought.text, brought.name, brought.origin, brought.later) == ("one", "a.toml", "shelf", True)
    assert [(v.number, v.base, v.time, v.note, v.good) for v in other.versions(brought.id)] == [
        (v.number, v.base, v.time, v.note, v.good) for v in store.versions(draft.id)
    ]
    assert draft.id not in store.export(draft.id)


@pytest.mark.parametrize(
    ("change", "word"),
    [
        (lambda d: d.update(format="other"), "no exported draft"),
        (lambda d: d.update(schema=10**6), "newer"),
        (lambda d: d.update(versions=[]), "expected between"),
        (lambda d: d.update(head=9), "present one"),
        (lambda d: d["versions"][0].update(text=5), "version 1"),
        (lambda d: d["versions"][1].update(base=2), "version 2"),
        (lambda d: d["versions"][1].update(number=1), "version 2"),
        (lambda d: d["versions"][1].update(time=float("nan")), "version 2"),
    ],
)
def test_a_damaged_history_is_refused_in_words(store, change, word):
    draft = save(store, store.create("one", "a.toml"), "two")
    data = json.loads(store.export(draft.id))
    change(data)
    with pytest.raises(DraftError, match=word):
        store.bring_in(json.dumps(data).encode())


@pytest.mark.parametrize("content", [b"", b"{", b"\xff\xfe", b"[" * 100_000, b"[1]"])
def test_what_is_no_history_is_refused_in_words(store, content):
    with pytest.raises(DraftError, match="the file is"):
        store.bring_in(content)


def test_drafts_are_listed_to_their_owner_only(store):
    mine = store.create("one", "mine.toml", owner="ann")
    store.create("two", "theirs.toml", owner="ben")
    store.create("three", "nobodys.toml")
    assert [key for key, _, _ in store.of_owner("ann")] == [mine.id]
    assert store.of_owner("") == []


def test_ids_are_long_and_differ(store):
    keys = {store.create("", "a.toml").id for _ in range(50)}
    assert len(keys) == 50
    assert min(len(key) for key in keys) >= 24  # 18 random bytes


def test_what_is_not_there(store):
    assert store.get("nowhere") is None
    assert store.rev("nowhere") is None
    with pytest.raises(DraftError, match="no draft"):
        store.save("nowhere", 1, "x")
    key = store.create("", "a.toml").id
    with pytest.raises(DraftError, match="no version 7"):
        store.text(key, 7)
    with pytest.raises(DraftError, match="no version 7"):
        store.annotate(key, 7, "x")


def test_a_note_is_put_on_a_version(store):
    draft = store.create("", "a.toml")
    store.annotate(draft.id, 1, "before the meeting")
    assert store.versions(draft.id)[0].note == "before the meeting"


def test_the_file_is_its_owners_and_in_write_ahead_mode(store):
    store.create("", "a.toml")
    assert stat.S_IMODE(store.path.stat().st_mode) == 0o600
    with sqlite3.connect(store.path) as db:
        assert db.execute("PRAGMA journal_mode").fetchone() == ("wal",)


def test_an_older_store_is_brought_up_to_date(store, monkeypatch):
    old = store.create("one", "a.toml")
    step = ("ALTER TABLE drafts ADD COLUMN colour TEXT NOT NULL DEFAULT 'grey'",)
    monkeypatch.setattr(schema, "MIGRATIONS", (*schema.MIGRATIONS, step))
    monkeypatch.setattr(schema, "SCHEMA", schema.SCHEMA + 1)
    assert Store(store.path).get(old.id) == old
    with sqlite3.connect(store.path) as db:
        assert db.execute("PRAGMA user_version").fetchone() == (schema.SCHEMA,)
        assert db.execute("SELECT colour FROM drafts").fetchone() == ("grey",)


def test_a_migration_that_fails_leaves_the_store_as_it_was(store, monkeypatch):
    old = store.create("one", "a.toml")
    broken = ("ALTER TABLE drafts ADD COLUMN colour TEXT", "ALTER TABLE nowhere ADD COLUMN x TEXT")
    with monkeypatch.context() as patch:
        patch.setattr(schema, "MIGRATIONS", (*schema.MIGRATIONS, broken))
        patch.setattr(schema, "SCHEMA", schema.SCHEMA + 1)
        with pytest.raises(DraftError, match="nowhere"):
            Store(store.path).get(old.id)
    assert Store(store.path).get(old.id) == old


def test_a_newer_store_is_refused_in_words_and_left_alone(store):
    store.create("one", "a.toml")
    with sqlite3.connect(store.path) as db:
        db.execute("PRAGMA user_version = 99")
    before = store.path.read_bytes()
    with pytest.raises(DraftError, match=r"newer version of this program \(schema 99"):
        Store(store.path).create("two", "b.toml")
    assert store.path.read_bytes() == before


def test_another_programs_file_is_refused_and_left_alone(tmp_path):
    path = tmp_path / "other.sqlite"
    with sqlite3.connect(path) as db:
        db.execute("CREATE TABLE theirs (x)")
    with pytest.raises(DraftError, match="another program"):
        Store(path).create("one", "a.toml")
    text = tmp_path / "notes.txt"
    text.write_text("no database, but long enough to be looked at by one " * 20)
    with pytest.raises(DraftError, match="not an SQLite file"):
        Store(text).create("one", "a.toml")
    assert text.read_text().startswith("no database")


def test_a_place_that_cannot_be_written_is_said(tmp_path):
    (tmp_path / "file").write_text("")
    with pytest.raises(DraftError, match="cannot be opened"):
        Store(tmp_path / "file" / "drafts.sqlite").create("one", "a.toml")


def test_the_place_follows_the_environment(monkeypatch, tmp_path):
    monkeypatch.setenv("NGM_DRAFTS", str(tmp_path / "here.sqlite"))
    assert place() == tmp_path / "here.sqlite"
    monkeypatch.delenv("NGM_DRAFTS")
    monkeypatch.setenv("XDG_DATA_HOME", str(tmp_path))
    assert place() == tmp_path / "ngm" / "drafts.sqlite"


def test_what_was_thrown_away_can_be_brought_back_for_a_month(store, monkeypatch):
    draft = save(store, store.create("one", "a.toml", owner="ada"), "two")
    store.discard(draft.id)
    assert store.get(draft.id) is None
    assert store.of_owner("ada") == []
    assert store.discarded(draft.id) is not None
    with pytest.raises(DraftError, match="no draft"):
        store.save(draft.id, draft.rev, "three")
    store.create("other", "b.toml")  # what is thrown away is not taken out at once
    back = store.recover(draft.id)
    assert (back.text, back.head) == ("two", 2)
    assert store.discarded(draft.id) is None
    assert texts(store, draft.id) == ["two", "one"]
    store.discard(draft.id)
    monkeypatch.setattr("ngm.drafts.store.GRACE", -1.0)
    store.create("other", "c.toml")
    assert store.recover(draft.id) is None
    assert store.recover("nowhere") is None


def test_a_text_and_a_draft_have_their_limits(store, monkeypatch):
    monkeypatch.setattr("ngm.drafts.store.MOST_TEXT", 1000)
    monkeypatch.setattr("ngm.drafts.store.MOST_DRAFT", 60)
    draft = store.create("one", "a.toml")
    with pytest.raises(DraftError, match="1,001 bytes"):
        store.save(draft.id, draft.rev, "x" * 1001)
    draft = filled(store, draft, [f"text {k}" for k in range(30)], "has reached")
    assert store.get(draft.id) == draft  # and what is there stays


def test_a_full_store_says_so_and_keeps_what_it_has(store, monkeypatch):
    draft = store.create("one", "a.toml")
    monkeypatch.setenv("NGM_DRAFTS_MOST_MB", "1")
    noise = random.Random(1).randbytes(400_000).hex()  # compresses to half at best
    draft = filled(store, draft, [noise[k:] for k in range(20)], "NGM_DRAFTS_MOST_MB")
    assert store.get(draft.id) == draft


def test_a_store_of_the_first_schema_is_brought_up_to_date(store, tmp_path, monkeypatch):
    with monkeypatch.context() as patch:
        patch.setattr(schema, "MIGRATIONS", schema.MIGRATIONS[:1])
        patch.setattr(schema, "SCHEMA", 1)
        store.path.parent.mkdir(parents=True)
        with sqlite3.connect(store.path) as db:
            schema.migrate(db, store.path)
            db.execute("INSERT INTO drafts VALUES ('k', 'a.toml', '', 'ada', 1.0, 2.0, 1, 1)")
            blob = zlib.compress(b"old")
            db.execute("INSERT INTO versions VALUES ('k', 1, NULL, 1.0, '', 1, 0, ?)", (blob,))
            db.commit()
    assert store.get("k").text == "old"
    assert store.of_owner("ada") == [("k", "a.toml", 2.0)]
    with sqlite3.connect(store.path) as db:
        assert db.execute("SELECT size FROM drafts").fetchone() == (len(blob),)
