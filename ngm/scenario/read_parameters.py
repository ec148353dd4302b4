"""The parameters of a scenario: values, units, ranges and distributions."""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction
from typing import Any, cast

from ngm.expression.tree import Apply, Name, Total, walk
from ngm.scenario import exact, units
from ngm.scenario.draft import MOST_TYPES, Draft
from ngm.scenario.fields import Key, Table, closest, describe, listed, short
from ngm.scenario.model import Distribution, DistributionName, Expression, Parameter, Unit
from ngm.scenario.read_season import read_season

__all__ = ["read_parameters"]

_KEYS = ("value", "unit", "label", "source", "range", "distribution", "by", "sign", "season")
_MOMENTS = ("mean", "sd")
_ARGUMENTS: dict[str, tuple[str, ...]] = {
    "uniform": ("low", "high"),
    "triangular": ("low", "mode", "high"),
    "normal": _MOMENTS,
    "lognormal": _MOMENTS,
    "gamma": _MOMENTS,
    "beta": _MOMENTS,
}
#: a normal distribution whose mean lies fewer standard deviations than this above 0 is worth a warning
_FEW_DEVIATIONS = 3


def read_parameters(draft: Draft, members: Mapping[str, Any]) -> None:
    """Read the section, name -> raw entry, into `draft.parameters`."""
    for name, raw in members.items():
        typed = draft.typed[name]
        where, key = f"parameters.{name}", ("parameters", typed)
        example = f"{typed} = {{ value = {_plain(raw)} }}"
        table = Table(draft.found, raw, where, key, _KEYS, example=example)
        if table.is_table:
            parameter = _parameter(draft, name, table)
            if parameter is not None:
                draft.parameters[name] = parameter


def _plain(raw: object) -> str:
    if isinstance(raw, str):
        return f'"{short(raw)}"'
    return short(str(raw)) if not isinstance(raw, bool | list | dict) else "…"


def _parameter(draft: Draft, name: str, table: Table) -> Parameter | None:
    found = draft.found
    label, source = table.text("label"), table.text("source")
    any_sign = _sign(table)
    season = read_season(table, any_sign)
    unit_text = table.text("unit")
    by = draft.by(table.raw["by"], table.at("by"), (*table.key, "by")) if table.has("by") else ()
    if not table.has("value"):
        found.add(table.where, "value is missing. Write value = …, a number or an expression in quotes.", table.key)
    if by is not None and draft.copies(by) > MOST_TYPES:
        found.add(table.where, f"has {draft.copies(by):,} values. At most {MOST_TYPES:,} are read.", table.key)
        by = None
    values = _values(draft, table, by, any_sign) if by is not None and table.has("value") else None
    follows = values is not None and not all(exact.is_closed(value.tree) for value in values)
    unit = _unit(draft, table, unit_text, follows)
    bounds: tuple[float, float] | None = None
    distributions: tuple[Distribution, ...] = ()
    if follows:
        for extra in ("range", "distribution"):
            if table.has(extra):
                table.problem(extra, "a parameter that follows others takes none. Give it to those that it follows.")
    else:
        bounds = _range(table, any_sign)
        distributions = _distributions(draft, table, by, unit, any_sign)
    if values is None or by is None:
        return None
    if bounds is not None:
        _warn_outside(table, values, bounds)
    return Parameter(name, values, by, unit, label, source, bounds, distributions, any_sign, season)


def _sign(table: Table) -> bool:
    sign = table.text("sign")
    if sign is not None and sign != "any":
        table.problem("sign", f"'{short(sign)}' is not known. Write sign = \"any\" or leave it out.")
    return sign is not None or table.has("sign")


def _unit(draft: Draft, table: Table, text: str | None, follows: bool) -> Unit | None:
    if text is None:
        return None
    reading = units.read_unit(text, draft.time_unit)
    if reading.refusal is not None:
        table.problem("unit", reading.refusal)
    elif draft.discrete and units.is_share_of_another_step(reading.unit, draft.time_unit):
        table.problem(
            "unit",
            f"'{short(text)}' is a share in another unit of time than the step of one {draft.time_unit}, and shares do not add "
            f"up over time. Give the share per {draft.time_unit}: of p in a step that is n times as short it is 1 - (1 - p)^n.",
        )
    elif reading.converts is not None and follows:
        table.problem(
            "unit",
            f"'{short(text)}' holds '{reading.converts}', but a parameter that follows others is not converted. "
            f"Name the unit of what the expression gives, in {draft.time_unit}.",
        )
    if reading.warning is not None:
        draft.found.warn(table.at("unit"), reading.warning)
    return reading.unit


