"""Blocks -> the document tree that pandoc reads as JSON. Text goes in as text: no form's syntax is ever written here.

Only figures and formulas differ between forms: the file of a figure has the ending that the form can show, and typst
needs a figure's description beside its file.
"""

from __future__ import annotations

import json
import re
import unicodedata
from collections.abc import Callable, Sequence
from itertools import groupby
from typing import Any

from ngm.reporting.document import (
    Block,
    Bullets,
    Code,
    Document,
    Figure,
    Formula,
    Inline,
    Line,
    Listing,
    Maths,
    Note,
    Number,
    Paragraph,
    Section,
    Strong,
    Table,
)
from ngm.reporting.word import SIDEWAYS

__all__ = ["tree"]

Node = dict[str, Any]
_NO_ATTRIBUTES: list[Any] = ["", [], []]
#: Columns with less text than this stay as wide as they are.
NARROW = 76
#: Letters of a formula that fit on the screen of a phone.
PHONE = 20
#: Letters of a listing on a line of TeX.
LISTED = 86


def tree(document: Document, form: str, figure: Callable[[Figure], str]) -> str:
    """Return the document as JSON for pandoc. `figure`: figure -> path of its file in this form."""
    blocks: list[Node] = []
    if form == "markdown":
        # Markdown has no place of its own for a title; its headings are shifted down by one.
        blocks.append({"t": "Header", "c": [0, _NO_ATTRIBUTES, _words(_clean(document.title), form)]})
    for line in document.under:
        blocks.append({"t": "Para", "c": _inlines(line, form)})
    for section in document.sections:
        blocks += _section(section, form, figure)
    title = _words(_clean(document.title), form)
    meta = {
        "title": {"t": "MetaInlines", "c": title},
        "lang": {"t": "MetaString", "c": "en"},
    }
    return json.dumps({"pandoc-api-version": [1, 23, 1], "meta": meta, "blocks": blocks})


def _section(section: Section, form: str, figure: Callable[[Figure], str]) -> list[Node]:
    if not section.blocks:
        return []
    out: list[Node] = []
    if section.key == "checklist":
        out += _new_page(form)
    out.append({"t": "Header", "c": [1, [f"section-{section.key}", [], []], _words(section.title, form)]})
    for wide, group in groupby(section.blocks, key=_is_wide):
        inside = [node for block in group for node in _block(block, form, figure)]
        out += _on_its_side(inside, form) if wide else inside
    return out


def _is_wide(block: Block) -> bool:
    return isinstance(block, Table | Formula) and block.wide


def _on_its_side(nodes: list[Node], form: str) -> list[Node]:
    """Return blocks on pages laid on their sides, in the forms that have pages."""
    around = {
        "typst": ("typst", "#page(flipped: true)[", "]"),
        "latex": ("latex", r"\begin{landscape}", r"\end{landscape}"),
        "docx": ("openxml", *SIDEWAYS),
    }.get(form)
    if around is None:
        return nodes
    kind, before, after = around
    return [{"t": "RawBlock", "c": [kind, before]}, *nodes, {"t": "RawBlock", "c": [kind, after]}]


def _folded(text: str) -> str:
    """Return text with long lines folded: TeX does not break what stands verbatim. A hooked arrow begins what is folded."""
    out = []
    for line in text.split("\n"):
        out.append(line[:LISTED])
        out += [f"↪ {line[k : k + LISTED - 2]}" for k in range(LISTED, len(line), LISTED - 2)]
    return "\n".join(out)


def _new_page(form: str) -> list[Node]:
    raw = {
        "typst": ("typst", "#pagebreak(weak: true)"),
        "latex": ("latex", r"\clearpage"),
        "docx": ("openxml", '<w:p><w:r><w:br w:type="page"/></w:r></w:p>'),
    }.get(form)
    return [] if raw is None else [{"t": "RawBlock", "c": list(raw)}]


def _block(block: Block, form: str, figure: Callable[[Figure], str]) -> list[Node]:
    match block:
        case Paragraph(line=line):
            return [{"t": "Para", "c": _inlines(line, form)}]
        case Note(line=line):
            inside = [{"t": "Para", "c": _inlines(line, form)}]
            return [{"t": "BlockQuote", "c": inside}]
        case Formula(latex=latex):
            formula = {"t": "Para", "c": _formula("DisplayMath", latex, form)}
            wide = form == "html" and _letters(latex) > PHONE
            return [_scrolling(formula, "A wide formula") if wide else formula]
        case Bullets(items=items):
            return [{"t": "BulletList", "c": [[{"t": "Plain", "c": _inlines(item, form)}] for item in items]}]
        case Listing(text=text):
            shown = _clean(text, keep="\n")
            return [{"t": "CodeBlock", "c": [_NO_ATTRIBUTES, _folded(shown) if form == "latex" else shown]}]
        case Table():
            table = _table(block, form)
            if block.wide and form == "html":
                return [_scrolling(table, _clean(" ".join(_text(block.caption).split())))]
            return [table]
        case Figure():
            return [_figure(block, form, figure(block))]


def _scrolling(node: Node, name: str) -> Node:
    """Return what scrolls where the screen is narrow; by keyboard, too."""
    return {"t": "Div", "c": [["", ["wide"], [["role", "group"], ["tabindex", "0"], ["aria-label", name]]], [node]]}


def _inlines(line: Line, form: str) -> list[Node]:
    out: list[Node] = []
    for piece in line:
        out += _inline(piece, form)
    return out


