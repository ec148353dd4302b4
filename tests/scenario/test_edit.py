"""Edits: exactly the expected lines change. Expected differences are by hand."""

from __future__ import annotations

import difflib
import tomllib
from decimal import Decimal

import pytest

from ngm.errors import ScenarioError
from ngm.scenario.edit import delete, insert, move, rename, set_value, toml
from ngm.scenario.file import loads
from ngm.scenario.spans import members, statements

TEXT = '''# A file with comments everywhere.
[scenario]
title = "Edits"   # the title
time_unit = "day"

[dimensions]
age = ["young", "old"]

# order matters
[compartments]
S = { label = "Susceptible, {all}", infected = false, by = ["age"] }   # first
I = { infected = true, by = ["age"] } # second

[parameters]
beta  = { value = 0.4, unit = "1/day" }  # guess
"γ" = { value = [ 0.2, 0.3 ], by = ["age"] }

[parameters.long]
value = 3   # here
# a comment inside

[matrices.C]
by = "age"
values = [
    [1, 2],   # young
    [3, 4],
]

[definitions]
N = "S + I"

# Infection
[[flow]]
from = "S"
to = "I"
rate = """
beta * S * C(I / N)"""
kind = "transmission"

# Recovery
[[flow]]
from = "I"
to = "S"
rate = 'gamma * I'
kind = "transition"

[[flow]]
to = "S"
rate = "long"
kind = "transition"
# end of flows

[[intervention]]
name = "Masks"
change = [
  { parameter = "beta", multiply = 0.6 },
  { matrix = "C", multiply = 0.4, rows = ["old"] },
]

[[intervention]]
name = "Nested"
[[intervention.change]]
parameter = "beta"
multiply = 0.5
'''


def difference(new: str, old: str = TEXT) -> list[str]:
    lines = difflib.unified_diff(old.splitlines(), new.splitlines(), n=0, lineterm="")
    return [line for line in lines if not line.startswith(("---", "+++", "@@"))]


