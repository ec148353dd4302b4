"""Reading matrices that stand in the file: what is accepted, what is refused and with which words, and edits."""

from __future__ import annotations

import pytest

import ngm
from ngm.errors import ScenarioError
from ngm.scenario.edit import set_value
from ngm.scenario.file import loads
from ngm.scenario.stated import compartments_of, flows_of, internal_names
from tests.stated import HEAD, change, given, population

TWO = [[0, 1.5], [2, 0]]
F, T = [[0, 2], [0, 0]], [[0, 0], [0.3, 0.8]]


def refusal(text: str) -> str:
    with pytest.raises(ScenarioError) as caught:
        loads(text)
    return str(caught.value)


def test_entries_keep_what_is_typed():
    scenario = loads(given([["0", "c * p"], ["1/3", 2.50]], ["tick", "mouse"], {"c": 2, "p": 0.1}, 'sizes = [3, "c"]'))
    assert scenario.given.types == ("tick", "mouse")
    assert [[entry.text for entry in row] for row in scenario.given.K] == [["0", "c * p"], ["1/3", "2.5"]]
    assert [size.text for size in scenario.given.sizes] == ["3", "c"]
    assert not scenario.discrete
    people = loads(population(F, T))
    assert people.discrete
    assert [[entry.text for entry in row] for row in people.projection.transitions] == [["0", "0"], ["0.3", "0.8"]]
    assert people.given is None
    assert scenario.projection is None


@pytest.mark.parametrize("label", ["0-4", "I_h", "C", "p", "mouse (adult)", "β", "sum", "lambda", "#p", "a b"])
def test_any_label_is_a_type(label):
    # A label is no name: it may be that of a parameter, of a function, or none at all.
    text = given(
        [["p", 1], [1, 0]], [label, "other"], {"p": 0.5}, tail=change(f'susceptibility = "{label}", reduce = 1')
    )
    scenario = loads(text)
    assert ngm.solve(scenario, limit=0).types == (label, "other")
    assert ngm.solve(scenario).symbolic.K == (("p", "1"), ("1", "0"))
    (row,) = ngm.compare(scenario).interventions
    assert row.R0 == 0  # nobody infects `label` any more: [[0, 0], [1, 0]]


def test_names_of_types_inside():
    # The arrows behind a matrix: F = K, V = I, by hand.
    assert internal_names(["a", "p", "#x"], {"p"}) == ("a", "p'", "#x'")
    scenario = loads(given([[0, "p"], [1, 0]], ["a", "p"], {"p": 2}))
    assert list(scenario.compartments) == ["a", "p'"]
    assert list(scenario.compartments.values()) == list(compartments_of(("a", "p'"), ("a", "p")).values())
    assert [(f.source, f.target, f.kind) for f in flows_of(scenario.given, ("a", "p'"))] == [
        (None, "a", "transmission"),
        (None, "p'", "transmission"),
        ("a", None, "transition"),
        ("p'", None, "transition"),
    ]