def _inline(piece: Inline, form: str) -> list[Node]:
    match piece:
        case str():
            return _words(_clean(piece), form)
        case Strong(text=text):
            return [{"t": "Strong", "c": _words(_clean(text), form)}]
        case Code(text=text):
            return [{"t": "Code", "c": [_NO_ATTRIBUTES, _clean(text)]}]
        case Maths(latex=latex):
            return _formula("InlineMath", latex, form)
        case Number(shown=shown, name=name):
            return [{"t": "Span", "c": [["", ["number"], [["data-json", name]]], [{"t": "Str", "c": shown}]]}]


def _words(text: str, form: str) -> list[Node]:
    """Return text as words and the blanks between them; for typst as a string, which cannot be read as anything else.

    A line of typst that begins with "+ " or "= " is a list or a heading, and the writer does not escape that.
    """
    if form == "typst":
        return [{"t": "RawInline", "c": ["typst", f"#{_string(text)};"]}] if text else []
    out: list[Node] = []
    for piece in re.split(r"(\s+)", text):
        if piece.isspace():
            out.append({"t": "Space"})
        elif form == "markdown" and "&" in piece:
            # The writer leaves "&amp;" as it is, which a reader of Markdown would take for "&".
            for k, part in enumerate(piece.split("&")):
                out += [{"t": "RawInline", "c": ["html", "&amp;"]}] * (k > 0)
                out += [{"t": "Str", "c": part}] * (part != "")
        elif piece:
            out.append({"t": "Str", "c": piece})
    return out


def _string(text: str) -> str:
    """Return text as a string literal of typst."""
    return '"' + text.replace("\\", "\\\\").replace('"', '\\"') + '"'


def _clean(text: str, keep: str = "") -> str:
    """Return text without control and direction signs, which no form may hold or which turn what stands beside them."""
    return "".join(c if unicodedata.category(c)[0] != "C" or c in keep else " " for c in text.replace("\t", "    "))


def _formula(kind: str, latex: str, form: str) -> list[Node]:
    """Return a formula; in the PDF with its text for those who listen to it, which the other forms carry by themselves."""
    node = {"t": "Math", "c": [{"t": kind}, _maths(latex)]}
    if form != "typst":
        return [node]
    plain = re.sub(r"\\(left|right|,|qquad|quad|mathrm|displaystyle)(?![a-z])", " ", _maths(latex)).replace(
        "dfrac", "frac"
    )
    told = _string(" ".join(plain.split()))
    before, after = (f"#[#set math.equation(alt: {told});", "]")
    return [{"t": "RawInline", "c": ["typst", before]}, node, {"t": "RawInline", "c": ["typst", after]}]


def _maths(latex: str) -> str:
    return " ".join(_clean(latex).split())


def _table(table: Table, form: str) -> Node:
    columns = len(table.heads)
    shares = None if table.wide else _shares(table)
    specs = [
        [
            {"t": "AlignRight" if k in table.numeric else "AlignLeft"},
            {"t": "ColWidthDefault"} if shares is None else {"t": "ColWidth", "c": shares[k]},
        ]
        for k in range(columns)
    ]
    head = [_NO_ATTRIBUTES, [_row([(text,) for text in table.heads], form)]]
    body = [_NO_ATTRIBUTES, 1, [], [_row(row, form) for row in table.rows]]
    caption = [None, [{"t": "Plain", "c": _inlines(table.caption, form)}]]
    return {"t": "Table", "c": [_NO_ATTRIBUTES, caption, specs, head, [body], [_NO_ATTRIBUTES, []]]}


def _row(cells: Sequence[Line], form: str) -> list[Any]:
    default = {"t": "AlignDefault"}
    return [_NO_ATTRIBUTES, [[_NO_ATTRIBUTES, default, 1, 1, [{"t": "Plain", "c": _inlines(c, form)}]] for c in cells]]


def _shares(table: Table) -> list[float] | None:
    """Return each column's share of the line, None where all fits as it is."""
    longest = []
    words = []
    for k in range(len(table.heads)):
        texts = [_text((table.heads[k],)), *(_text(row[k]) for row in table.rows)]
        longest.append(max(len(text) for text in texts))
        words.append(max((len(word) for text in texts for word in text.split()), default=1))
    if sum(longest) + 3 * len(longest) <= NARROW:
        return None
    # A column gets room for its longest word first; the rest goes to those with most to say, less than in proportion.
    need = [min(word, 30) + 2 for word in words]
    want = [min(length, 400) ** 0.7 for length in longest]
    room = max(0.0, NARROW + 14 - sum(need))
    sizes = [n + room * w / sum(want) for n, w in zip(need, want, strict=True)]
    return [round(size / sum(sizes), 4) for size in sizes]


def _text(line: Line) -> str:
    """Return about what a reader sees of a line."""
    out = ""
    for piece in line:
        match piece:
            case str():
                out += piece
            case Number(shown=shown):
                out += shown
            case Maths(latex=latex):
                # A formula in a cell cannot be broken: it counts as one word.
                out += "m" * max(1, round(0.8 * _letters(latex)))
            case Strong(text=text) | Code(text=text):
                out += text
    return out


def _letters(latex: str) -> int:
    return len(re.sub(r"\\[a-z]+|[{}^_\\,\s]", "", latex))


def _figure(block: Figure, form: str, path: str) -> Node:
    alt, caption = _clean(block.alt), _clean(block.caption)
    if form == "typst":
        # The writer for typst has no place for the description of a picture.
        raw = f"#figure(fitted({_string(path)}, {_string(alt)}), caption: text({_string(caption)}))"
        return {"t": "RawBlock", "c": ["typst", raw]}
    image = {"t": "Image", "c": [["", [], []], _words(alt, form), [path, ""]]}
    inside = [{"t": "Plain", "c": [image]}]
    return {"t": "Figure", "c": [_NO_ATTRIBUTES, [None, [{"t": "Plain", "c": _words(caption, form)}]], inside]}
