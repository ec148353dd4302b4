"""Units: expected factors are by hand (7 days a week, 365.25 days a year, 30.4375 days a month)."""

from __future__ import annotations

from fractions import Fraction

import pytest

from ngm.errors import ScenarioError
from ngm.scenario.file import loads
from ngm.scenario.units import read_unit, time_unit_name
from ngm.scenario.values import converted
from tests.scenario.models import PLAIN, changed

F = Fraction


@pytest.mark.parametrize(
    ("text", "powers", "factor"),
    [
        ("1/day", {"day": -1}, 1),
        ("/day", {"day": -1}, 1),
        ("per day", {"day": -1}, 1),
        ("1 per day", {"day": -1}, 1),
        ("1/d", {"day": -1}, 1),
        ("day^-1", {"day": -1}, 1),
        ("days", {"day": 1}, 1),
        ("1/week", {"week": -1}, F(1, 7)),
        ("1/weeks", {"week": -1}, F(1, 7)),
        ("1/Week", {"week": -1}, F(1, 7)),
        ("per wk", {"week": -1}, F(1, 7)),
        ("weeks", {"week": 1}, 7),
        ("1/month", {"month": -1}, 1 / F("30.4375")),
        ("1/year", {"year": -1}, 1 / F("365.25")),
        ("yr", {"year": 1}, F("365.25")),
        ("1/h", {"hour": -1}, 24),
        ("1/min", {"minute": -1}, 1440),
        ("1/s", {"second": -1}, 86400),
        ("week^2", {"week": 2}, 49),
        ("1/week^2", {"week": -2}, F(1, 49)),
        ("%", {}, F(1, 100)),
        ("% per week", {"week": -1}, F(1, 700)),
        ("%/day", {"day": -1}, F(1, 100)),
        ("1", {}, 1),
        ("person/week", {"person": 1, "week": -1}, F(1, 7)),
        ("persons", {"persons": 1}, 1),
        ("1/(week*person)", {"week": -1, "person": -1}, F(1, 7)),
        ("1/(week person)", {"week": -1, "person": -1}, F(1, 7)),
        ("1/week/person", {"week": -1, "person": -1}, F(1, 7)),
        ("1 / person per week", {"week": -1, "person": -1}, F(1, 7)),
        ("person-week", {"person": 1, "week": 1}, 7),
        ("1/day*person", {"day": -1, "person": 1}, 1),
        ("week/day", {"week": 1, "day": -1}, 7),
        ("week/week", {}, 1),
        ("(person/week)^2", {"person": 2, "week": -2}, F(1, 49)),
        ("hr", {"hr": 1}, 1),
        ("bites per mosquito per day", {"bites": 1, "mosquito": -1, "day": -1}, 1),
        ("Tag", {"Tag": 1}, 1),
    ],
)
def test_units(text: str, powers: dict[str, int], factor: Fraction) -> None:
    unit = read_unit(text, "day").unit
    assert unit.powers == powers
    assert unit.factor == factor


@pytest.mark.parametrize(
    ("text", "warns"),
    [
        ("cases per 1000", False),
        ("per 1000 person-years", True),
        ("2/week", True),
        ("1e3/day", True),
        ("0.5", False),
        ("day-1", True),
        ("day 1", True),
        ("1/day^0.5", True),
        ("weekly, as reported", True),
        ("see note", None),
        ("", False),
        ("-", False),
        ("1/(day", True),
        ("day)", True),
        ("per", False),
        ("1//day", True),
        ("$", False),
        ("day^999", True),
        ("(" * 200 + "day" + ")" * 200, True),
        ("week*" * 50 + "week", True),
        ("x" * 5000, False),
    ],
)
def test_remarks(text: str, warns: bool | None) -> None:
    reading = read_unit(text, "day")
    if warns is None:  # two words are two units of their own
        assert reading.unit.powers == {"see": 1, "note": 1}
        return
    assert reading.unit.powers is None
    assert reading.unit.factor == 1
    assert (reading.warning is not None) == warns


def test_doubts_are_told() -> None:
    assert "1/(person*year)" in (read_unit("per person-year", "day").warning or "")
    assert "'h'" in (read_unit("1/hr", "day").warning or "")
    assert read_unit("1/week", "day").warning is None


def test_other_units_of_time_are_refused_where_the_scenarios_has_no_length() -> None:
    text = changed(PLAIN, 'time_unit = "day"', 'time_unit = "generation"')
    with pytest.raises(ScenarioError) as caught:
        loads(text)
    assert len(caught.value.problems) == 3
    assert "parameters.beta, unit: '1/day' holds the day, which cannot be converted" in str(caught.value)
    scenario = loads(text.replace("1/day", "1/generation"))
    assert scenario.parameters["beta"].factor == 1


def test_time_units_are_known_by_several_names() -> None:
    assert [time_unit_name(word) for word in ("d", "days", "Day", "yr", "s", "S", "generation")] == [
        *("day", "day", "day", "year", "second"),
        *(None, None),
    ]
    assert loads(changed(PLAIN, 'time_unit = "day"', 'time_unit = "days"')).time_unit == "day"


def test_values_in_force_are_exact() -> None:
    # By hand: 0.35 a week is 0.05 a day; the page of the format has this example.
    scenario = loads(changed(PLAIN, 'beta = { value = 0.4, unit = "1/day"', 'beta = { value = 0.35, unit = "1/week"'))
    (value,) = converted(scenario.parameters["beta"])
    assert value.value == Fraction(1, 20)  # type: ignore[union-attr]


def test_a_remark_warns_and_converts_nothing() -> None:
    scenario = loads(changed(PLAIN, '0.4, unit = "1/day"', '0.4, unit = "2 per week"'))
    assert scenario.parameters["beta"].factor == 1
    assert len(scenario.warnings) == 1
    assert scenario.warnings[0].startswith("parameters.beta, unit: '2 per week' is kept as a remark")