WRONG = [
    # types and stages
    (given(TWO, ["a", "a"]), ("next_generation, types: 'a' stands twice", "Each type has a label of its own")),
    (given(TWO, ["a", ""]), ("a type has an empty label",)),
    (given(TWO, ["a,b", "c"]), ("'a,b' holds a comma", "which a label cannot")),
    (given(TWO).replace("types", "typs"), ("Did you mean 'types'?", "types is missing")),
    (given(TWO).replace('types = ["t1", "t2"]', 'types = "t1"'), ("types: expected a list of names", "the text 't1'")),
    (given(TWO).replace('types = ["t1", "t2"]', "types = []"), ("types: is empty. Name at least one type",)),
    (
        given(TWO).replace('types = ["t1", "t2"]', "types = [1, 2]"),
        ("the label of a type in quotes, not the number 1",),
    ),
    (population(F, T, ["x", "x"]), ("projection, stages: 'x' stands twice", "Each stage has")),
    # shapes
    (given([[1, 2]], ["a", "b"]), ("next_generation, K: has 1 row for 2 labels (a, b)",)),
    (given([[1, 2], [3]], ["a", "b"]), ("K: row 2 (b) has 1 entry for 2 columns (a, b)",)),
    (given([[1], [2], [3]], ["a", "b", "c"]), ("row 1 (a) has 1 entry for 3 columns",)),
    (given(TWO).replace("K = [[0, 1.5], [2, 0]]", "K = 3"), ("K: expected a list of rows",)),
    (given(TWO).replace("K = [[0, 1.5], [2, 0]]", ""), ("K is missing", "row: the type infected")),
    (given(TWO, more="sizes = [1]"), ("next_generation, sizes: 1 size for 2 types (t1, t2)",)),
    (given(TWO, more="sizes = 4"), ("sizes: expected a list, one number of members for each type",)),
    (given(TWO, more="sizes = [1, -2]"), ("sizes[t2]: -2 is negative",)),
    (population(F, [[0]]), ("projection, transitions: has 1 row for 2 labels",)),
    (population(F, T).replace("births", "birth"), ("births is missing", "Did you mean 'births'?")),
    # entries
    (given([[0, -0.5], [1, 0]]), ("K[t1, t2]: -0.5 is negative. An entry is positive or zero",)),
    (given([[0, "1 - 2"], [1, 0]]), ("K[t1, t2]: 1 - 2 is negative",)),
    (given([[0, "1/0"], [1, 0]]), ("K[t1, t2]: this divides by 0",)),
    (given([[0, True], [1, 0]]), ("K[t1, t2]: expected a number or an expression in quotes, not true",)),
    (given([[0, "bata"], [1, 0]], values={"beta": 1}), ("K[t1, t2]: 'bata' is not defined. Did you mean 'beta'?", "^")),
    (given([[0, "t1"], [1, 0]]), ("K[t1, t2]: 't1' is not defined",)),
    (given([[0, "2 *"], [1, 0]]), ("K[t1, t2]", "expected")),
    (given([[0, "C(1)"], [1, 0]]), ("K[t1, t2]",)),
    (given([[0, "sum(1)"], [1, 0]]), ("sum adds over groups, and this file has no [dimensions]",)),
    (population([[0, -1], [0, 0]], T), ("projection, births[s1, s2]: -1 is negative",)),
    (population(F, [[0, 0], [-0.1, 0]]), ("projection, transitions[s2, s1]: -0.1 is negative",)),
    # what cannot stand beside it
    (
        given(TWO, tail="[compartments]\nI = { infected = true }\n"),
        ("[compartments]: cannot stand beside [next_generation]",),
    ),
    (given(TWO, tail='[[flow]]\nfrom = "I"\n'), ("[[flow]]: cannot stand beside [next_generation]", "Leave out one")),
    (given(TWO, tail="[infection_free]\nS = 1\n"), ("[infection_free]: cannot stand beside", "no uninfected")),
    (given(TWO, tail="[state_now]\nS = 1\n"), ("[state_now]: cannot stand beside", "no effective number")),
    (
        population(F, T, tail='[dimensions]\ng = ["a"]\n[matrices.C]\nby = "g"\nvalues = [[1]]\n'),
        ("[matrices]: cannot",),
    ),
    (population(F, T, tail="[next_generation]\ntypes = []\n"), ("[projection]: stands beside [next_generation]",)),
    (given(TWO).replace('time_unit = "year"\n', ""), ("time_unit is missing",)),
    (HEAD + "[next_generation]\n", ("types is missing", "K is missing")),
    (HEAD + "next_generation = 3\n", ("is not a key that is known here",)),
    ("next_generation = 3\n" + HEAD, ("next_generation: expected a table, not the number 3",)),
    # parameters
    (
        population([[0, "b"], [0, 0]], T, tail='[parameters]\nb = { value = 3, unit = "1/day" }\n'),
        ("is a share in another unit of time than the step of one year",),
    ),
    (
        given(
            [[0, "b"], [1, 0]],
            tail="[parameters]\nb = { value = 3, season = { amplitude = 0.1, peak = 0, period = 1 } }\n",
        ),
        ("parameters.b, season: cannot stand beside [next_generation], which holds one matrix for all times",),
    ),
    # interventions
    (
        given(TWO, tail=change('susceptibility = "T1", reduce = 0.5')),
        ("'T1' is not a type of this file. Did you mean 't1'?",),
    ),
    (given(TWO, tail=change("infectivity = 3, reduce = 0.5")), ("expected the label of a type in quotes",)),
    (given(TWO, tail=change('matrix = "K", multiply = 2')), ("'K' is not a matrix of this file",)),
    (
        given(TWO, tail=change('infectivity = "t1", reduce = 30')),
        ("reduce = 30 lies outside [0, 1]. For 30 % write 0.30",),
    ),
    (given([[1, 0], [1, 0]], tail=change('infectivity = "t2", reduce = 1')), ("the column of t2 is 0",)),
    (
        population(F, T, tail=change('susceptibility = "s2", reduce = 1')),
        ("the row of s2 is 0: nobody is born into it",),
    ),
    (given(TWO, tail=change('infectivity = "t1", reduce = 1, group = { age = "x" }')), ("t1 is not grouped",)),
]


