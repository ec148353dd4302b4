"""Slips between units of time that no unit proves: what a parameter says of itself in words, against its number.

A value per week typed as per day keeps every unit right. But a parameter often says twice what it is: by its number, and
by its range, its distribution, or words such as "the mean latent period is 5 days" in its label or source. Where the two
are apart by the ratio of two units of time, one of them is likely a slip.
"""

from __future__ import annotations

import math
import re
from collections.abc import Iterator
from dataclasses import dataclass
from fractions import Fraction

from ngm.scenario.exact import evaluate
from ngm.scenario.model import Distribution, Parameter, Scenario
from ngm.scenario.unit_powers import EVENTS, Powers, UnitFinding, singular, times, words_of
from ngm.scenario.units import SECONDS, time_unit_name

__all__ = ["SLIPS", "conversions", "mixed_up", "often", "slips", "time_power"]

#: Factors between units that people mix up.
SLIPS: dict[float, str] = {
    7.0: "week and day",
    30.4375: "month and day",
    365.25: "year and day",
    24.0: "day and hour",
    12.0: "year and month",
    30.4375 / 7: "month and week",
    365.25 / 7: "year and week",
    60.0: "hour and minute",
    100.0: "% and a share",
}
#: Two statements of one quantity fit where they are this factor apart at the most: words are rounded.
FITS = 1.5
#: A ratio is that of two units where it is this factor away at the most.
NEAR = 1.2
#: Standard deviations, on the scale of the distribution, within which a value fits it.
MOST_DEVIATIONS = 4.0

_WORDS = {"one": 1, "two": 2, "three": 3, "four": 4, "five": 5, "six": 6, "seven": 7, "eight": 8, "nine": 9, "ten": 10}
_NUMBER = r"(?:\d+/\d+|\d[\d,]*(?:\.\d+)?|" + "|".join(sorted(_WORDS, key=len, reverse=True)) + ")"
_TIME = r"(seconds?|minutes?|hours?|days?|weeks?|months?|years?)\b"
#: "0.42 a day", "300 people per year", "3 to 5 % a week"
_RATE = re.compile(
    rf"(?<![\w.])({_NUMBER})(?:\s*(?:to|-|–)\s*({_NUMBER}))?(?![\w.])\s*(%)?(?:\s+[^\W\d]\w*){{0,3}}?\s+(?:per|a|an|each|every)\s+{_TIME}",
    re.IGNORECASE,
)
_OFTEN = re.compile(rf"\b(once|twice)\s+(?:per|a|an|each|every)\s+{_TIME}", re.IGNORECASE)
#: "5 days", "the 10-week course", "3 to 4 months"
_LENGTH = re.compile(rf"(?<![\w.])({_NUMBER})(?:\s*(?:to|-|–)\s*({_NUMBER}))?(?![\w.])[\s-]*{_TIME}", re.IGNORECASE)


@dataclass(frozen=True, slots=True)
class _Mention:
    """What words say: `text`, and the quantity between `low` and `high`, in the scenario's time unit."""

    text: str
    low: float
    high: float

    def ratio(self, value: float) -> float:
        """Return by which factor a value lies outside; 1 inside."""
        if value < self.low:
            return value / self.low
        return value / self.high if value > self.high else 1.0


def mixed_up(ratio: float, near: float) -> tuple[float, str] | None:
    """Return the factor between two units that a ratio is, within the factor `near`, and their names; None for none."""
    if not ratio > 0 or not math.isfinite(ratio):
        return None
    size = max(ratio, 1 / ratio)
    factor = min(SLIPS, key=lambda one: abs(math.log(size / one)))
    return (factor, SLIPS[factor]) if max(size / factor, factor / size) <= near else None


def time_power(parameter: Parameter, time_unit: str) -> int:
    """Return the power of time in a parameter's unit; 0 where it has no unit."""
    powers = None if parameter.unit is None else parameter.unit.powers
    return int(sum(p for word, p in (powers or {}).items() if word == time_unit or word in SECONDS))


def slips(scenario: Scenario) -> tuple[UnitFinding, ...]:
    """Return the parameters whose number is away from what they say of themselves by the ratio of two units of time.

    Looked at are the numbers of parameters with a time in their unit: against their range, their distribution, and lengths
    of time and rates told in label and source. Nothing is found where only one thing is said.
    """
    out = []
    for parameter in scenario.parameters.values():
        power = time_power(parameter, scenario.time_unit)
        if parameter.follows or not power or abs(power) > 1:
            continue
        message = _against_words(parameter, power, scenario.time_unit) or _against_range(parameter)
        if message is not None:
            where = f"parameters.{parameter.name}"
            out.append(UnitFinding("slip", where, message, ("parameters", parameter.name, "value")))
    return tuple(out)


# --- ranges and distributions -----------------------------------------------------------------------------------------


def _against_range(parameter: Parameter) -> str | None:
    """Compare the typed values with the range and the distributions, which are in the same unit."""
    stated = [] if parameter.range is None else [("range", parameter.range)]
    stated += [("distribution", _bulk(one)) for one in parameter.distributions]
    for value in dict.fromkeys(parameter.values):
        number = float(evaluate(value.tree))
        if not stated or any(low <= number <= high for _, (low, high) in stated):
            continue
        for what, (low, high) in stated:
            for factor, units in SLIPS.items():
                for moved, how in ((number / factor, "divided"), (number * factor, "multiplied")):
                    if low <= moved <= high:
                        return (
                            f"the value {value.text[:40]} lies outside its {what} ({low:.4g} to {high:.4g}); {how} by "
                            f"{factor:.6g} it lies inside. Were {units} mixed up?"
                        )
    return None


