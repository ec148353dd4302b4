"""Broken in any place, a file ends in a refusal in words or loads: never in another error."""

from __future__ import annotations

import copy
import random
import tomllib
from collections.abc import Iterator
from typing import Any

import pytest

from ngm.errors import ScenarioError
from ngm.scenario.edit import key_text, toml
from ngm.scenario.file import loads
from tests.scenario.models import GROUPED, PLAIN

JUNK: list[Any] = [
    *(0, -1, True, "", "S", "age", "I", "beta", "C", "x y", [], {}, [[]], [{}], {"a": 1}, ["S"], ["age"], 1e299),
    *("1/0", "sum(S, age)", "C(I)", "9^9^9^9", "sum(I)", [1, 2], [[1, 2], [3, 4]], 10**400, "old", "exp", "β", 3.5),
]
KEYS = ["S", "age", "I", "β", "value", "by", "C", "range", "distribution", "group", "season", "sum"]


def paths(value: object, path: tuple[Any, ...] = ()) -> Iterator[tuple[Any, ...]]:
    if path:
        yield path
    if isinstance(value, dict):
        for key, inner in value.items():
            yield from paths(inner, (*path, key))
    elif isinstance(value, list):
        for number, inner in enumerate(value):
            yield from paths(inner, (*path, number))


def at(data: Any, path: tuple[Any, ...]) -> Any:
    for part in path:
        data = data[part]
    return data


@pytest.mark.parametrize("seed", range(6))
def test_mutations(seed: int) -> None:
    rng = random.Random(seed)
    refused: list[str] = []
    for _ in range(60):
        data = tomllib.loads(rng.choice([PLAIN, GROUPED]))
        for _ in range(rng.choice([1, 1, 1, 2, 4])):
            path = rng.choice(list(paths(data)))
            home = at(data, path[:-1])
            draw = rng.random()
            if draw < 0.2:
                del home[path[-1]]
            elif draw < 0.35 and isinstance(home, dict):
                home[rng.choice(KEYS)] = copy.deepcopy(rng.choice(JUNK))
            elif draw < 0.45:
                home[path[-1]] = copy.deepcopy(at(data, rng.choice(list(paths(data)))))
            else:
                home[path[-1]] = copy.deepcopy(rng.choice(JUNK))
        try:
            loads("\n".join(f"{key_text(key)} = {toml(value)}".replace("\n", " ") for key, value in data.items()))
        except ScenarioError as error:
            refused.append(str(error))
    assert len(refused) > 30
    assert all(0 < len(message) < 2000 for message in refused)
