"""The page on control: the analyst's way through it, every state, and figures that are those of the command line."""

from __future__ import annotations

import hashlib
import json
import re
import shlex

import pytest

from ngm.__main__ import main
from ngm.screens import shelf
from ngm.screens.state import AppState, Version
from tests.screens.test_pages import STATES, metrics, start, text_of, visit, words

NAME = "age-groups-ember-cough.toml"
QUESTIONS = ("Compare interventions", "Strength needed", "Whom to act on", "Coverage", "Share a supply")


@pytest.fixture
def page():
    text, folder = shelf.read(NAME)
    return start(AppState(now=Version(text, NAME, folder, text)), "control")


def ask(at, question):
    return at.radio(key="control.question").set_value(question).run()


def fill(at, field, value):
    return at.text_input(key=f"control.{field}").set_value(value).run()


def tables(at):
    """Return the cells of every table, unescaped."""
    out = []
    for shown in at.table:
        frame = shown.value
        out.append(
            [[re.sub(r"\\(.)", r"\1", str(cell)) for cell in row] for row in [list(frame.columns), *frame.values]]
        )
    return out


def plainly(at):
    return words(at).replace("\\", "")


def by_command(at, capsys):
    """Run the command that the page shows and return its JSON."""
    code = next(block.value for block in at.code if block.value.startswith("python -m ngm"))
    arguments = shlex.split(code)[3:]
    assert arguments[1] == NAME
    arguments[1] = f"scenarios/{NAME}"
    assert main([*arguments, "--json"]) == 0
    return json.loads(capsys.readouterr().out)


@pytest.mark.parametrize("held", STATES.values(), ids=STATES)
@pytest.mark.parametrize("question", QUESTIONS)
def test_every_question_in_every_state(held, question):
    at = start(held, "control")
    if at.radio:
        ask(at, question)
        for button in [b for b in at.button if b.key and b.key.endswith(".go")]:
            button.click().run()
    assert not at.exception
    assert at.title[0].value == "Control"


@pytest.mark.parametrize("name", shelf.names())
def test_every_scenario_of_the_shelf_answers(name):
    text, folder = shelf.read(name)
    at = start(AppState(now=Version(text, name, folder, text)), "control")
    for question in QUESTIONS:
        ask(at, question)
        assert not at.exception
        if question != "Coverage":  # where a coverage cannot be enough, that is said in red
            assert not at.error


def test_without_a_scenario_it_says_where_to_open_one():
    assert "No scenario is open" in words(start(None, "control"))


def test_cautions_stand_below_every_question(page):
    for question in QUESTIONS:
        ask(page, question)
        said = words(page)
        assert "no forecast" in said
        assert "too small about half the time" in said
        assert "authority responsible" in said


# -- the way of an analyst ---------------------------------------------------------------------------------------------


def test_children_alone_cannot_be_the_target(page, capsys):
    ask(page, "Whom to act on")
    rows = {row[0]: row for row in tables(page)[0][1:]}
    told = by_command(page, capsys)["type_reproduction"]
    assert rows["E[0-4] + E[5-17]"][1:3] == ["–", "cannot work alone"]
    assert "sustains itself" in rows["E[0-4] + E[5-17]"][3]
    assert len(rows) == len(told) == 15
    page.toggle(key="control.precision").set_value(True).run()
    for number, row in zip(told, tables(page)[0][1:], strict=True):
        assert row[0] == " + ".join(number["types"])
        if number["T"] is not None:
            assert (float(row[1]), float(row[2])) == (number["T"], number["critical_effort"])


def test_coverage_of_adults(page, capsys):
    ask(page, "Coverage")
    page.multiselect(key="control.groups").set_value(["18-64"]).run()
    fill(page, "efficacy", "70 %")
    page.toggle(key="control.precision").set_value(True).run()
    told = by_command(page, capsys)
    assert told["groups"] == ["18-64"]
    assert told["efficacies"] == [0.7]
    row = tables(page)[0][1]
    assert [float(cell) for cell in row[1:5]] == [told[k] for k in ("T", "critical_effort", "coverage", "at_full")]
    assert 0 < told["coverage"] < 1
    assert "85.71 % of 18-64 must be vaccinated" in "\n".join(box.value for box in page.success).replace("\\", "")