@pytest.mark.parametrize(("text", "expected"), WRONG)
def test_wrong_files_are_refused_with_place_and_advice(text, expected):
    told = refusal(text)
    for part in expected:
        assert part in told, told
    assert len(told) < 2000


def test_grouped_parameters_are_summed():
    tail = '[dimensions]\nage = ["young", "old"]\n[parameters]\nb = { value = [1, 2], by = ["age"] }\n'
    assert ngm.solve(loads(given([["sum(b)"]], tail=tail)), limit=0).R0 == 3
    assert "varies over age" in refusal(given([["b"]], tail=tail))


def test_problems_carry_the_place_in_the_file():
    with pytest.raises(ScenarioError) as caught:
        loads(given([[0, 1], [-1, -2]]))
    assert [p.key for p in caught.value.problems] == [("next_generation", "K", 1, 0), ("next_generation", "K", 1, 1)]


def test_what_is_doubtful_is_told():
    text = given(TWO).replace('time_unit = "year"', 'time_unit = "year"\ntime = "discrete"')
    assert any("changes nothing here" in warning for warning in loads(text).warnings)
    assert any("column of s1 adds up to 1.5" in w for w in loads(population(F, [[0.9, 0], [0.6, 0]])).warnings)


def test_units_of_entries_are_checked():
    def text(unit: str, entry: str) -> str:
        values = f'[parameters]\nb = {{ value = 2, unit = "{unit}" }}\nd = {{ value = 3, unit = "day" }}\n'
        return given([[entry]], tail=values).replace('"year"', '"day"')

    assert not loads(text("1/day", "b * d")).warnings
    assert not loads(text("mouse/tick", "b")).warnings
    (wrong,) = loads(text("1/day", "b")).warnings
    assert wrong.startswith("Units: next_generation, K[t1, t1]: is in 1/day, where a pure number is needed")
    # A step is counted: births per year in a projection of yearly steps are a number.
    births = '[parameters]\nb = { value = 2, unit = "eggs/year" }\n'
    assert not loads(population([[0, "b"], [0, 0]], T, tail=births)).warnings


def test_values_are_replaced_and_written_back():
    text = given([[0, "c"], [2, 0]], values={"c": 2})
    changed = loads(text).with_values(c="9/2")
    assert changed.text == text.replace("c = { value = 2 }", 'c = { value = "9/2" }')
    assert ngm.solve(changed, limit=0).R0 == 3
    assert ngm.solve(loads(changed.text), limit=0).R0 == 3


def test_an_edit_changes_one_entry():
    # Expected by hand: one entry of one row.
    text = given([[0, 1.5], [2, 0]])
    edited = set_value(text, ("next_generation", "K", 0, 1), "c * 2")
    assert edited == text.replace("1.5", '"c * 2"')
