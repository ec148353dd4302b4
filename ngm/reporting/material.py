"""What a report is written from: the scenario and its results, and small pieces that several sections share."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

from ngm.errors import ExpressionError
from ngm.expression.typeset import latex_of
from ngm.reporting.document import Block, Code, Formula, Inline, Line, Maths, Number, Paragraph, Table
from ngm.reporting.numbers import number
from ngm.reporting.width import LINE, SIDE_LINE, columns, spaced, width
from ngm.results import ControlResult, Matrix, Solution, TextMatrix
from ngm.results_control import Allocation, Comparison
from ngm.results_course import Course, Threshold
from ngm.results_mixing import Mixing
from ngm.results_opinion import Difference, FormulaOpinion, Splits, Units
from ngm.results_outbreak import Outbreak, Twin
from ngm.results_sensitivity import Sensitivity
from ngm.scenario.model import Scenario

__all__ = [
    "Material",
    "abbreviations",
    "equation",
    "inline",
    "listed",
    "matrix",
    "name_of",
    "numbers_table",
    "square",
    "term",
]

#: Rows of one table; what is left out is told, and is in the companion file.
MOST_ROWS = 60
#: A longer expression is not printed within a table.
MOST_LETTERS = 1200
#: Entries of a matrix, and steps of the derivation, up to which none is left out.
MOST_ENTRIES = 250
#: Types up to which a matrix is set as one whatever is in it; as one on a page on its side; and in parts.
MOST_COLUMNS, MOST_WIDE, MOST_SQUARE = 7, 14, 40
#: Entries up to which a larger matrix is listed one by one; one with more than `MOST_WIDE` columns: three a row.
FEW = 24


@dataclass(frozen=True, eq=False, slots=True)
class Material:
    """Everything that is said somewhere in the report. What was not computed is None.

    `values`: parameter -> its values in force, one for each group. `made_on`: the date of writing. `mixing`: matrix of
    contacts -> what was found of it, one for each group that it is given within. `supplied`: whether the supply that is
    allocated was asked for; else it is the smallest that is enough. `why`: part -> why it was not computed.
    """

    scenario: Scenario
    solution: Solution
    control: ControlResult | None
    comparison: Comparison | None
    sensitivity: Sensitivity | None
    allocation: Allocation | None
    values: Mapping[str, tuple[float, ...]]
    made_on: str
    command: str
    mixing: Mapping[str, tuple[Mixing, ...]] = field(default_factory=dict)
    supplied: bool = True
    units: Units | None = None
    splits: Splits | None = None
    formula: FormulaOpinion | None = None
    difference: Difference | None = None
    outbreak: Outbreak | None = None
    twin: Twin | None = None
    course: Course | None = None
    thresholds: tuple[Threshold, ...] = ()
    why: Mapping[str, str] = field(default_factory=dict)

    @property
    def unit(self) -> str:
        """The unit of time."""
        return self.solution.time_unit

    @property
    def spread(self) -> Mapping[str, Any] | None:
        """What draws say, as `sensitivity --json` has it under "global"; None where nothing was drawn."""
        found = None if self.sensitivity is None else self.sensitivity.to_json()["global"]
        return found if isinstance(found, dict) else None


def inline(text: str, most: float = 34.0) -> Inline:
    """Return an expression within a line: typeset where it is short, as text that can be broken where it is long."""
    try:
        wide = width(text) > most
    except ExpressionError:
        # Shares of moving members are told in words beside the expression.
        return Code(spaced(text))
    if len(text) > MOST_LETTERS:
        return f"an expression of {len(text)} letters: see the JSON result"
    if wide:
        return Code(spaced(text))
    return Maths(latex_of(text).replace(r"\frac", r"\dfrac"))


def name_of(item: str) -> Inline:
    """Return a name with its groups, typeset: an index is short enough for any line. A label in words stays as it is."""
    try:
        return Maths(latex_of(item)) if len(item) <= 40 else Code(item)
    except ExpressionError:
        return Code(item)


def term(items: Sequence[str], most: int = 8) -> Line:
    """Return names one after the other, the first of them where there are many."""
    out: list[Inline] = []
    for k, item in enumerate(items[:most]):
        out += [", "] * (k > 0)
        out.append(name_of(item))
    if len(items) > most:
        out.append(f" and {len(items) - most} more")
    return tuple(out) or ("none",)


def equation(left: str, text: str) -> Block:
    """Return ``left = text`` on a line of its own; a long right side is text that runs over several lines."""
    if width(text) <= LINE - 8:
        return Formula(f"{left} = {latex_of(text)}")
    return Paragraph((Maths(f"{left} = "), " ", Code(spaced(text))))


def listed(count: int, shown: int, what: str) -> list[Block]:
    """Return a line that tells what a table leaves out; nothing where it has all."""
    if count <= shown:
        return []
    return [Paragraph((f"{count - shown} more {what} are left out here; the JSON result has all of them.",))]


def matrix(name: str, entries: TextMatrix, labels: Sequence[str]) -> list[Block]:
    """Return a matrix of expressions: as one where it fits on a page, else its entries that are not zero, one by one."""
    if not labels:
        return []
    wide = sum(max(width(row[k]) for row in entries) + 3 for k in range(len(labels)))
    cells = [
        (labels[i], labels[j], entry) for i, row in enumerate(entries) for j, entry in enumerate(row) if entry != "0"
    ]
    fits = len(labels) <= MOST_COLUMNS and wide <= LINE - 6
    # A matrix that is nearly empty is read more easily as a list than on a page of its own.
    if fits or (len(labels) <= MOST_WIDE and wide <= SIDE_LINE - 6 and len(cells) > FEW):
        body = r" \\ ".join(" & ".join(latex_of(entry) for entry in row) for row in entries)
        body = body.replace(r"\frac", r"\dfrac")
        return [Formula(rf"{name} = \begin{{pmatrix}} {body} \end{{pmatrix}}", wide=not fits)]
    shown = cells[:MOST_ENTRIES]
    rows = tuple(((name_of(i),), (name_of(j),), (inline(entry),)) for i, j, entry in shown)
    table = Table(
        (
            f"Entries of {name} that are not zero. Row: the type that is gained or lost; column: the type that "
            "causes it.",
        ),
        ("row", "column", "entry"),
        rows,
    )
    return (
        [table, *listed(len(cells), len(shown), f"entries of {name}")] if rows else [Paragraph((f"{name} is zero.",))]
    )


def numbers_table(name: str, values: Matrix, labels: Sequence[str], key: str, what: str) -> list[Block]:
    """Return a matrix of numbers with its labels, on a page on its side or in parts where it is wide.

    One that is large and nearly empty is listed entry by entry, as is one with more than `MOST_SQUARE` columns.
    """
    if not labels:
        return []
    cells = [(i, j, value) for i, row in enumerate(values) for j, value in enumerate(row) if value != 0]
    few = FEW if len(labels) <= MOST_WIDE else 3 * len(labels)
    if len(labels) <= MOST_COLUMNS or (len(labels) <= MOST_SQUARE and len(cells) > few):
        kept = [i for i, row in enumerate(values) if len(labels) <= MOST_COLUMNS or any(row)]
        left_out = "" if len(kept) == len(labels) else "; rows that are left out are 0"
        caption = (f"{name} in numbers{what}; JSON name ", Code(f"{key}[row][column]"), f", counted from 0{left_out}")
        body = [[number(value, f"{key}[{i}][{j}]") for j, value in enumerate(values[i])] for i in kept]
        return square(caption, "type", [name_of(x) for x in labels], [(name_of(labels[i]),) for i in kept], body)
    shown = cells[:MOST_ENTRIES]
    rows = tuple(((name_of(labels[i]),), (name_of(labels[j]),), (number(v, f"{key}[{i}][{j}]"),)) for i, j, v in shown)
    caption = (f"Entries of {name} that are not zero{what}; JSON name ", Code(f"{key}[row][column]"), ".")
    return [
        Table(caption, ("row", "column", name), rows, frozenset({2})),
        *listed(len(cells), len(shown), f"entries of {name}"),
    ]


def square(
    caption: Line, corner: str, heads: Sequence[Inline], rows: Sequence[Line], body: Sequence[Sequence[Inline]]
) -> list[Block]:
    """Return a table of numbers in as many parts as it takes to keep each on the page; `caption` ends without a stop."""

    def letters(piece: Inline) -> int:
        match piece:
            case Number(shown=shown):
                return len(shown)
            case Maths(latex=latex):
                return len(re.sub(r"\\[a-z]+|[{}^_\\,\s]", "", latex))
            case str():
                return len(piece)
            case _:
                return len(piece.text)

    sizes = [max(letters(head), *(letters(row[k]) for row in body)) for k, head in enumerate(heads)]
    layout = columns(max(len(corner), *map(letters, heads)), sizes)
    out: list[Block] = []
    for first, last in layout.parts:
        part = f", columns {first + 1} to {last} of {len(heads)}" if len(layout.parts) > 1 else ""
        out.append(
            Table(
                (*caption, f"{part}."),
                (corner, *heads[first:last]),
                tuple((label, *((piece,) for piece in row[first:last])) for label, row in zip(rows, body, strict=True)),
                frozenset(range(1, last - first + 1)),
                layout.wide,
            )
        )
    return out


def abbreviations(solution: Solution, texts: Sequence[str], told: set[str]) -> list[Block]:
    """Return the abbreviations that the texts need and that have not been told yet, in the order in which they are made."""
    written = solution.symbolic.abbreviations
    words = {word for text in texts for word in re.findall(r"\w+", text)}
    needed: set[str] = set()
    # Later names are made of earlier ones: from the last to the first, each brings what it is made of.
    for name, formula in reversed(list(written.items())):
        if name in words:
            needed.add(name)
            words.update(re.findall(r"\w+", formula))
    names = [name for name in written if name in needed - told]
    told |= needed
    if not names:
        return []
    about = {step.name: step.about for step in solution.symbolic.steps if step.kind == "elimination"}
    shown = names[:MOST_ENTRIES]
    rows: tuple[tuple[Line, ...], ...] = tuple(
        ((name_of(name),), (inline(written[name]),), (about.get(name, ""),)) for name in shown
    )
    heads: tuple[str, ...] = ("name", "stands for", "that is")
    if not any(row[2][0] for row in rows):
        rows, heads = tuple(row[:2] for row in rows), heads[:2]
    return [
        Table(("Abbreviations, each made of those above it.",), heads, rows),
        *listed(len(names), len(shown), "lines"),
    ]
