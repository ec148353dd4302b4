"""The caution that stands wherever a number below 1 is told of a model in which that is not enough."""

from __future__ import annotations

from ngm.analysis.numbers import Numbers

__all__ = ["below_one_caution"]

#: Infected types and compartments up to which this is looked at without being asked for.
MOST_TYPES, MOST_COMPARTMENTS = 24, 40


def below_one_caution(found: Numbers, label: str = "R0") -> list[str]:
    """Return the caution for a model whose endemic states leave backward at a number of 1; nothing for others.

    Large models are not looked at: `threshold` does that when asked.
    """
    scenario = found.scenario
    if len(scenario.compartments) > MOST_COMPARTMENTS or len(found.template.types) > MOST_TYPES:
        return []
    from ngm.analysis.threshold import is_backward, lowest_number

    if not is_backward(found):
        return []
    name = label if label == "R0" else f"the {label}"
    lowest, number = lowest_number(found)
    if lowest is None or number is None:
        down = "See threshold for the value from which on it cannot."
    elif number < lowest:
        down = f"It can where the number is above {lowest:.4g} (all transmission lowered together); here it is {number:.4g}."
    else:
        down = f"It cannot where the number is below {lowest:.4g} (all transmission lowered together)."
    return [
        f"Below one is not safe in this model: infection that is there already can persist although {name} is below 1 (endemic "
        f"states leave backward at 1). {down}"
    ]
