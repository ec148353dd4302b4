"""Diagrams as DOT text, hostile labels included."""

from __future__ import annotations

import re
from dataclasses import replace
from itertools import pairwise

import pytest

from ngm.charts.graphs import MOST_NODES, Arrow, Stage, flow_diagram, quoted, who_infects_whom
from tests.charts.samples import TWO_CLASSES, VECTOR_BORNE

HOSTILE = [
    'a"] ; n9 [URL="http://evil.example"',
    "back\\slash\\",
    '\\"',
    "line\nbreak\r\n\tand tab",
    "<b>html</b>",
    "nul\x00 and bell\x07",
    "\u202eturned",
    "x" * 5000,
]


def strings(dot):
    """Return the strings of DOT text, and what is left of it without them."""
    pattern = r'"((?:[^"\\]|\\.)*)"'
    return re.findall(pattern, dot), re.sub(pattern, "", dot)


@pytest.mark.parametrize("text", HOSTILE)
def test_a_quoted_label_is_one_short_string(text):
    found, rest = strings(quoted(text))
    assert len(found) == 1
    assert rest == ""
    assert len(found[0]) <= 80
    assert found[0].isprintable()


@pytest.mark.parametrize("text", HOSTILE)
def test_hostile_names_stay_inside_their_strings(text):
    graph = flow_diagram(
        [Stage(text, text, True)], [Arrow(text, "", text, text, text), Arrow("", text, "transmission", text)]
    )
    _, rest = strings(graph.dot)
    calm = flow_diagram(
        [Stage("S", "x", True)], [Arrow("S", "", "kind", "r", "l"), Arrow("", "S", "transmission", "r")]
    )
    assert rest == strings(calm.dot)[1]  # the same structure whatever the names are


def test_kinds_of_flow_differ_by_line_and_word_as_well_as_colour():
    graph = flow_diagram(
        [Stage("S", "", False), Stage("I", "", True)],
        [
            Arrow("S", "I", "transmission", "beta*S*I"),
            Arrow("I", "", "transition", "gamma*I"),
            Arrow("I", "S", "", "x"),
            Arrow("I", "Q", "transition", "q*I"),
        ],
    )
    infection, recovery, unknown = re.findall(r"^.*-> .*$", graph.dot, re.MULTILINE)[:3]
    assert 'style="dashed"' in infection
    assert "transmission:\\nbeta*S*I" in infection
    assert 'style="solid"' in recovery
    assert "transmission" not in recovery
    assert "kind?" in unknown
    assert graph.dot.count("peripheries=2") == 1  # I alone is infected
    assert '"Q ?"' in graph.dot  # mentioned and nowhere defined
    assert "Infected: I" in graph.alt


def test_nothing_and_too_much_are_not_drawn():
    assert flow_diagram([], []) is None
    assert flow_diagram([Stage(f"c{k}") for k in range(MOST_NODES + 1)], []) is None
    assert who_infects_whom(replace(VECTOR_BORNE, K=None)) is None


def test_who_infects_whom_points_from_the_infecting_type():
    graph = who_infects_whom(VECTOR_BORNE)
    # K[0][1] = 2: one vector infects 2 hosts.
    assert re.search(r't1 -> t0 \[label="2"', graph.dot)
    assert re.search(r't0 -> t1 \[label="3"', graph.dot)
    assert "One case of I_v infects 2 I_h" in graph.alt


def test_classes_are_boxes_and_the_largest_is_said():
    graph = who_infects_whom(TWO_CLASSES)
    assert graph.dot.count("subgraph cluster_") == 2
    assert "class 1, R0 = 2 (the largest)" in graph.dot
    assert "class 2, R0 = 0.5" in graph.dot


def test_a_diagram_can_run_from_top_to_bottom():
    stages = [Stage("S", "", False)]
    assert 'rankdir="LR"' in flow_diagram(stages, []).dot
    assert 'rankdir="TB"' in flow_diagram(stages, [], down=True).dot


def test_a_flow_from_outside_has_its_words_there():
    graph = flow_diagram(
        [Stage("S", "", False)], [Arrow("", "S", "transition", "b", "Birth"), Arrow("", "", "transition", "x")]
    )
    assert re.search(r'o0 \[.*label="Birth"', graph.dot)
    assert "o0 -> n0" in graph.dot
    assert graph.dot.count("->") == 1  # a flow from nowhere to nowhere is no arrow yet


def chain(count):
    """Return a course of infection of so many stages after S, and back to S."""
    names = ["S", *(f"I{k}" for k in range(1, count - 1)), "R"]
    stages = [Stage(name, infected=name.startswith("I")) for name in names]
    arrows = [Arrow("S", "I1", "transmission", "b")]
    arrows += [Arrow(a, b, "transition", "g") for a, b in pairwise(names[1:])]
    return stages, [*arrows, Arrow("R", "S", "transition", "w")]


@pytest.mark.parametrize(("count", "lines"), [(3, 1), (6, 1), (8, 2), (15, 3), (30, 6)])
def test_a_long_course_is_folded_into_lines_of_at_most_five(count, lines):
    stages, arrows = chain(count)
    dot = flow_diagram(stages, arrows).dot
    free = [line for line in dot.splitlines() if "constraint" in line]
    # One arrow leads from each line into the next, and one from the end back to S, which bends by itself.
    assert len(free) == lines
    starts = re.findall(r'edge \[style="invis"\]; (.*?) }', dot)
    assert [start.count("->") + 1 for start in starts] == ([lines] if lines > 1 else [])
    assert "constraint" not in flow_diagram(stages, arrows[:-1], down=True).dot


def test_infections_after_the_first_move_no_compartment():
    stages, arrows = chain(4)
    again = [*arrows, Arrow("R", "I1", "transmission", "b")]
    lines = [line for line in flow_diagram(stages, again).dot.splitlines() if "->" in line]
    free = [line for line in lines if "constraint" in line]
    assert [line for line in free if "transmission" in line] == [lines[-1]]
    assert "constraint" not in lines[0]


def test_a_crowded_diagram_has_numbers_in_place_of_words():
    stages = [Stage(f"A{k}", infected=k > 0) for k in range(12)]
    arrows = [Arrow(f"A{j}", f"A{k}", "transition", "per head") for j in range(7) for k in range(7, 12)]
    arrows += [Arrow("A0", f"A{k}", "transmission", "per head") for k in range(1, 8)]
    graph = flow_diagram(stages, arrows)
    assert "per head" not in graph.dot
    assert '"T 36"' in graph.dot
    assert "transmission" in graph.alt
