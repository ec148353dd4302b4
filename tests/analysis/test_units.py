"""What the units verb tells: conversions, stays, and slips between week and day."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

import ngm

FOLDER = Path(__file__).parents[2] / "scenarios"
SCENARIOS = sorted(FOLDER.glob("*.toml"))
SWAP = {"day": "week", "week": "day", "month": "day", "year": "day"}
UNIT = re.compile(r'(?m)^(\w+)( = \{ value = .*?unit = ")([^"]*)(")')


def slips():
    """Yield every parameter of every shipped scenario whose unit holds a time, with the text in which it is slipped."""
    for path in SCENARIOS:
        text = path.read_text(encoding="utf-8")
        for found in UNIT.finditer(text):
            unit = found[3]
            word = next((word for word in SWAP if re.search(rf"\b{word}\b", unit)), None)
            if word is not None:
                slipped = re.sub(rf"\b{word}\b", SWAP[word], unit)
                yield pytest.param(
                    path,
                    found[1],
                    text[: found.start(3)] + slipped + text[found.end(3) :],
                    id=f"{path.stem}: {found[1]}",
                )


def told(result):
    """Return all that the verb says of parameters and stays."""
    rows = {row.parameter: (row.unit, row.in_force, row.reading) for row in result.parameters}
    return rows, {stay.compartment: (stay.mean, stay.exits) for stay in result.stays}


@pytest.mark.parametrize(("path", "name", "slipped"), list(slips()))
def test_a_slip_of_the_unit_of_time_shows(path, name, slipped):
    """Either the reader refuses it, or the parameter's own line says another value in force and the reading beside it.

    By hand: the number in force moves by the length of one unit of time in the other.
    """
    right = ngm.units(ngm.load(path))
    if ngm.load(path).parameters[name].follows:  # not converted: refused
        with pytest.raises(ngm.ScenarioError, match=name):
            ngm.loads(slipped, folder=str(FOLDER))
        return
    wrong = ngm.units(ngm.loads(slipped, folder=str(FOLDER)))
    before, after = told(right)[0], told(wrong)[0]
    assert after[name] != before[name]
    assert [other for other in after if after[other] != before[other]] == [name]
    ratio = float(after[name][1][0]) / float(before[name][1][0])
    assert max(ratio, 1 / ratio) > 6.9


@pytest.mark.parametrize("path", SCENARIOS, ids=lambda path: path.stem)
def test_a_value_typed_for_the_wrong_unit_is_named_beside_the_old_version(path):
    scenario = ngm.load(path)
    for row in ngm.units(scenario).parameters:
        parameter = scenario.parameters[row.parameter]
        if parameter.follows or row.unit is None or not re.search("day|week|month|year", row.unit) or parameter.by:
            continue
        value = _number(parameter.values[0].text)
        found = ngm.difference(scenario, scenario.with_values(**{row.parameter: value * 7}))
        (change,) = found.changes
        assert change.name == row.parameter
        assert change.note == "changed by the factor 7: were week and day mixed up?"


def _number(text):
    above, _, below = text.partition("/")
    return float(above) / float(below or 1)


def test_the_example_of_the_page_of_the_format():
    text = (FOLDER / "seir-velmar-fever.toml").read_text(encoding="utf-8")
    result = ngm.units(ngm.loads(text.replace("gamma = { value = 1.4, unit", "gamma = { value = 0.35, unit")))
    row = next(row for row in result.parameters if row.parameter == "gamma")
    assert row.converted
    assert row.typed == ("0.35",)
    assert row.in_force == ("0.05",)  # by hand: 0.35 a week is 0.05 a day, once in 20 days
    assert row.reading == "once in 20 day"


def test_stays_by_hand():
    result = ngm.units(ngm.load(FOLDER / "wards-and-burials-moss-fever.toml"))
    stays = {stay.compartment: stay for stay in result.stays}
    # By hand: out of I at 0.15 + 0.07 + 0.08 = 0.3 a day; half are admitted.
    assert stays["I"].mean == pytest.approx(1 / 0.3)
    assert {way.to: pytest.approx(way.probability) for way in stays["I"].exits} == {
        "H": 0.5,
        "F": 0.07 / 0.3,
        "R": 0.08 / 0.3,
    }
    assert stays["S"].mean is None
    assert result.to_json()["stays"][0]["compartment"] == "E"
