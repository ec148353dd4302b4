"""No text of a scenario is a command in any form of a report: every text in every field, over all turns.

A report on the same model with harmless words says what a form's own commands are; a hostile text may add none.
"""

from __future__ import annotations

import io
import json
import re
import subprocess
import zipfile
from functools import cache
from html.parser import HTMLParser
from pathlib import Path
from xml.etree import ElementTree

import pypandoc
import pytest

from ngm.reporting.document import Document
from ngm.reporting.forms import Files, write
from ngm.reporting.make import compose
from tests.safety.texts import TURNS, filled, rotated

#: Turns for which a PDF is made as well: it takes longer, and comes of typst text that all turns look at.
PRINTED = (0, 3)


@cache
def document(turn: int | None) -> Document:
    """Return the report of a turn; of the harmless words for None."""
    scenario = filled({}) if turn is None else rotated(turn)
    return compose(scenario, made_on="2026-01-02").document


@cache
def form(turn: int | None, ending: str) -> Files:
    return write(document(turn), ending)


def source(turn: int | None, ending: str) -> str:
    return form(turn, ending).main.decode("utf-8")


class Elements(HTMLParser):
    """The elements of a page, with the names of their attributes, and where links and images lead."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.found: set[tuple[str, tuple[str, ...]]] = set()
        self.goals: set[str] = set()
        self.scripts = 0
        self.feed(text)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.found.add((tag, tuple(sorted(name for name, _ in attrs))))
        held = dict(attrs)
        self.goals |= {(held.get(name) or "").split(":")[0][:20] for name in ("href", "src") if name in held}


#: What tables and formulas of more than usual width add to a page.
_OF_WIDTH = {"div", "colgroup", "col", "style", "width", "tabindex", "role", "class"}


@pytest.mark.parametrize("turn", range(TURNS))
def test_HTML(turn: int) -> None:
    ours, theirs = (Elements(source(number, ".html")) for number in (None, turn))
    assert {tag for tag, _ in theirs.found} <= {tag for tag, _ in ours.found} | _OF_WIDTH
    attributes = {name for _, names in theirs.found for name in names}
    assert attributes <= {name for _, names in ours.found for name in names} | _OF_WIDTH
    assert not any(name.startswith("on") for name in attributes)
    assert {goal for goal in theirs.goals if not goal.startswith("#")} <= ours.goals


_LATEX_TEXT = {"textbackslash", "textasciitilde", "textasciicircum", "textquotesingle", "textless", "textgreater"}
_LATEX_TEXT |= {"textbar", "ldots", "textquotedbl", "textasciigrave", "newline"}


@pytest.mark.parametrize("turn", range(TURNS))
def test_LaTeX(turn: int) -> None:
    def body(text: str) -> str:
        # a listing is between marks that no line of it can hold
        return re.sub(r"\\begin\{verbatim\}.*?\\end\{verbatim\}", "", text, flags=re.DOTALL)

    def commands(text: str) -> set[str]:
        # an escaped backslash begins no command
        return set(re.findall(r"\\([A-Za-z]+)", body(text).replace("\\\\", "\\newline ")))

    ours, theirs = source(None, ".tex"), source(turn, ".tex")
    assert not commands(theirs) - commands(ours) - _LATEX_TEXT
    assert body(theirs).count("\\end{document}") == theirs.count("\\begin{document}") == 1
    after = body(theirs).partition("\\begin{document}")[2]
    assert not re.search(r"(?<!\\)%(?!\n)", after), "a comment in the text"


@pytest.mark.parametrize("turn", range(TURNS))
def test_typst(turn: int) -> None:
    """The text that typst compiles, before it does: its functions are those of the harmless report."""
    import ngm.reporting.forms as forms

    def typst(number: int | None) -> str:
        text = ""

        def kept(folder: Path) -> bytes:
            nonlocal text
            text = (folder / "report.typ").read_text(encoding="utf-8")
            return b""

        with pytest.MonkeyPatch.context() as patch:
            patch.setattr(forms, "_typst", kept)
            write(document(number), ".pdf")
        return text

    def functions(text: str) -> set[str]:
        text = re.sub(r"(?ms)^(`{3,})[^`].*?^\1$", "", text)
        bare = re.sub(r'\\.|`[^`]*`|"(?:\\.|[^"\\])*"', "", text, flags=re.DOTALL)
        return set(re.findall(r"#([A-Za-z.]+)", bare)) | set(re.findall(r"(?m)^(=+) ", bare))

    assert functions(typst(turn)) <= functions(typst(None)) | {"page", "raw"}


def raw_of(text: str) -> tuple[Elements, set[str]]:
    """Return the elements of HTML that Markdown is read to hold, and where its links and images lead."""
    read = subprocess.run(
        [pypandoc.get_pandoc_path(), "--from=gfm", "--to=json"], input=text.encode(), capture_output=True, check=True
    )
    raw: list[str] = []
    goals: set[str] = set()

    def walk(node: object) -> None:
        if isinstance(node, dict):
            if node.get("t") in ("Link", "Image"):
                goals.add(node["c"][2][0])
            if node.get("t") in ("RawInline", "RawBlock"):
                raw.append(node["c"][1])
            for inner in node.values():
                walk(inner)
        elif isinstance(node, list):
            for inner in node:
                walk(inner)

    walk(json.loads(read.stdout)["blocks"])
    return Elements("".join(raw)), goals


@pytest.mark.parametrize("turn", range(TURNS))
def test_Markdown(turn: int) -> None:
    raw, goals = raw_of(source(turn, ".md"))
    assert {tag for tag, _ in raw.found} <= {"span", "figure", "img", "figcaption", "br", "div"}
    assert not any(name.startswith("on") for _, names in raw.found for name in names)
    assert all(goal.startswith("report-figures/") for goal in raw.goals)
    # an address that stands in the text may become a link to itself; what does something may not
    assert not any(goal.lower().startswith(("javascript:", "data:", "file:")) for goal in goals)


@pytest.mark.parametrize("turn", range(TURNS))
def test_Word(turn: int) -> None:
    with zipfile.ZipFile(io.BytesIO(form(turn, ".docx").main)) as archive:
        read = ElementTree.fromstring(archive.read("word/document.xml"))
        links = archive.read("word/_rels/document.xml.rels").decode()
    tags = {element.tag.rpartition("}")[2] for element in read.iter()}
    assert not tags & {"instrText", "fldSimple", "object", "altChunk", "control", "script"}
    assert "evil.example" not in links
    assert "javascript" not in links


@pytest.mark.parametrize("turn", PRINTED)
def test_PDF_is_made(turn: int) -> None:
    made = form(turn, ".pdf").main
    assert made.startswith(b"%PDF")
    for mark in (b"/JavaScript", b"/Launch", b"/URI(javascript", b"/URI (javascript"):
        assert mark not in made