def test_coverage_of_children_is_refused_in_words(page, capsys):
    ask(page, "Coverage")
    page.multiselect(key="control.groups").set_value(["0-4", "5-17"]).run()
    assert "cannot be enough" in plainly(page)
    rows = tables(page)[0]
    assert [row[0] for row in rows[1:]] == ["0-4, 5-17 together", "0-4 alone", "5-17 alone"]
    assert all(row[2] == "cannot work alone" and row[3] == "unattainable" for row in rows[1:])
    assert by_command(page, capsys)["coverage"] is None


def test_coverage_with_every_field(page, capsys):
    ask(page, "Coverage")
    fill(page, "efficacy", "0.9")
    fill(page, "spread", "0.5")
    fill(page, "waning", "0.005")
    fill(page, "turnover", "0.02")
    fill(page, "target", "1.2")
    page.multiselect(key="control.besides").set_value(["Masks"]).run()
    page.selectbox(key="control.kind_of_vaccine").set_value("all-or-nothing: some wholly").run()
    told = by_command(page, capsys)
    assert told["lasting"] == pytest.approx(0.8)  # by hand: 0.02/0.025
    assert told["efficacies"] == pytest.approx([0.95] * 4)  # by hand: 1 - 0.1*0.5
    assert (told["kind"], told["target"], told["in_force"]) == ("all-or-nothing", 1.2, ["Masks"])
    assert "Protection wanes: 80 % of coverage" in plainly(page)
    page.toggle(key="control.precision").set_value(True).run()
    assert float(tables(page)[0][1][3]) == told["coverage"]


def test_a_hundred_thousand_doses(page, capsys):
    ask(page, "Share a supply")
    assert "Type how many doses" in words(page)
    fill(page, "supply", "100 000")
    fill(page, "efficacy", "0.7")
    assert not page.metric or "Best share found" not in metrics(page)  # only when asked for
    page.button(key="control.sharing.go").click().run()
    told = by_command(page, capsys)
    assert told["supply"] == 100_000
    page.toggle(key="control.precision").set_value(True).run()
    shown = metrics(page)
    even = next(rule for rule in told["rules"] if rule["rule"] == "by population")
    assert float(shown["Without the supply"]) == told["R0"]
    assert float(shown["Best share found"]) == told["best"]["R0"]
    assert float(shown["Shared by population"]) == even["R0"]
    assert [float(row[1]) for row in tables(page)[0][1:]] == [told["best"]["R0"], *(r["R0"] for r in told["rules"])]
    assert f"{even['R0']:.6g}, {100 * (even['R0'] / told['best']['R0'] - 1):.4g} % more" in plainly(page)
    assert "control reproduction number" in words(page).lower()
    visit(page, "scenario")
    visit(page, "control")
    assert "Best share found" in metrics(page)  # what was asked is still there
    fill(page, "supply", "50000")
    assert "Best share found" not in metrics(page)
    assert "press the button" in words(page)


def test_a_supply_with_values_of_single_groups(page, capsys):
    ask(page, "Share a supply")
    fill(page, "supply", "50000")
    token = hashlib.sha256(b"0-4\n5-17\n18-64\n65+").hexdigest()[:8]
    key = f"control.by_group.{token}.5"
    edited = {2: {"efficacy": "0.5", "upper": "2 %"}, 3: {"members": "1000", "cost": "2"}}
    page.session_state[key] = {"edited_rows": edited, "added_rows": [], "deleted_rows": []}
    page.run()
    page.button(key="control.sharing.go").click().run()
    told = by_command(page, capsys)
    assert told["efficacies"] == [1, 1, 0.5, 1]
    assert told["upper"] == [1, 1, 0.02, 1]
    assert told["costs"] == [1, 1, 1, 2]
    assert told["sizes"] == [60_000, 140_000, 620_000, 1000]
    page.toggle(key="control.precision").set_value(True).run()
    assert float(metrics(page)["Best share found"]) == told["best"]["R0"]
    visit(page, "scenario")
    visit(page, "control")
    assert float(metrics(page)["Best share found"]) == told["best"]["R0"]


@pytest.mark.parametrize(
    ("question", "field", "value", "message"),
    [
        ("Coverage", "efficacy", "0,7", "after a point"),
        ("Coverage", "efficacy", "70", "For 70 % write 0.7"),
        ("Coverage", "target", "x", "no number"),
        ("Coverage", "waning", "0.1", "turnover"),
        ("Share a supply", "supply", "many", "no number"),
        ("Strength needed", "target", "x", "no number"),
    ],
)
def test_wrong_entries_are_told_and_kept(page, question, field, value, message):
    ask(page, question)
    fill(page, field, value)
    assert message in plainly(page)
    assert not page.exception
    visit(page, "scenario")
    visit(page, "control")
    assert page.text_input(key=f"control.{field}").value == value


