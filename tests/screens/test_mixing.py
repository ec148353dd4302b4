"""The page on mixing: what it shows in each state, and an analyst's way through it."""

from __future__ import annotations

from decimal import Decimal
from pathlib import Path

import numpy as np
import pytest

import ngm
from ngm.screens import mixing_edits, shelf
from ngm.screens.state import AppState, Version
from tests.screens.test_pages import STATES, metrics, start, state, text_of, words
from tests.screens.texts import grouped

FOLDER = Path(__file__).resolve().parents[2] / "scenarios"
SIXTEEN = "sixteen-ages-marl-cough.toml"
R0 = "R0: basic reproduction number"


def opened(name=SIXTEEN):
    text, folder = shelf.read(name)
    return start(AppState(now=Version(text, name, folder, text)), "mixing")


def factor_on(at, name):
    return at.text_input(key=f"mixing.factor.{name}.{at.session_state['ngm'].source}")


def said(at):
    return words(at).replace("\\", "")


def table(at, head):
    """Return the first table on the page with this column."""
    return next(shown.value for shown in at.table if head in shown.value.columns)


def survey():
    """A matrix of sixteen ages, by rule and not reciprocal, and sizes of another town."""
    ages = ngm.load(FOLDER / SIXTEEN).dimensions["age"].groups
    k = np.arange(16)
    C = 0.2 + 1.5 * np.exp(-(((k[:, None] - k[None, :]) / 2) ** 2)) + 0.01 * k[None, :]
    lines = [",".join(["from/to", *ages])]
    lines += [",".join([age, *(f"{value:.2f}" for value in row)]) for age, row in zip(ages, C, strict=True)]
    sizes = [3000 + 250 * i for i in range(16)]
    return "\n".join(lines), "\n".join(f"{age},{size}" for age, size in zip(ages, sizes, strict=True)), sizes


def test_without_groups_it_says_what_to_do():
    at = start(STATES["loaded"], "mixing")
    assert not at.exception
    assert "contact matrix" in said(at)
    assert "Grouped by" in said(at)
    assert metrics(at)[R0] == "2.5"


def test_a_matrix_is_shown_with_its_orientation_and_sums():
    at = opened("age-groups-ember-cough.toml")
    assert not at.exception
    assert "one member of the row's group i" in said(at)
    found = ngm.mixing(ngm.load(FOLDER / "age-groups-ember-cough.toml"))
    sums = table(at, r"contacts of one member \(row sum\)")
    assert [float(cell.replace("\\", "")) for cell in sums.iloc[:, 1]] == pytest.approx(found.row_sums, rel=1e-3)
    # As the file has it: 5-17 count 0.7 * 14000 with 0-4, who count 1.4 * 6000 (by hand: 1400 / 9100).
    assert "15.38 %" in said(at)
    assert "5-17 counts" in said(at)


def test_the_matrix_read_the_other_way_round_comes_on_demand():
    at = opened("age-groups-ember-cough.toml")
    assert "cannot reveal" not in said(at)
    at.toggle(key="mixing.turned").set_value(True).run()
    assert "R0 cannot reveal a transposed matrix" in said(at)
    rows = table(at, "what they are")
    assert "transposed" in list(rows["contacts"])


def test_answers_and_the_map():
    at = opened("age-groups-ember-cough.toml")
    assert list(table(at, "elasticity of R0")["elasticity of R0"]) == ["1"]
    at.toggle(key="mixing.map").set_value(True).run()
    assert "Choose two different" not in said(at)
    at.selectbox(key="mixing.upward").select("parameter q").run()
    assert not at.exception
    assert "R0 = 1" in said(at)
    at.selectbox(key="mixing.upward").select("factor on contacts").run()
    assert "Choose two different" in said(at)


def test_tables_of_a_matrix_given_within_another_dimension():
    at = opened("age-by-region-lantern-rash.toml")
    assert not at.exception
    at.selectbox(key="mixing.within.meets").select("Southholm").run()
    assert "in Southholm" in said(at)
    at.selectbox(key="mixing.matrix").select("visits").run()
    assert not at.exception
    factor_on(at, "meets").set_value("0.5").run()
    assert "several tables" in said(at)
    at.button(key="mixing.intervene").click().run()
    assert ngm.loads(text_of(at)).interventions[-1].changes[0].name == "meets"


def test_an_earlier_version_is_shown_but_not_changed():
    text, folder = shelf.read("age-groups-ember-cough.toml")
    broken = text.replace("gamma * I", "gama * I")
    at = start(AppState(now=Version(broken, "a.toml", folder, text)), "mixing")
    assert "not of what is typed now" in words(at)
    assert not [button for button in at.button if button.key and button.key.startswith("mixing.")]