def _values(draft: Draft, table: Table, by: tuple[str, ...], any_sign: bool) -> tuple[Expression, ...] | None:
    found = draft.found
    where, key = table.at("value"), (*table.key, "value")
    items = draft.spread(table.raw["value"], by, where, key)
    if items is None:
        return None
    copies = draft.copies(by)
    groups = _labels(draft, by) if len(items) > 1 else []
    out: list[Expression] = []
    for index, item in enumerate(items):
        place = f"{where}, {groups[index]}" if groups else where
        expression = found.quantity(item, place, key)
        if expression is None:
            continue
        if exact.is_closed(expression.tree):
            value = found.value(expression, place, key)
            if value is None:
                continue
            if value < 0 and not any_sign:
                message = f'{short(expression.text)} is negative. Write sign = "any" if {table.key[-1]} may be.'
                found.add(place, message, key)
        elif not _only_parameters(draft, expression, place, key):
            continue
        out.append(expression)
    if len(out) < len(items):
        return None
    return tuple(out) * copies if len(out) == 1 else tuple(out)


def _labels(draft: Draft, by: tuple[str, ...]) -> list[str]:
    labels = [""]
    for name in by:
        labels = [f"{head},{group}" if head else group for head in labels for group in draft.dimensions[name].groups]
    return labels


def _only_parameters(draft: Draft, expression: Expression, where: str, key: Key) -> bool:
    """Check that a parameter follows parameters only; `check` looks at names that nobody knows."""
    for node in walk(expression.tree):
        message = ""
        if isinstance(node, Total | Apply):
            what = "sum" if isinstance(node, Total) else f"the matrix {node.matrix}"
            message = f"{what} cannot stand in a parameter. Write it in a definition."
        elif isinstance(node, Name):
            role = draft.roles.get(node.name)
            if role in ("compartment", "definition"):
                message = f"'{node.name}' is a {role}. A parameter may follow other parameters only."
        if message:
            draft.found.add(where, message, key, expression.text, node.position)
            return False
    return True


def _range(table: Table, any_sign: bool) -> tuple[float, float] | None:
    if not table.has("range"):
        return None
    raw, key = table.raw["range"], (*table.key, "range")
    if not isinstance(raw, list) or len(raw) != 2:
        what = f"a list of {len(raw)}" if isinstance(raw, list) else describe(raw)
        table.problem("range", f"expected two numbers, [low, high], not {what}.")
        return None
    ends = [table.found.number(item, table.at("range"), key) for item in raw]
    if ends[0] is None or ends[1] is None:
        return None
    (low_text, low), (high_text, high) = ends[0], ends[1]
    if low > high:
        table.problem(
            "range", f"low {low_text.text} is above high {high_text.text}. Write [{high_text.text}, {low_text.text}]."
        )
        return None
    if low < 0 and not any_sign:
        table.problem("range", f'{low_text.text} is negative. Write sign = "any" if {table.key[-1]} may be.')
        return None
    return float(low), float(high)


def _warn_outside(table: Table, values: tuple[Expression, ...], bounds: tuple[float, float]) -> None:
    for value in dict.fromkeys(values):
        number = float(exact.evaluate(value.tree))
        if not bounds[0] <= number <= bounds[1]:
            range_text = f"{bounds[0]:g} to {bounds[1]:g}"
            table.found.warn(table.at("range"), f"the value {short(value.text)} lies outside the range {range_text}.")
            return


