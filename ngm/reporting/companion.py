"""The companion of a report for machines: every result that it was written from, and every number with its name."""

from __future__ import annotations

from typing import Any

from ngm.reporting.checks import check
from ngm.reporting.document import Document
from ngm.reporting.material import Material

__all__ = ["companion"]


def companion(m: Material, document: Document) -> dict[str, Any]:
    """Return the companion object of a report: its results under the names of the verbs, and its numbers with their names."""
    found = check(m)
    bounds = m.solution.R0_bounds
    matrices: dict[str, dict[str, object]] = {
        name: {
            "values": [[[float(v) for v in row] for row in block] for block in matrix.blocks],
            "row_sums": [[float(sum(row)) for row in block] for block in matrix.blocks],
        }
        for name, matrix in m.scenario.matrices.items()
        if sum(len(block) ** 2 for block in matrix.blocks) <= 100_000
    }
    for name, found_ones in m.mixing.items():
        known = matrices.setdefault(name, {})
        known["balanced"] = [mixing.table for mixing in found_ones]
        known["balanced_row_sums"] = [mixing.row_sums for mixing in found_ones]
        known["breach"] = [
            None if mixing.gaps is None else {"largest": mixing.gaps.largest, "overall": mixing.gaps.overall}
            for mixing in found_ones
        ]
    own = m.sensitivity.local if m.sensitivity is not None else ()
    tree: dict[str, Any] = {
        "title": m.scenario.title,
        "digest": m.solution.digest,
        "written_on": m.made_on,
        "solve": m.solution.to_json(),
        "control": None if m.control is None else m.control.to_json(),
        "compare": None if m.comparison is None else m.comparison.to_json(),
        "sensitivity": None if m.sensitivity is None else m.sensitivity.to_json(),
        "allocate": None if m.allocation is None else m.allocation.to_json(),
        "outbreak": None if m.outbreak is None else m.outbreak.to_json(),
        "twin": None if m.twin is None else m.twin.to_json(),
        "course": None if m.course is None else m.course.to_json(),
        "threshold": [found.to_json() for found in m.thresholds],
        "units": None if m.units is None else m.units.to_json(),
        "splits": None if m.splits is None else m.splits.to_json(),
        "formula": None if m.formula is None else m.formula.to_json(),
        "difference": None if m.difference is None else m.difference.to_json(),
        "report": {
            "residual": m.solution.residual,
            "parameters": {name: list(values[:1000]) for name, values in m.values.items()},
            "matrices": matrices,
            "sensitivity": [{"value": index.value} for index in own],
            "sizes": None if m.solution.sizes is None else list(m.solution.sizes),
            "checks": {
                "product": found.product,
                "root": found.root,
                "closed": found.closed,
                "width": None if bounds is None else bounds[1] - bounds[0],
            },
        },
    }
    tree["numbers"] = [
        {"name": item.name, "value": item.value, "shown": item.shown, "section": key}
        for key, item in document.numbers()
    ]
    return tree
