"""Every field of the objects of `solve` and `control`, against the second route, for every accepted model."""

from __future__ import annotations

from copy import deepcopy
from typing import Any

import pytest

import ngm
from tests.contract.accepted import MODELS, Model
from tests.contract.fields import Checked, control_differs
from tests.contract.second_route import Route
from tests.contract.test_accepted import solved


@pytest.mark.parametrize("model", MODELS, ids=[model.name for model in MODELS])
def test_fields(model: Model) -> None:
    checked = Checked(solved(model.name).to_json(), Route(model.text, model.factors))
    assert checked.wrong == []
    assert control_differs(ngm.control(ngm.loads(model.text)).to_json(), checked) == []


def nudged(value: Any) -> Any:
    """Return a value that is not this one."""
    match value:
        case bool():
            return not value
        case int() | float():
            return value * (1 + 1e-6) + 1e-6
        case str():
            return f"({value}) + 1"
        case None:
            return 1.0
    raise AssertionError(value)


def leaves(value: Any, path: tuple[Any, ...] = ()) -> list[tuple[Any, ...]]:
    if isinstance(value, dict):
        return [leaf for key, item in value.items() for leaf in leaves(item, (*path, key))]
    if isinstance(value, list):
        return [leaf for key, item in enumerate(value) for leaf in leaves(item, (*path, key))]
    return [path]


def test_no_field_can_change_unnoticed() -> None:
    """The check itself: each number, text and flag of a result, changed alone, is told."""
    model = next(model for model in MODELS if model.name == "vector host")
    told = solved(model.name).to_json()
    unseen = []
    for path in leaves(told):
        if path[0] in ("title", "warnings") or path[:1] == ("conditions",):
            continue
        changed = deepcopy(told)
        inner = changed
        for key in path[:-1]:
            inner = inner[key]
        inner[path[-1]] = nudged(inner[path[-1]])
        try:
            wrong = Checked(changed, Route(model.text, model.factors)).wrong
        except (ValueError, KeyError, AssertionError, TypeError):
            continue  # a label that is none
        if not wrong:
            unseen.append(path)
    # the least digit of a bound and a warning's wording are free
    assert unseen == []
