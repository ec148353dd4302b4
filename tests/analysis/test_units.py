"""What the units verb tells: conversions, stays, and slips between week and day."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

import ngm

FOLDER = Path(__file__).parents[2] / "scenarios"
SCENARIOS = sorted(FOLDER.glob("*.toml"))
SWAP = {"day": "week", "week": "day", "month": "day", "year": "day"}
#: a parameter's line, up to its value, the value, and its unit
LINE = re.compile(r'(?m)^(\w+ = \{ value = )(.*?)(, (?:by = [^=]*?, )?unit = ")([^"]*)(")')
NUMBER = re.compile(r'"[^"]*"|[\d.]+')


def parameters():
    """Yield every parameter of every shipped scenario whose unit holds a time, with three slips of it as texts."""
    for path in SCENARIOS:
        text = path.read_text(encoding="utf-8")
        for found in LINE.finditer(text):
            word = next((word for word in SWAP if re.search(rf"\b{word}\b", found[4])), None)
            if word is None:
                continue
            times, over = (
                NUMBER.sub(lambda m, how=how: f'"({m[0].strip(chr(34))}){how}"', found[2]) for how in ("*7", "/7")
            )
            other = re.sub(rf"\b{word}\b", SWAP[word], found[4])
            slipped = [
                found[1] + value + found[3] + unit + found[5]
                for value, unit in ((times, found[4]), (over, found[4]), (found[2], other))
            ]
            texts = [text[: found.start()] + line + text[found.end() :] for line in slipped]
            name = found[1].split()[0]
            yield pytest.param(path, name, texts, id=f"{path.stem}: {name}")


def test_no_parameter_is_left_out():
    from ngm.scenario.slips import time_power

    wanted = set()
    for path in SCENARIOS:
        scenario = ngm.load(path)
        wanted |= {f"{path.stem}: {p.name}" for p in scenario.parameters.values() if time_power(p, scenario.time_unit)}
    assert {case.id for case in parameters()} == wanted


@pytest.mark.parametrize(("path", "name", "slipped"), list(parameters()))
def test_a_slip_of_one_parameter_is_found(path, name, slipped):
    """Seven times the value, a seventh of it, another unit of time: each is refused or told, and of this parameter alone."""
    scenario = ngm.load(path)
    assert not [warning for warning in scenario.warnings if "mixed up" in warning]
    for text in slipped:
        if scenario.parameters[name].follows or _none(scenario.parameters[name]):
            continue  # its own number is another parameter's, or 0 in every unit
        try:
            warnings = ngm.loads(text, folder=str(FOLDER)).warnings
        except ngm.ScenarioError as refused:  # another unit of time, where none may be converted
            if name not in str(refused):
                raise
            continue
        told = [warning for warning in warnings if "mixed up" in warning]
        assert len(told) == 1, warnings
        assert told[0].startswith(f"Units: parameters.{name}: ")


@pytest.mark.parametrize(
    ("path", "name", "slipped"), [p for p in parameters() if ": n1" in p.id or ": omega" in p.id or ": burial" in p.id]
)
def test_the_unit_of_a_parameter_that_follows_is_refused_where_it_would_need_a_conversion(path, name, slipped):
    if ngm.load(path).parameters[name].follows:
        with pytest.raises(ngm.ScenarioError, match=name):
            ngm.loads(slipped[2], folder=str(FOLDER))


def seir(old, new):
    return ngm.loads((FOLDER / "seir-velmar-fever.toml").read_text(encoding="utf-8").replace(old, new))


def test_a_slip_is_a_finding_with_both_numbers():
    result = ngm.units(seir('value = 1.4, unit = "1/week"', 'value = 1.4, unit = "1/day"'))
    (note,) = result.findings
    assert (note.kind, note.where) == ("slip", "parameters.gamma")
    # By hand: 1.4 a day is once in 0.714 days, where the label says 5 days.
    assert "its label says '5 days'" in note.message
    assert "1.4 per day, once in 0.714286 day" in note.message
    assert "about 7 times as much. Were week and day mixed up?" in note.message


def test_a_value_outside_its_own_range_by_such_a_factor():
    result = ngm.units(
        seir(
            'value = 0.42, unit = "1/day", label = "Infectious contacts made by one infectious person; one in 2.4 days"',
            'value = 2.94, unit = "1/day"',
        )
    )
    (note,) = result.findings
    assert "the value 2.94 lies outside its range (0.3 to 0.55); divided by 7 it lies inside" in note.message
    # a distribution with mean 1.4 and deviation 0.2 does not reach 0.2
    result = ngm.units(
        seir(
            'value = 1.4, unit = "1/week", label = "Rate of recovery; the mean infectious period is 5 days"',
            'value = 0.2, unit = "1/week"',
        )
    )
    assert "outside its distribution" in result.findings[0].message


@pytest.mark.parametrize(
    ("label", "told"),
    [
        ("Rate of recovery; the mean infectious period is 5 days", False),
        ("mean stay 4 to 7 days", False),
        ("recovery in a study that went on for 11 weeks", False),  # 15 times as long: no two units are
        ("mean stay five weeks", True),
        ("0.2 per day", False),
        ("1.4 a week", False),
        ("20 % a day", False),
        ("once a week", False),  # within half as much again
        ("1.4 a day", True),
        ("Contacts a day", False),
        ("stay of 1/0 days, " + 500 * "9" + " days, 0." + 400 * "0" + "1 days, " + 500 * "9" + " a day", False),
        ("stay 0 days", False),
        ("", False),
    ],
)
def test_what_words_say(label, told):
    scenario = seir("Rate of recovery; the mean infectious period is 5 days", label)
    assert any("mixed up" in warning for warning in scenario.warnings) is told


def test_conversions_are_told_beside_what_was_typed():
    scenario = seir("gamma = { value = 1.4, unit", "gamma = { value = 0.35, unit")
    assert dict(ngm.conversions(scenario))["gamma"] == "0.35 1/week = 0.05 1/day, once in 20 day"  # by hand


@pytest.mark.parametrize("path", SCENARIOS, ids=lambda path: path.stem)
def test_a_value_typed_for_the_wrong_unit_is_named_beside_the_old_version(path):
    scenario = ngm.load(path)
    if any(parameter.season is not None for parameter in scenario.parameters.values()):
        pytest.skip("models with a season are not compared")
    for row in ngm.units(scenario).parameters:
        parameter = scenario.parameters[row.parameter]
        if parameter.follows or row.unit is None or not re.search("day|week|month|year", row.unit) or parameter.by:
            continue
        value = _number(parameter.values[0].text)
        if not value:
            continue
        # seven times a share in a step is no share
        slipped = value / 7 if scenario.discrete else value * 7
        found = ngm.difference(scenario, scenario.with_values(**{row.parameter: slipped}))
        (change,) = found.changes
        assert change.name == row.parameter
        assert change.note == "changed by the factor 7: were week and day mixed up?"


def _none(parameter):
    return all(_number(value.text) == 0 for value in parameter.values)


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
