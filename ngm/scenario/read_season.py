"""The season of a parameter: a wave (`amplitude`, `peak`) or factors on equal parts of a period (`values`)."""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction

from ngm.scenario.draft import Draft
from ngm.scenario.fields import Table, describe, short
from ngm.scenario.model import Season
from ngm.scenario.season import MOST_REPEATS, least_common_multiple, repeats

__all__ = ["check_seasons", "read_season"]

_KEYS = ("amplitude", "peak", "values", "period")
_EXAMPLE = "season = { amplitude = 0.3, peak = 30, period = 365.25 }"
#: factors that one season may list
MOST_PARTS = 400


def read_season(parameter: Table, any_sign: bool) -> Season | None:
    """Read the key `season` of a parameter; None where it is missing or wrong (then noted)."""
    if not parameter.has("season"):
        return None
    found, where, key = parameter.found, parameter.at("season"), (*parameter.key, "season")
    before = len(found.problems)
    table = Table(found, parameter.raw["season"], where, key, _KEYS, example=_EXAMPLE)
    if not table.is_table:
        return None
    name = str(parameter.key[-1])
    period = _number(table, "period")
    if not table.has("period"):
        table.problem("period", "is missing. Write the length of one round in time units, for example period = 365.25.")
    elif period is not None and period <= 0:
        table.problem("period", f"{float(period):g} is not above 0. A period is a length of time.")
    if table.has("values"):
        for other in ("amplitude", "peak"):
            if table.has(other):
                table.problem(other, "does not go with values. Give either amplitude and peak, or values.")
        values = _values(table, any_sign, name)
        if len(found.problems) > before or period is None:
            return None
        return Season(period, values=values)
    amplitude = _number(table, "amplitude")
    if not table.has("amplitude"):
        table.problem("amplitude", "is missing. Write amplitude (with peak) or values, and period.")
    elif amplitude is not None and amplitude < 0:
        table.problem("amplitude", "is negative. Move peak by half a period, and write it without the sign.")
    elif amplitude is not None and amplitude > 1 and not any_sign:
        table.problem(
            "amplitude",
            f"{float(amplitude):g} lies outside [0, 1], so {name} would become negative. For 30 % write 0.30, or write "
            f'sign = "any" if {name} may be.',
        )
    peak = _number(table, "peak") if table.has("peak") else Fraction(0)
    if len(found.problems) > before or amplitude is None or peak is None or period is None:
        return None
    return Season(period, amplitude, peak)


def _number(table: Table, name: str) -> Fraction | None:
    if not table.has(name):
        return None
    read = table.found.number(table.raw[name], table.at(name), (*table.key, name))
    return None if read is None else Fraction(read[1])


def _values(table: Table, any_sign: bool, name: str) -> tuple[Fraction, ...]:
    raw, where, key = table.raw["values"], table.at("values"), (*table.key, "values")
    if not isinstance(raw, list) or not raw:
        what = "an empty list" if isinstance(raw, list) else describe(raw)
        table.problem("values", f"expected a list of factors such as [0.8, 1.0, 1.3, 0.9], not {what}.")
        return ()
    if len(raw) > MOST_PARTS:
        table.problem("values", f"lists {len(raw):,} factors. At most {MOST_PARTS} are read.")
        return ()
    out: list[Fraction] = []
    for place, item in enumerate(raw, 1):
        read = table.found.number(item, f"{where}, entry {place}", key)
        if read is None:
            continue
        value = Fraction(read[1])
        if value < 0 and not any_sign:
            table.found.add(
                f"{where}, entry {place}",
                f'{short(read[0].text)} is negative. Write sign = "any" if {name} may be.',
                key,
            )
            continue
        out.append(value)
    if not any(out) and len(out) == len(raw) and not any_sign:
        table.found.warn(where, f"every factor is 0: {name} is 0 all the time.")
    return tuple(out)


def check_seasons(draft: Draft, raw: Mapping[str, object]) -> None:
    """Check that the seasons of the parameters read so far fit together, and that the scenario can have any."""
    seasons = {name: p.season for name, p in draft.parameters.items() if p.season is not None}
    if not seasons:
        return
    first = next(iter(seasons))
    key = ("parameters", draft.typed[first], "season")
    stated = [form for form in ("next_generation", "projection") if form in raw]
    if draft.discrete and not stated:
        draft.found.add(
            f"parameters.{first}, season",
            'seasons are computed in continuous time only. Leave out time = "discrete", or the season.',
            key,
        )
    for form, what in (("next_generation", "a next-generation matrix as given"), ("projection", "a projection")):
        if form in raw:
            draft.found.add(
                f"parameters.{first}, season",
                f"{what} has no time in it, so a parameter cannot have a season. Leave it out.",
                key,
            )
    periods = [season.period for season in seasons.values()]
    if repeats(periods) > MOST_REPEATS:
        shortest = min(seasons, key=lambda name: seasons[name].period)
        longest = max(seasons, key=lambda name: seasons[name].period)
        whole = least_common_multiple(periods)
        draft.found.add(
            f"parameters.{shortest}, season",
            f"its period {float(seasons[shortest].period):g} and that of {longest}, {float(seasons[longest].period):g}, have "
            f"no common period to compute with: both begin anew together only after {float(whole):g} {draft.time_unit}. "
            "Choose periods of which one is a small multiple of the other.",
            ("parameters", draft.typed[shortest], "season"),
        )
