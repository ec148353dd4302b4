"""What the pictures of mixing show, read from their specifications."""

from __future__ import annotations

import json
from dataclasses import replace

import pytest

from ngm.charts import mixing as charts
from ngm.charts.style import DARK, LIGHT
from ngm.results_mixing import Curve, Gaps, MixCase, Mixing, MixingMap, MixingResponses, Scale
from tests.charts.test_charts import values

#: Two groups, by hand: 300 and 700 members, C = [[8, 4], [2, 6]], counts 1200 and 1400.
MIXING = Mixing(
    title="Two groups",
    time_unit="day",
    digest="0",
    matrix="C",
    label=None,
    by="g",
    within=None,
    others=(),
    settings=("C",),
    groups=("young", "old"),
    table=((8.0, 4.0), (2.0, 6.0)),
    given=((8.0, 4.0), (2.0, 6.0)),
    row_sums=(12.0, 8.0),
    column_sums=(10.0, 10.0),
    sizes=(300.0, 700.0),
    sizes_from="population = N",
    reciprocal=False,
    gaps=Gaps(((0.0, -2 / 13), (2 / 13, 0.0)), 2 / 13, ("old", "young"), 2 / 13),
    assortativity=5 / 12,
    coefficient=None,
    mix_labels=("young", "old"),
    cases=(MixCase("as given", "C as it is.", True, 2.0, (0.4, 0.6)),),
)
CURVE = Curve("C", "factor", 1.0, (0.0, 0.5, 1.0), (0.0, 1.0, 2.0), (None, (0.4, 0.6), (0.4, 0.6)), 1.0)
RESPONSES = MixingResponses(
    title="Two groups",
    digest="0",
    matrix="C",
    within=None,
    groups=("young", "old"),
    mix_labels=("young", "old"),
    R0=2.0,
    assortativity=None,
    no_assortativity="not asked",
    settings=(CURVE,),
    losses=(1.0,),
    entries=((0.3, 0.1), (0.2, 0.4)),
    pairs=((0.3, 0.3), (0.3, 0.4)),
    by_group=(0.6, 0.7),
    no_elasticities=None,
    exact=True,
)
MAP = MixingMap(
    title="Two groups",
    digest="0",
    x=Scale("factor", "C", "factor on C", (0.0, 0.5, 1.0), 1.0),
    y=Scale("parameter", "q", "q (%)", (1.0, 2.0), 2.0),
    R0=((0.0, 0.5, 1.0), (0.0, 1.0, None)),
    now=2.0,
    line=(((1.0, 1.0), (0.5, 2.0)),),
)


def test_contacts_have_their_values_in_the_cells():
    chart = charts.contacts(MIXING)
    cells = {(row["from"], row["to"]): row["shown"] for row in values(chart) if "from" in row}
    assert cells == {("young", "young"): "8", ("young", "old"): "4", ("old", "young"): "2", ("old", "old"): "6"}
    spec = chart.to_dict()
    assert "Contacts per member and day" in spec["description"]
    assert "young with young 8" in spec["description"]


def test_letters_in_cells_can_be_read_on_them():
    text = json.dumps(charts.contacts(MIXING).to_dict())
    assert "datum.value > 4.0" in text  # white above half of the largest, which is dark in the reversed scheme


def test_gaps_are_in_per_cent_and_have_a_sign():
    cells = {(row["from"], row["to"]): row["shown"] for row in values(charts.gaps(MIXING)) if "from" in row}
    assert cells[("old", "young")] == "15"
    assert cells[("young", "old")] == "-15"
    assert charts.gaps(replace(MIXING, gaps=None)) is None


def test_each_pair_stands_once():
    cells = {(row["from"], row["to"]): row["shown"] for row in values(charts.pairs(RESPONSES)) if "from" in row}
    assert cells == {("young", "young"): "30", ("old", "young"): "30", ("old", "old"): "40"}
    assert charts.pairs(replace(RESPONSES, pairs=None)) is None


def test_many_groups_are_no_heat_map():
    many = tuple(f"g{k}" for k in range(charts.MOST_GROUPS + 1))
    assert charts.contacts(replace(MIXING, groups=many)) is None
    wide = tuple(f"g{k}" for k in range(16))
    table = ((1.0,) * 16,) * 16
    spec = charts.contacts(replace(MIXING, groups=wide, table=table)).to_dict()
    assert "width" not in spec  # takes the page's, and shows numbers where there is room for them
    assert "width < 384 ? 0 : 10" in json.dumps(spec)


def test_the_case_mix_tells_cases_by_more_than_colour():
    chart = charts.case_mix(("young", "old"), [("as given", (0.4, 0.6)), ("balanced", (0.5, 0.5)), ("other", (1, 0))])
    rows = [row for row in values(chart) if "share" in row]
    assert sum(row["share"] for row in rows if row["case"] == "balanced") == 1
    text = json.dumps(chart.to_dict())
    assert '"shape"' in text
    assert "Bars: as given" in text
    assert "balanced: young 0.5" in chart.to_dict()["description"]
    assert len(values(charts.case_mix(("young", "old"), [("as given", (0.4, 0.6))]))) == 2


def test_a_response_shows_the_threshold_and_where_it_stands():
    chart = charts.response(CURVE, "factor on C")
    shown = [row.get("shown") for row in values(chart)]
    assert "R0 = 1" in shown
    assert "now: 2" in shown
    assert "now 2 at 1" in chart.to_dict()["description"]
    assert charts.response(replace(CURVE, R0=(None, None, None)), "x") is None


def test_the_mix_along_a_quantity_leaves_out_what_is_not_known():
    rows = values(charts.mix_along(("young", "old"), CURVE, "factor on C"))
    assert {row["at"] for row in rows} == {0.5, 1.0}
    assert charts.mix_along(("young", "old"), replace(CURVE, case_mix=(None, None, (0.4, 0.6))), "x") is None


def test_a_map_has_its_line_and_its_place():
    chart = charts.map_of_two(MAP)
    rows = values(chart)
    cells = [row for row in rows if "ax" in row]
    assert len(cells) == 5  # one has no R0
    assert [(row["x"], row["x2"]) for row in cells[:3]] == [(0, 0.25), (0.25, 0.75), (0.75, 1)]
    assert {"x": 1.0, "y": 1.0, "x2": 0.5, "y2": 2.0} in rows
    assert "now: 2" in [row.get("shown") for row in rows]
    assert "R0 does not pass 1" in charts.map_of_two(replace(MAP, line=())).to_dict()["description"]
    assert charts.map_of_two(replace(MAP, R0=((None,) * 3,) * 2)) is None


@pytest.mark.parametrize(("dark", "ink"), [(False, LIGHT), (True, DARK)])
def test_letters_take_the_ink_of_the_theme(dark, ink):
    mix = charts.case_mix(("young", "old"), [("a", (0.4, 0.6)), ("b", (0.5, 0.5))], dark=dark)
    for chart in (mix, charts.response(CURVE, "x", dark=dark)):
        assert ink.text in json.dumps(chart.to_dict())


@pytest.mark.parametrize(
    ("value", "shown"), [(0.0, "0"), (0.004, "<0.01"), (0.25, "0.25"), (12.345, "12.3"), (1234.5, "1234"), (1.0, "1")]
)
def test_numbers_in_cells(value, shown):
    table = ((value, 5000.0), (0.0, 0.0))
    cells = [row["shown"] for row in values(charts.contacts(replace(MIXING, table=table))) if "from" in row]
    assert cells[0] == shown