def test_five_packages(page, capsys):
    page.toggle(key="control.precision").set_value(True).run()
    told = by_command(page, capsys)
    rows = tables(page)[0][1:]
    assert len(told["interventions"]) == 5
    assert [row[0] for row in rows] == ["Baseline", *(one["name"] for one in told["interventions"])]
    assert [float(row[1]) for row in rows] == [told["baseline"]["R0"], *(one["R0"] for one in told["interventions"])]
    assert [row[2] for row in rows[1:]] == ["yes" if one["below_one"] else "no" for one in told["interventions"]]
    assert "control reproduction number" in words(page)


def test_the_order_is_the_users(page):
    page.selectbox(key="control.order").set_value("smallest number first").run()
    numbers = [float(row[1]) for row in tables(page)[0][2:]]
    assert numbers == sorted(numbers)
    page.selectbox(key="control.order").set_value("cost for each share of R0 removed").run()
    rows = tables(page)[0][2:]
    prices = [float(row[6]) / float(row[3].removesuffix(" %")) for row in rows]
    assert prices == sorted(prices)


def test_combinations(page, capsys):
    page.multiselect(key="control.picked").set_value(["Masks", "Schools closed"]).run()
    page.button(key="control.combine").click().run()
    page.toggle(key="control.precision").set_value(True).run()
    row = tables(page)[0][-1]
    assert row[0] == "Masks + Schools closed"
    told = by_command(page, capsys)["interventions"][-1]
    assert (float(row[1]), float(row[6])) == (told["R0"], told["cost"])
    visit(page, "scenario")
    visit(page, "control")
    assert tables(page)[0][-1][0] == "Masks + Schools closed"
    page.button(key="control.remove.0").click().run()
    assert len(tables(page)[0]) == 7


def test_strengths(page, capsys):
    ask(page, "Strength needed")
    assert not page.table
    page.button(key="control.strengths.go").click().run()
    page.toggle(key="control.precision").set_value(True).run()
    page.selectbox(key="control.curve").set_value("Vaccination of adults").run()
    told = by_command(page, capsys)
    rows = {row[0]: row for row in tables(page)[0][1:]}
    assert float(rows["Vaccination of adults"][1]) == told["strength"]
    assert float(rows["Vaccination of adults"][2]) == told["at_full"]
    assert rows["Masks"][1] == "unattainable"
    page.multiselect(key="control.besides").set_value(["Masks"]).run()
    assert "press the button" in words(page)
    page.button(key="control.strengths.go").click().run()
    rows = {row[0]: row for row in tables(page)[0][1:]}
    assert "Masks" not in rows
    assert float(rows["Vaccination of adults"][1]) == by_command(page, capsys)["strength"]


# -- editing ------------------------------------------------------------------------------------------------------------


def edit(at, table, *, edited=None, added=(), deleted=()):
    """Change a table as the grid in the browser does."""
    number = f"control.{table}.number"
    began_anew = at.session_state[number] if number in at.session_state else 0  # noqa: SIM401, it has no get
    key = f"control.{table}.{at.session_state['ngm'].forms}.{began_anew}"
    at.session_state[key] = {"edited_rows": edited or {}, "added_rows": list(added), "deleted_rows": list(deleted)}
    return at.run()


def shown_names(at):
    return [row[0] for row in tables(at)[0][2:]]


def test_an_edited_amount_moves_the_number(page):
    before = text_of(page)
    edit(page, "changes", edited={0: {"amount": "0.5"}})
    assert not page.exception
    rows = {row[0]: row for row in tables(page)[0][1:]}
    assert rows["Masks"][3] == "50 %"  # by hand: half of q is half of K
    assert text_of(page) == before.replace('"q", multiply = 0.8 }]', '"q", multiply = 0.5 }]')


def test_what_is_wrong_stays_and_is_told_beside_the_table(page):
    edit(page, "changes", edited={0: {"amount": "0,5"}})
    said = plainly(page)
    assert "in these tables" in said
    assert "not of what is typed now" in said
    assert 'multiply = "0,5"' in text_of(page)
    visit(page, "scenario")
    visit(page, "control")
    edit(page, "changes", edited={0: {"amount": "0.5"}})
    assert not page.error
    assert {row[0]: row for row in tables(page)[0][1:]}["Masks"][3] == "50 %"