CASES: list[tuple[str, str, list[str]]] = [
    (
        "a value",
        set_value(TEXT, ("parameters", "beta", "value"), 0.5),
        ['-beta  = { value = 0.4, unit = "1/day" }  # guess', '+beta  = { value = 0.5, unit = "1/day" }  # guess'],
    ),
    (
        "a new key of an inline table",
        set_value(TEXT, ("parameters", "beta", "range"), [Decimal("0.20"), 0.6]),
        [
            '-beta  = { value = 0.4, unit = "1/day" }  # guess',
            '+beta  = { value = 0.4, unit = "1/day", range = [0.20, 0.6] }  # guess',
        ],
    ),
    (
        "a Greek name by its spelling",
        set_value(TEXT, ("parameters", "gamma", "value", 1), "1/3"),
        [
            '-"γ" = { value = [ 0.2, 0.3 ], by = ["age"] }',
            '+"γ" = { value = [ 0.2, "1/3" ], by = ["age"] }',
        ],
    ),
    (
        "a value in a table of its own",
        set_value(TEXT, ("parameters", "long", "value"), 4),
        ["-value = 3   # here", "+value = 4   # here"],
    ),
    (
        "a new key in a table of its own",
        set_value(TEXT, ("parameters", "long", "label"), "Births"),
        ['+label = "Births"'],
    ),
    (
        "a title",
        set_value(TEXT, ("scenario", "title"), 'A "b"'),
        [
            '-title = "Edits"   # the title',
            '+title = "A \\"b\\""   # the title',
        ],
    ),
    ("a summary", set_value(TEXT, ("scenario", "summary"), "x"), ['+summary = "x"']),
    (
        "an entry of a matrix",
        set_value(TEXT, ("matrices", "C", "values", 0, 1), 9),
        [
            "-    [1, 2],   # young",
            "+    [1, 9],   # young",
        ],
    ),
    (
        "a rate over two lines",
        set_value(TEXT, ("flow", 0, "rate"), "beta*S"),
        [
            '-rate = """',
            '-beta * S * C(I / N)"""',
            '+rate = "beta*S"',
        ],
    ),
    ("the second rate", set_value(TEXT, ("flow", 1, "rate"), "x"), ["-rate = 'gamma * I'", '+rate = "x"']),
    ("a label of a flow", set_value(TEXT, ("flow", 2, "label"), "Births"), ['+label = "Births"']),
    (
        "a new parameter",
        set_value(TEXT, ("parameters", "mu"), {"value": 0.1, "unit": "1/year"}),
        [
            '+mu = { value = 0.1, unit = "1/year" }',
        ],
    ),
    (
        "a new compartment",
        set_value(TEXT, ("compartments", "R"), {"label": "R", "infected": False}),
        [
            '+R = { label = "R", infected = false }',
        ],
    ),
    ("a new definition", set_value(TEXT, ("definitions", "β"), "x"), ['+"β" = "x"']),
    ("a new section", set_value(TEXT, ("infection_free", "S"), "long"), ["+[infection_free]", '+S = "long"', "+"]),
    (
        "a new matrix",
        set_value(TEXT, ("matrices", "A"), {"by": "age", "values": [[0, 1], [2, 0]]}),
        [
            "+",
            "+[matrices.A]",
            '+by = "age"',
            "+values = [",
            "+    [0, 1],",
            "+    [2, 0],",
            "+]",
        ],
    ),
    (
        "a new group",
        insert(TEXT, ("dimensions", "age", 2), "oldest"),
        [
            '-age = ["young", "old"]',
            '+age = ["young", "old", "oldest"]',
        ],
    ),
    (
        "a first group",
        insert(TEXT, ("dimensions", "age", 0), "new"),
        [
            '-age = ["young", "old"]',
            '+age = ["new", "young", "old"]',
        ],
    ),
    (
        "a change at the end",
        insert(TEXT, ("intervention", 0, "change", 2), {"parameter": "long", "set": 1}),
        [
            '+  { parameter = "long", set = 1 },',
        ],
    ),
    (
        "a change at the start",
        insert(TEXT, ("intervention", 0, "change", 0), {"parameter": "long", "set": 1}),
        [
            '+  { parameter = "long", set = 1 },',
        ],
    ),
    (
        "a change without",
        delete(TEXT, ("intervention", 0, "change", 0)),
        [
            '-  { parameter = "beta", multiply = 0.6 },',
        ],
    ),
    (
        "a change of a nested list",
        set_value(TEXT, ("intervention", 1, "change", 0, "multiply"), 0.4),
        [
            "-multiply = 0.5",
            "+multiply = 0.4",
        ],
    ),
    (
        "a new flow",
        insert(TEXT, ("flow", 3), {"from": "S", "rate": "long", "kind": "transition"}),
        [
            "+",
            "+[[flow]]",
            '+from = "S"',
            '+rate = "long"',
            '+kind = "transition"',
        ],
    ),
    (
        "a flow before the second",
        insert(TEXT, ("flow", 1), {"to": "S", "rate": "long"}),
        [
            "+[[flow]]",
            '+to = "S"',
            '+rate = "long"',
            "+",
        ],
    ),
    (
        "a flow less",
        delete(TEXT, ("flow", 1)),
        [
            "-[[flow]]",
            '-from = "I"',
            '-to = "S"',
            "-rate = 'gamma * I'",
            '-kind = "transition"',
        ],
    ),
    (
        "a key less",
        delete(TEXT, ("parameters", "beta", "unit")),
        [
            '-beta  = { value = 0.4, unit = "1/day" }  # guess',
            "+beta  = { value = 0.4 }  # guess",
        ],
    ),
    (
        "the first key less",
        delete(TEXT, ("compartments", "S", "label")),
        [
            '-S = { label = "Susceptible, {all}", infected = false, by = ["age"] }   # first',
            '+S = { infected = false, by = ["age"] }   # first',
        ],
    ),
    ("a parameter less", delete(TEXT, ("parameters", "gamma")), ['-"γ" = { value = [ 0.2, 0.3 ], by = ["age"] }']),
    ("a table less", delete(TEXT, ("parameters", "long")), ["-[parameters.long]", "-value = 3   # here"]),
    (
        "a name",
        rename(TEXT, ("parameters", "beta"), "b_1"),
        [
            '-beta  = { value = 0.4, unit = "1/day" }  # guess',
            '+b_1  = { value = 0.4, unit = "1/day" }  # guess',
        ],
    ),
    (
        "a Greek name",
        rename(TEXT, ("parameters", "beta"), "β"),
        [
            '-beta  = { value = 0.4, unit = "1/day" }  # guess',
            '+"β"  = { value = 0.4, unit = "1/day" }  # guess',
        ],
    ),
    ("the name of a table", rename(TEXT, ("matrices", "C"), "D"), ["-[matrices.C]", "+[matrices.D]"]),
]


