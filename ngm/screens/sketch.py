"""The flow diagram's boxes and arrows, from a scenario document that may be half typed."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from ngm.charts.graphs import Arrow, Stage

__all__ = ["arrows", "stages"]


def stages(document: Mapping[str, Any]) -> list[Stage]:
    """Return the compartments to draw."""
    section = document.get("compartments")
    out: list[Stage] = []
    for name, entry in section.items() if isinstance(section, dict) else ():
        fields = entry if isinstance(entry, dict) else {}
        infected = fields.get("infected")
        out.append(Stage(name, _text(fields.get("label")), infected if isinstance(infected, bool) else None))
    return out


def arrows(document: Mapping[str, Any]) -> list[Arrow]:
    """Return the flows to draw, with what is said of them so far."""
    section = document.get("flow")
    return [
        Arrow(*(_text(entry.get(key)) for key in ("from", "to", "kind", "rate", "label")))
        for entry in (section if isinstance(section, list) else ())
        if isinstance(entry, dict)
    ]


def _text(value: object) -> str:
    return "" if value is None else str(value)
