"""The blocks that a report is made of. They know nothing of any form; the writers know nothing of what is said.

Text in a block is text: whatever a label holds, a writer shows its letters and never reads them as a command.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import Literal

__all__ = [
    "Block",
    "Bullets",
    "Code",
    "Document",
    "Figure",
    "Formula",
    "Inline",
    "Line",
    "Listing",
    "Maths",
    "Note",
    "Number",
    "Paragraph",
    "Section",
    "Strong",
    "Table",
]

Status = Literal["present", "absent", "missing"]


@dataclass(frozen=True, slots=True)
class Strong:
    """Words that stand out."""

    text: str


@dataclass(frozen=True, slots=True)
class Code:
    """Text in the syntax of scenario files or of the command line."""

    text: str


@dataclass(frozen=True, slots=True)
class Maths:
    """A short formula within a line, as LaTeX mathematics."""

    latex: str


@dataclass(frozen=True, slots=True)
class Number:
    """A number as shown, its value, and the name by which the companion file has it: ``solve.K[0][1]``."""

    shown: str
    value: float
    name: str


Inline = str | Strong | Code | Maths | Number
Line = tuple[Inline, ...]


@dataclass(frozen=True, slots=True)
class Paragraph:
    """Words."""

    line: Line


@dataclass(frozen=True, slots=True)
class Note:
    """Words that must not be overlooked: a warning, a caution."""

    line: Line


@dataclass(frozen=True, slots=True)
class Formula:
    """A formula on a line of its own, as LaTeX mathematics. `wide`: it needs a page on its side."""

    latex: str
    wide: bool = False


@dataclass(frozen=True, slots=True)
class Bullets:
    """A list."""

    items: tuple[Line, ...]


@dataclass(frozen=True, slots=True)
class Listing:
    """Text to be shown as it is, line by line."""

    text: str


@dataclass(frozen=True, slots=True)
class Table:
    """A table with its caption; the first column heads the rows.

    `numeric`: columns set to the right. `wide`: it needs a page on its side, where its columns fit as they are.
    """

    caption: Line
    heads: tuple[Inline, ...]
    rows: tuple[tuple[Line, ...], ...]
    numeric: frozenset[int] = frozenset()
    wide: bool = False


@dataclass(frozen=True, slots=True)
class Figure:
    """A picture as SVG, with what it shows in words for those who do not see it. `name`: its file, without ending."""

    name: str
    svg: str
    alt: str
    caption: str


Block = Paragraph | Note | Formula | Bullets | Listing | Table | Figure


@dataclass(frozen=True, slots=True)
class Section:
    """One part of the report. `status` and `why` go into the checklist; one without blocks is only told of there."""

    key: str
    title: str
    blocks: tuple[Block, ...]
    status: Status = "present"
    why: str = ""


@dataclass(frozen=True, slots=True)
class Document:
    """A report: title, what stands under it, and its sections in order."""

    title: str
    under: tuple[Line, ...]
    sections: tuple[Section, ...]
    extras: dict[str, object] = field(default_factory=dict)

    def numbers(self) -> Iterator[tuple[str, Number]]:
        """Yield every number of the document with the key of its section, in order."""
        for section in self.sections:
            for block in section.blocks:
                for line in lines(block):
                    for piece in line:
                        if isinstance(piece, Number):
                            yield section.key, piece

    def figures(self) -> tuple[Figure, ...]:
        """Return every figure in order."""
        return tuple(b for section in self.sections for b in section.blocks if isinstance(b, Figure))


def lines(block: Block) -> Iterator[Line]:
    """Yield the lines of text of a block."""
    match block:
        case Paragraph(line=line) | Note(line=line):
            yield line
        case Bullets(items=items):
            yield from items
        case Table(caption=caption, rows=rows):
            yield caption
            for row in rows:
                yield from row
        case _:
            return