def test_a_scenario_with_many_groups_and_no_sizes():
    at = start(state(grouped(64)), "mixing")
    assert not at.exception
    assert "64 groups" in said(at)  # no elasticities by pair


def test_a_factor_that_is_no_number_is_told_at_its_field():
    at = opened()
    factor_on(at, "school").set_value("0,6").run()
    assert "'0,6' is no number. Write 0.6." in said(at)
    assert not any("Control" in label for label in metrics(at))


def test_an_analyst_brings_a_matrix_and_sizes_balances_and_lowers_school():
    matrix, sizes, members = survey()
    at = opened()
    before = metrics(at)[R0]
    at.selectbox(key="mixing.matrix").select("elsewhere").run()

    # The matrix: looked at first, and not taken before it is said who makes the contacts.
    at.text_area(key="mixing.paste").set_value(matrix).run()
    assert len(table(at, "column sum")) == 16
    assert at.button(key="mixing.take").disabled
    at.radio(key="mixing.makes").set_value("The row's group makes the contacts").run()
    at.button(key="mixing.take").click().run()
    assert not at.exception
    scenario = ngm.loads(text_of(at), folder=str(FOLDER))
    assert not scenario.matrices["elsewhere"].reciprocal
    assert scenario.matrices["elsewhere"].blocks[0][0][0] == Decimal("1.7")
    assert "# Row: the group that makes the contacts" in text_of(at)  # comments stay
    taken = metrics(at)[R0]
    assert taken != before

    # The sizes go where the scenario's own come from.
    at.text_area(key="mixing.sizes.paste").set_value(sizes).run()
    assert at.selectbox(key="mixing.sizes.into").value == "people"
    at.button(key="mixing.sizes.take").click().run()
    scenario = ngm.loads(text_of(at), folder=str(FOLDER))
    found = ngm.mixing(scenario, "elsewhere")
    assert found.sizes == tuple(members)

    # Not reciprocal, and by how much; a second route to the gap.
    C, N = np.array(found.given), np.array(members)
    T = N[:, None] * C
    gap = ((T - T.T) / ((T + T.T) / 2)).max()
    assert f"{100 * gap:.4g} %" in said(at)
    assert "elsewhere is not reciprocal" in said(at)
    at.button(key="mixing.balance").click().run()
    scenario = ngm.loads(text_of(at), folder=str(FOLDER))
    assert scenario.matrices["elsewhere"].reciprocal
    balanced = ngm.mixing(scenario, "elsewhere")
    assert balanced.in_force.R0 != found.in_force.R0
    assert balanced.in_force.case_mix != found.in_force.case_mix
    cases = table(at, "what they are").set_index("contacts")["R0"].str.replace("\\", "")
    assert cases[r"balanced \(in force\)"] == f"{balanced.in_force.R0:.4g}"
    assert cases["before the last change"] == f"{found.in_force.R0:.4g}"

    # School contacts lowered by 40 %: what was and what would be, then an intervention.
    factor_on(at, "school").set_value("0.6").run()
    shown = metrics(at)
    assert shown["R0 as it is"] == f"{balanced.in_force.R0:.4g}"
    at.button(key="mixing.intervene").click().run()
    scenario = ngm.loads(text_of(at), folder=str(FOLDER))
    row = ngm.compare(scenario).interventions[-1]
    assert row.name == "school times 0.6"
    assert shown["Control reproduction number with these factors"] == f"{row.R0:.4g}"
    assert row.R0 < balanced.in_force.R0
    assert at.button(key="mixing.intervene").disabled  # there is one of this name now


def test_factors_written_into_the_matrices():
    at = opened()
    factor_on(at, "school").set_value("0.6").run()
    control = metrics(at)["Control reproduction number with these factors"]
    at.button(key="mixing.write").click().run()
    assert not at.exception
    assert metrics(at)[R0] == control
    scenario = ngm.loads(text_of(at), folder=str(FOLDER))
    original = ngm.load(FOLDER / SIXTEEN)
    first = original.matrices["school"].blocks[0]
    assert scenario.matrices["school"].blocks[0] == tuple(tuple(v * Decimal("0.6") for v in row) for row in first)
    assert "before the last change" in list(table(at, "what they are")["contacts"])
    assert factor_on(at, "school").value == "1"
    at.sidebar.button(key="status.undo").click().run()
    assert text_of(at) == shelf.read(SIXTEEN)[0]