@pytest.mark.parametrize(("new", "lines"), [case[1:] for case in CASES], ids=[case[0] for case in CASES])
def test_only_these_lines_change(new: str, lines: list[str]) -> None:
    tomllib.loads(new)
    # sorted: where equal lines stand side by side, a difference may name either
    assert sorted(difference(new)) == sorted(lines)
    assert new.count("#") >= TEXT.count("#") - 1


@pytest.mark.parametrize("number", range(3))
@pytest.mark.parametrize("to", range(3))
def test_flows_move_with_their_comments(number: int, to: int) -> None:
    new = move(TEXT, ("flow",), number, to)
    order = [0, 1, 2]
    order.insert(to, order.pop(number))
    old_flows = tomllib.loads(TEXT)["flow"]
    assert tomllib.loads(new)["flow"] == [old_flows[index] for index in order]
    assert sorted(line for line in new.splitlines() if line) == sorted(line for line in TEXT.splitlines() if line)
    assert '# Recovery\n[[flow]]\nfrom = "I"' in new
    assert '# Infection\n[[flow]]\nfrom = "S"' in new


def test_moving_there_and_back() -> None:
    assert loads(move(move(TEXT, ("flow",), 0, 2), ("flow",), 2, 0)).flows == loads(TEXT).flows


def test_last_line_without_an_end() -> None:
    text = TEXT.rstrip("\n") + '\n\n[[flow]]\nfrom = "S"\nrate = "long"\nkind = "transition"'
    for new in (
        insert(text, ("flow", 9), {"to": "S", "rate": "long"}),
        move(text, ("flow",), 3, 0),
        move(text, ("flow",), 0, 3),
        set_value(text, ("flow", 3, "label"), "x"),
        delete(text, ("flow", 3)),
    ):
        tomllib.loads(new)


def test_line_ends_are_kept() -> None:
    text = TEXT.replace("\n", "\r\n")
    new = insert(text, ("flow", 1), {"to": "S", "rate": "long"})
    new = set_value(new, ("matrices", "A"), {"by": "age", "values": [[0, 1], [2, 0]]})
    assert "\n" not in new.replace("\r\n", "")
    tomllib.loads(new)


def test_an_empty_text_grows_into_a_model() -> None:
    text = set_value("", ("scenario", "title"), "New")
    text = set_value(text, ("scenario", "time_unit"), "day")
    text = insert(text, ("flow", 0), {"from": "S", "to": "I", "rate": "beta*S*I", "kind": "transmission"})
    text = insert(text, ("flow", 1), {"from": "I", "rate": "I", "kind": "transition"})
    text = set_value(text, ("parameters", "beta"), {"value": 0.001})
    text = set_value(text, ("compartments", "S"), {"infected": False})
    text = set_value(text, ("compartments", "I"), {"infected": True})
    text = set_value(text, ("infection_free", "S"), 1000)
    text = insert(text, ("intervention", 0), {"name": "x", "change": [{"parameter": "beta", "multiply": 0.5}]})
    assert loads(text).flows[0].source == "S"
    assert [line for line in text.splitlines() if line.startswith("[")] == [
        *("[scenario]", "[compartments]", "[parameters]", "[[flow]]", "[[flow]]", "[infection_free]"),
        "[[intervention]]",
    ]