def _distributions(
    draft: Draft, table: Table, by: tuple[str, ...] | None, unit: Unit | None, any_sign: bool
) -> tuple[Distribution, ...]:
    if not table.has("distribution"):
        return ()
    raw, key = table.raw["distribution"], (*table.key, "distribution")
    if isinstance(raw, list) and by is None:
        return ()
    items = draft.spread(raw, by or (), table.at("distribution"), key, loose=True)
    if items is None:
        return ()
    out: list[Distribution] = []
    for number, item in enumerate(items, 1):
        where = table.at("distribution") if len(items) == 1 else f"{table.at('distribution')} {number}"
        distribution = _distribution(draft, item, where, key, unit, any_sign)
        if distribution is not None:
            out.append(distribution)
    return tuple(out) if len(out) == len(items) else ()


def _distribution(
    draft: Draft, raw: object, where: str, key: Key, unit: Unit | None, any_sign: bool
) -> Distribution | None:
    found = draft.found
    if not isinstance(raw, dict):
        example = '{ name = "lognormal", mean = 0.2, sd = 0.04 }'
        found.add(where, f"expected a table such as {example}, not {describe(raw)}.", key)
        return None
    name = raw.get("name")
    if not isinstance(name, str) or name not in _ARGUMENTS:
        if "name" not in raw:
            what = "name is missing."
        elif isinstance(name, str):
            what = f"'{short(name)}' is not a distribution that is known here.{closest(name, _ARGUMENTS)}"
        else:
            what = f"name: expected a text in quotes, not {describe(name)}."
        found.add(where, f"{what} The distributions: {listed(_ARGUMENTS)}.", key)
        return None
    wanted = _ARGUMENTS[name]
    usage = f"Write {name} with {', '.join(wanted)}."
    for extra in raw:
        if extra != "name" and extra not in wanted:
            found.add(where, f"'{short(extra)}' is not a key of {name}. {usage}", key)
    arguments: dict[str, Fraction | float] = {}
    for argument in wanted:
        if argument not in raw:
            found.add(where, f"{argument} is missing. {usage}", key)
            continue
        number = found.number(raw[argument], f"{where}, {argument}", key)
        if number is not None:
            arguments[argument] = number[1]
    if len(arguments) < len(wanted):
        return None
    percent = unit is not None and unit.powers == {} and unit.factor == Fraction(1, 100)
    trouble = _infeasible(name, arguments, any_sign, Fraction(1, 100) if percent else Fraction(1))
    if trouble is not None:
        found.add(where, trouble, key)
        return None
    if name == "normal" and not any_sign and arguments["mean"] < _FEW_DEVIATIONS * arguments["sd"]:
        found.warn(where, "a normal distribution this wide reaches below 0. lognormal and gamma stay positive.")
    return Distribution(cast(DistributionName, name), {name: float(value) for name, value in arguments.items()})


def _infeasible(name: str, arguments: Mapping[str, Fraction | float], any_sign: bool, scale: Fraction) -> str | None:
    """Return why no such distribution exists, or None. `scale`: 1/100 for a number in per cent."""
    if name in ("uniform", "triangular"):
        low, high = arguments["low"], arguments["high"]
        if low >= high:
            return f"low = {float(low):g} is not below high = {float(high):g}."
        if name == "triangular" and not low <= arguments["mode"] <= high:
            return f"mode = {float(arguments['mode']):g} lies outside low to high ({float(low):g} to {float(high):g})."
        if low < 0 and not any_sign:
            return f'low = {float(low):g} is negative. Write sign = "any" if the parameter may be.'
        return None
    mean, sd = arguments["mean"], arguments["sd"]
    if sd <= 0:
        return f"sd = {float(sd):g} is not positive."
    if name == "normal":
        if mean < 0 and not any_sign:
            return f'mean = {float(mean):g} is negative. Write sign = "any" if the parameter may be.'
        return None
    if mean <= 0:
        return f"mean = {float(mean):g} is not positive, as the mean of {name} is."
    if name == "beta":
        share, spread = float(mean * scale), float(sd * scale)
        if share >= 1:
            return f"mean = {float(mean):g} is not below {1 / float(scale):g}, as the mean of beta is."
        if spread**2 >= share * (1 - share):
            most = (share * (1 - share)) ** 0.5 / float(scale)
            return f"sd = {float(sd):g} is too large for this mean: it stays below {most:.6g}."
    return None