def test_a_new_intervention_and_its_cost(page):
    row = {"intervention": "Holiday", "what": "parameter", "name": "q", "action": "multiply", "amount": "0.9"}
    edit(page, "changes", added=[row])
    assert shown_names(page)[-1] == "Holiday"
    edit(page, "packages", edited={5: {"cost": "0.5", "note": "By hand."}})
    assert tables(page)[0][-1][6] == "0.5"
    assert "By hand" in words(page)


def test_a_renamed_intervention_keeps_its_changes(page):
    edit(page, "packages", edited={0: {"name": "Face masks"}})
    assert shown_names(page)[0] == "Face masks"
    # The table of changes has started afresh, from the new name.
    edit(page, "changes", edited={0: {"amount": "0.5"}})
    assert shown_names(page).count("Face masks") == 1
    assert len(shown_names(page)) == 5


def test_a_removed_intervention(page):
    edit(page, "packages", deleted=[4])
    assert len(shown_names(page)) == 4
    page.sidebar.button(key="status.undo").click().run()
    assert len(shown_names(page)) == 5


def test_a_scenario_without_interventions_says_how_to_begin():
    at = start(STATES["loaded"], "control")
    assert "no intervention yet" in words(at)
    row = {"intervention": "Distance", "what": "parameter", "name": "beta", "action": "multiply", "amount": "0.2"}
    edit(at, "changes", added=[row])
    assert not at.exception
    rows = tables(at)[0]
    assert rows[2][:3] == ["Distance", "0.5", "yes"]  # by hand: 0.2 * 2.5


def test_a_case_that_cannot_be_evaluated_is_told_and_the_others_stay(page):
    row = {"intervention": "Too much", "what": "parameter", "name": "gamma", "action": "add", "amount": "-1"}
    edit(page, "changes", added=[row])
    rows = {row[0]: row for row in tables(page)[0][1:]}
    assert rows["Too much"][1] == "none"
    assert rows["Masks"][1] == "1.297"
    assert "Too much" in "\n".join(box.value for box in page.warning)


def test_many_types_are_compared_when_asked_for():
    at = start(STATES["many groups"], "control")
    row = {"intervention": "Distance", "what": "parameter", "name": "beta", "action": "multiply", "amount": "0.2"}
    edit(at, "changes", added=[row])
    assert not at.table
    at.button(key="control.compare.go").click().run()
    assert tables(at)[0][2][1] == "0.4"  # by hand: 0.2 * 2


def test_without_an_R0_nothing_is_called_one():
    at = start(STATES["no R0"], "control")
    for question in QUESTIONS:
        ask(at, question)
        assert "No R0 at these values" in words(at)
        assert not at.exception


def test_per_cycle_is_said_where_there_is_a_period():
    text, folder = shelf.read("vector-borne-ostrel-fever.toml")
    at = ask(start(AppState(now=Version(text, "v.toml", folder, text)), "control"), "Whom to act on")
    assert "per cycle" in words(at)


def test_several_routes_acted_on_together(page, capsys):
    at = ask(page, "Whom to act on")
    at.selectbox(key="control.kind").select("routes: infection of one type by another").run()
    chosen = ["E[18-64] infecting E[18-64]", "E[5-17] infecting E[5-17]"]
    at.multiselect(key="control.routes").set_value(chosen).run()
    assert not at.exception
    heads, row = next(t for t in tables(at) if t[0][0] == "targets")
    assert heads[1:3] == ["T", "critical effort"]
    # Second route: the same on the command line.
    entries = ["--entry", "E[18-64]<-E[18-64]", "--entry", "E[5-17]<-E[5-17]"]
    assert main(["control", f"scenarios/{NAME}", *entries]) == 0
    told = next(line for line in capsys.readouterr().out.splitlines() if line.startswith("Together:"))
    T = float(re.search(r"T = ([0-9.]+)", told)[1])
    assert row[0] == " + ".join(chosen)
    assert float(row[1]) == pytest.approx(T, rel=1e-3)
    at.multiselect(key="control.routes").set_value(chosen[:1]).run()
    assert not [t for t in tables(at) if t[0][0] == "targets"]


def test_waning_that_the_model_has_is_named_beside_the_coverage():
    name = "vaccination-copper-spots.toml"
    text, folder = shelf.read(name)
    at = ask(start(AppState(now=Version(text, name, folder, text)), "control"), "Coverage")
    assert not at.exception
    assert "Immunity of V (Vaccinated, still susceptible in part) wanes" in "\n".join(
        one.value.replace("\\", "") for one in at.info
    )