@pytest.mark.parametrize(
    ("edit", "arguments"),
    [
        (set_value, (("flow", 7, "rate"), "x")),
        (set_value, (("flow", 0), {})),
        (set_value, (("dimensions", "age", 7), "x")),
        (set_value, (("scenario", "title", "x"), "x")),
        (delete, (("parameters", "nothing"),)),
        (delete, (("flow", 7),)),
        (delete, (("parameters", "beta", "range"),)),
        (move, (("flow",), 0, 7)),
        (rename, (("parameters", "nothing"), "x")),
        (insert, (("nothing", "x", 0), 1)),
    ],
)
def test_what_is_not_there_is_said(edit: object, arguments: tuple[object, ...]) -> None:
    with pytest.raises(ScenarioError, match="there is no such entry"):
        edit(TEXT, *arguments)  # type: ignore[operator]


def test_a_text_that_is_not_toml_is_refused() -> None:
    with pytest.raises(ScenarioError, match="line 1: not valid TOML"):
        set_value("a = ", ("scenario", "title"), "x")


@pytest.mark.parametrize(
    "value",
    ["", 'q"\\\n\t\r\x00\x7fé😀', True, False, 0, -3, 1e-9, 1e22, Decimal("1E-7"), Decimal("0.10"), [], {},
     [1, "a", [2]], {"a b": [{"c": 1}], "β": {}}, [[1, 2], [3, 4]]],
)  # fmt: skip
def test_values_come_back(value: object) -> None:
    again = tomllib.loads(f"x = {toml(value)}", parse_float=Decimal)["x"]
    assert again == (Decimal(repr(value)) if isinstance(value, float) else value)


@pytest.mark.parametrize("value", [float("nan"), float("inf"), Decimal("inf")])
def test_what_a_file_cannot_hold(value: object) -> None:
    with pytest.raises(ValueError, match="no number"):
        toml(value)


TRICKY = '''a.b.c = 1 # x
"q.r" . 's' = "#]" # ]
[x."y z".w]
list = [ "a]", 'b}', """c
"] '""", # ]
  [1, [2, {k = "}", l.m = [3]}]], ]
d = 2024-01-01T00:00:00Z
[[t]]
[[t.u]]
v = 1
[[t.u]]
v = 2
[t.u.w]
z = 3
[[t]]
[[t.u]]
v = 4
'''


def test_places_of_a_tricky_document() -> None:
    # Second route: the standard library's reading of the same text.
    data = tomllib.loads(TRICKY)
    found = {s.path: s.value for s in statements(TRICKY) if s.value is not None}
    assert list(found) == [
        ("a", "b", "c"), ("q.r", "s"), ("x", "y z", "w", "list"), ("x", "y z", "w", "d"),
        ("t", 0, "u", 0, "v"), ("t", 0, "u", 1, "v"), ("t", 0, "u", 1, "w", "z"), ("t", 1, "u", 0, "v"),
    ]  # fmt: skip
    for path, span in found.items():
        assert span is not None
        here: object = data
        for part in path:
            here = here[part]  # type: ignore[index]
        assert tomllib.loads(f"x = {TRICKY[slice(*span)]}")["x"] == here
    whole = found["x", "y z", "w", "list"]
    assert whole is not None
    outer = members(TRICKY, whole)
    assert [TRICKY[slice(*m.value)] for m in outer][:2] == ['"a]"', "'b}'"]
    inner = members(TRICKY, members(TRICKY, outer[3].value)[1].value)
    assert [m.path for m in members(TRICKY, inner[1].value)] == [("k",), ("l", "m")]