def _bulk(distribution: Distribution) -> tuple[float, float]:
    """Return between what nearly all of a distribution lies."""
    given = distribution.arguments
    if "low" in given:
        return given["low"], given["high"]
    mean, sd = given["mean"], given["sd"]
    if distribution.name in ("lognormal", "gamma") and mean > 0:
        spread = math.exp(MOST_DEVIATIONS * math.sqrt(math.log1p((sd / mean) ** 2)))
        return mean / spread, mean * spread
    return mean - MOST_DEVIATIONS * sd, mean + MOST_DEVIATIONS * sd


# --- words ------------------------------------------------------------------------------------------------------------


def _against_words(parameter: Parameter, power: int, time_unit: str) -> str | None:
    """Compare the values in force with lengths of time and rates in the label and the source."""
    home = SECONDS.get(time_unit_name(time_unit) or "")
    if home is None:
        return None
    mentions = [
        (what, mention)
        for what, words in (("label", parameter.label), ("source", parameter.source))
        for mention in _mentions(words or "", _plain(parameter, time_unit), power, home)
    ]
    if not mentions:
        return None
    numbers = [number for value in dict.fromkeys(parameter.in_force()) if (number := float(evaluate(value))) > 0]
    # A slip moves the values of all groups together: the ends of their span tell.
    for number in {max(numbers, default=0.0), min(numbers, default=0.0)} - {0.0}:
        ratios = [(mention.ratio(number), what, mention) for what, mention in mentions]
        if any(1 / FITS <= ratio <= FITS for ratio, *_ in ratios):
            continue
        for ratio, what, mention in ratios:
            found = mixed_up(ratio, NEAR)
            if found is not None:
                once = f", once in {1 / number:.6g} {time_unit}" if power == -1 and often(parameter, time_unit) else ""
                return (
                    f"its {what} says '{mention.text}', and the value in force is {number:.6g} "
                    f"{_per(power, time_unit)}{once}: about {found[0]:.6g} times as {'much' if ratio > 1 else 'little'}. "
                    f"Were {found[1]} mixed up?"
                )
    return None


def _per(power: int, time_unit: str) -> str:
    return f"per {time_unit}" if power < 0 else time_unit


def _plain(parameter: Parameter, time_unit: str) -> bool:
    """Return whether nothing but time, and events that are counted, is in a parameter's unit."""
    powers = (None if parameter.unit is None else parameter.unit.powers) or {}
    others = {singular(word) for word, power in powers.items() if power and word not in SECONDS and word != time_unit}
    return others <= EVENTS


def _mentions(words: str, plain: bool, power: int, home: Fraction) -> Iterator[_Mention]:
    """Yield what words say of a quantity: rates for a rate; lengths of time for a time, and for a rate in nothing but time."""
    if power == -1:
        for found in _RATE.finditer(words):
            low, high = _number(found[1]), _number(found[2] or found[1])
            unit = float(home / SECONDS[str(time_unit_name(found[4]))]) / (100 if found[3] else 1)
            if 0 < low <= high < math.inf:
                yield _Mention(found[0], low * unit, high * unit)
        for found in _OFTEN.finditer(words):
            rate = (2 if found[1].lower() == "twice" else 1) * float(home / SECONDS[str(time_unit_name(found[2]))])
            yield _Mention(found[0], rate, rate)
    if not plain:
        return
    for found in _LENGTH.finditer(words):
        unit = float(SECONDS[str(time_unit_name(found[3]))] / home)
        low, high = _number(found[1]) * unit, _number(found[2] or found[1]) * unit
        if 1e-300 < low <= high < 1e300:
            yield _Mention(found[0], low, high) if power == 1 else _Mention(found[0], 1 / high, 1 / low)


def _number(text: str) -> float:
    lower = text.lower()
    if lower in _WORDS:
        return float(_WORDS[lower])
    above, _, below = lower.replace(",", "").partition("/")
    if below:
        return float(above) / float(below) if float(below) else 0.0
    return float(above or 0)


# --- what is converted ------------------------------------------------------------------------------------------------


def conversions(scenario: Scenario) -> tuple[tuple[str, str], ...]:
    """Return each parameter that is converted, as typed and as it is in force: ``("gamma", "0.35 1/week = 0.05 1/day")``.

    A rate in nothing but time says too how often: ``once in 20 day``.
    """
    out = []
    for parameter in scenario.parameters.values():
        unit = parameter.unit
        if parameter.factor == 1 or unit is None:
            continue
        typed = list(dict.fromkeys(value.text for value in parameter.values))
        used = [float(evaluate(node)) for node in dict.fromkeys(parameter.in_force())]
        shown = ", ".join(f"{number:.6g}" for number in used[:4]) + (", …" if len(used) > 4 else "")
        text = f"{', '.join(typed[:4])}{', …' if len(typed) > 4 else ''} {unit.text} = {shown} {_in_force(parameter, scenario)}"
        if len(used) == 1 and used[0] > 0 and often(parameter, scenario.time_unit):
            text += f", once in {1 / used[0]:.6g} {scenario.time_unit}"
        out.append((parameter.name, text.rstrip()))
    return tuple(out)


def often(parameter: Parameter, time_unit: str) -> bool:
    """Return whether a parameter is a rate in nothing but time: one over it is a mean time."""
    powers = (None if parameter.unit is None else parameter.unit.powers) or {}
    left = {word: power for word, power in powers.items() if power}
    return len(left) == 1 and time_power(parameter, time_unit) == -1


def _in_force(parameter: Parameter, scenario: Scenario) -> str:
    """Return the unit that a value in force is in, as text; empty for a pure number."""
    powers: Powers = {}
    for word, power in ((None if parameter.unit is None else parameter.unit.powers) or {}).items():
        powers = times(powers, {scenario.time_unit if word in SECONDS else word: power})
    return words_of(powers) if powers else ""
