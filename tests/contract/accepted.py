"""Models that the formats allow: read from the two tables beside this file and written as scenario files."""

from __future__ import annotations

import json
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

__all__ = ["MODELS", "Model"]


@dataclass(frozen=True)
class Model:
    """One row of a table. `free`: what the file gives; `state`: what the infection-free state is, by hand."""

    name: str
    compartments: str
    flows: str
    parameters: Mapping[str, Any]
    time_unit: str = "day"
    definitions: Mapping[str, str] = field(default_factory=dict)
    dimensions: Mapping[str, list[str]] = field(default_factory=dict)
    matrices: Mapping[str, Mapping[str, Any]] = field(default_factory=dict)
    movements: list[Mapping[str, Any]] = field(default_factory=list)
    free: Mapping[str, Any] | None = None
    factors: Mapping[str, str] = field(default_factory=dict)
    state: Mapping[str, float] = field(default_factory=dict)
    at_infection: list[str] | None = None
    others: Mapping[str, float] = field(default_factory=dict)
    warning: str = ""

    @property
    def text(self) -> str:
        """The scenario file."""
        lines = ["[scenario]", f"title = {plain(self.name)}", f"time_unit = {plain(self.time_unit)}"]
        lines += section("dimensions", self.dimensions)
        lines.append("[compartments]")
        for word in self.compartments.split():
            head, _, by = word.rstrip("]").partition("[")
            infected = str(head.endswith("*")).lower()
            grouped = f", by = {plain(by.split(','))}" if by else ""
            lines.append(f"{plain(head.rstrip('*'))} = {{ infected = {infected}{grouped} }}")
        values = {k: v if isinstance(v, dict) else {"value": v} for k, v in self.parameters.items()}
        lines += section("parameters", values) + section("definitions", self.definitions)
        for name, matrix in self.matrices.items():
            lines += section(f"matrices.{plain(name)}", matrix)
        for arrow in filter(None, (piece.strip() for piece in self.flows.split(";"))):
            head, _, rate = arrow.partition(":")
            source, _, target = head[:-1].strip().partition("->")
            kind = {"t": "transmission", "x": "transition"}[head[-1]]
            ends = {"from": source.strip(), "to": target.strip()}
            flow = {end: name for end, name in ends.items() if name != "0"} | {"rate": rate.strip(), "kind": kind}
            lines += ["[[flow]]", *(f"{key} = {plain(value)}" for key, value in flow.items())]
        for movement in self.movements:
            lines += ["[[movement]]", *(f"{key} = {plain(value)}" for key, value in movement.items())]
        if self.free is not None:
            lines += section("infection_free", self.free, empty=True)
        return "\n".join(lines) + "\n"


def section(name: str, entries: Mapping[str, Any], *, empty: bool = False) -> list[str]:
    head = [f"[{name}]"] if entries or empty else []
    return head + [f"{plain(key)} = {plain(value)}" for key, value in entries.items()]


def plain(value: Any) -> str:
    """Return a value as TOML on one line."""
    if isinstance(value, dict):
        return "{ " + ", ".join(f"{plain(key)} = {plain(item)}" for key, item in value.items()) + " }"
    if isinstance(value, list):
        return "[" + ", ".join(map(plain, value)) + "]"
    return json.dumps(value, ensure_ascii=False)


def tables() -> list[Model]:
    here = Path(__file__).parent
    rows = []
    for file in ("plain_models.toml", "grouped_models.toml"):
        rows += tomllib.loads((here / file).read_text(encoding="utf-8"))["model"]
    return [Model(**row) for row in rows]


MODELS = tables()