def test_the_columns_make_the_contacts():
    at = opened()
    matrix, _, _ = survey()
    at.text_area(key="mixing.paste").set_value(matrix).run()
    at.radio(key="mixing.makes").set_value("The column's group makes the contacts").run()
    at.checkbox(key="mixing.at_once").set_value(True).run()
    at.text_input(key="mixing.source").set_value('A "survey"').run()
    at.button(key="mixing.take").click().run()
    taken = ngm.loads(text_of(at), folder=str(FOLDER)).matrices["school"]
    assert taken.reciprocal
    assert taken.source == 'A "survey"'
    assert taken.blocks[0][3][0] == Decimal(matrix.splitlines()[1].split(",")[4])


@pytest.mark.parametrize(
    ("brought", "word"),
    [
        ("1,2\n3,4", "16"),
        ("from/to,0-4\n0-4,-1", "16 x 16"),
        ("nonsense", "header row and column"),
    ],
)
def test_what_cannot_be_taken_is_told_beside_its_cells(brought, word):
    at = opened()
    at.text_area(key="mixing.paste").set_value(brought).run()
    assert not at.exception
    assert "It cannot be taken" in said(at)
    assert word in said(at)
    assert text_of(at) == shelf.read(SIXTEEN)[0]
    assert not [button for button in at.button if button.key == "mixing.take"]


def test_a_file_that_is_no_text():
    at = opened()
    at.file_uploader(key="mixing.file").set_value(("a.csv", b"\xff\xfe\x00", "text/csv")).run()
    assert "no text in UTF-8" in said(at)


@pytest.mark.parametrize(
    ("brought", "word"),
    [("0-4,100", "no value for"), ("0-4,x\n5-9,2", "number"), ("old,3", "not a group")],
)
def test_sizes_that_cannot_be_taken(brought, word):
    at = opened()
    at.text_area(key="mixing.sizes.paste").set_value(brought).run()
    assert word in said(at)


def test_an_empty_group_is_named():
    _, sizes, _ = survey()
    at = opened()
    at.text_area(key="mixing.sizes.paste").set_value(sizes.replace("20-24,4000", "20-24,0")).run()
    assert "20-24 has no members" in said(at)


def test_a_population_that_is_none_changes_nothing():
    text = grouped(4)
    at = start(state(text), "mixing")
    at.selectbox(key="mixing.sizes.into")  # only a new parameter is offered
    at.text_area(key="mixing.sizes.paste").set_value("g0,1\ng1,1\ng2,2\ng3,4").run()
    at.button(key="mixing.sizes.take").click().run()
    assert "people = {" in text_of(at)
    assert "is not reciprocal" in said(at)
    at.text_input(key="mixing.population.C").set_value("bata").run()
    at.button(key="mixing.balance").click().run()
    assert "nothing was changed" in said(at)
    assert "reciprocal" not in text_of(at)
    at.text_input(key="mixing.population.C").set_value("people").run()
    at.button(key="mixing.balance").click().run()
    assert ngm.loads(text_of(at)).matrices["C"].reciprocal
    at.button(key="mixing.unbalance").click().run()
    assert not ngm.loads(text_of(at)).matrices["C"].reciprocal


@pytest.mark.parametrize(
    ("typed", "said"),
    [
        ("0.6", Decimal("0.6")),
        (" 2 ", Decimal(2)),
        ("0,6", "'0,6' is no number. Write 0.6."),
        ("40 %", "'40 %' is no number. Write 0.4."),
        ("half", "'half' is no number. Write 0.6 for 40 % less."),
        ("-1", "-1 is no factor: it lies between 0 and 1000. Write 0.6 for 40 % less."),
        ("nan", "nan is no factor: it lies between 0 and 1000. Write 0.6 for 40 % less."),
    ],
)
def test_factors_as_typed(typed, said):
    assert mixing_edits.factor(typed) == said


def test_a_new_parameter_takes_a_name_that_is_free():
    document = {"parameters": {"people": {}}, "compartments": {"members": {}}}
    assert mixing_edits.free_name({}, ("people", "members")) == "people"
    assert mixing_edits.free_name(document, ("people", "members")) == "people2"


def test_hostile_labels_stay_words():
    text = grouped(3).replace('"g0", "g1", "g2"', '"![x](http://a.b)", "<b>", "`"').replace("[x]", "(x)")
    at = start(state(text), "mixing")
    assert not at.exception
    for element in [*at.markdown, *at.caption, *at.error, *at.info, *at.warning]:
        assert "](http" not in element.value
