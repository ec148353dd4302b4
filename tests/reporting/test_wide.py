"""Wide things: matrices on pages on their sides, tables in parts; nothing runs off the page in any form."""

from __future__ import annotations

import io
import re
import shutil
import subprocess
import zipfile
from xml.etree import ElementTree

import pytest

from ngm.reporting.document import Formula, Table
from ngm.reporting.make import compose
from ngm.reporting.narrative import SECTIONS
from ngm.reporting.width import SIDE_TABLE, TABLE, columns
from tests.reporting import examples
from tests.reporting.test_forms import W, balanced, inside, pdf_text
from tests.reporting.test_parts import named

SCENARIOS = {"ten states": examples.islands, "sixteen ages": lambda: examples.shipped("sixteen")}


@pytest.fixture(scope="module", params=SCENARIOS.values(), ids=SCENARIOS)
def made(request):
    slow = {"allocation", "sensitivity", "uncertainty", "summary"}
    return compose(request.param(), made_on="2026-01-02", sections=[key for key in SECTIONS if key not in slow])


def wide(report):
    return [
        block
        for section in report.document.sections
        for block in section.blocks
        if isinstance(block, Table | Formula) and block.wide
    ]


@pytest.mark.parametrize("head", [1, 6, 30])
@pytest.mark.parametrize("letters", [1, 4, 9, 20])
@pytest.mark.parametrize("count", [1, 2, 7, 8, 13, 40])
def test_columns_fit_and_none_is_lost(head, letters, count):
    found = columns(head, [letters] * count)
    assert [k for a, b in found.parts for k in range(a, b)] == list(range(count))
    room = SIDE_TABLE if found.wide else TABLE
    for a, b in found.parts:
        assert b == a + 1 or head + 2.6 + (b - a) * (letters + 2.6) <= room


def test_wide_things_come_last_in_their_part(made):
    assert wide(made)
    for section in made.document.sections:
        sides = [isinstance(block, Table | Formula) and block.wide for block in section.blocks]
        assert sides == sorted(sides)


def test_every_entry_of_K_is_in_the_report(made):
    found = named(made)
    for i, row in enumerate(made.companion["solve"]["K"]):
        for j, value in enumerate(row):
            assert found[f"solve.K[{i}][{j}]"] == value


def test_no_step_of_the_derivation_is_left_out():
    report = compose(examples.islands(), sections=["next_generation"])
    assert len(report.companion["solve"]["symbolic"]["abbreviations"]) > 100
    tables = [block for block in report.document.sections[0].blocks if isinstance(block, Table)]
    listed = sum(len(table.rows) for table in tables if table.heads[0] == "name")
    assert listed == len(report.companion["solve"]["symbolic"]["abbreviations"])


def test_pdf(made, tmp_path):
    from pypdf import PdfReader

    content = made.files(".pdf").main
    sizes = [tuple(map(round, page.mediabox[2:])) for page in PdfReader(io.BytesIO(content)).pages]
    assert set(sizes) == {(595, 842), (842, 595)}
    if shutil.which("pdftotext") is None:
        pytest.skip("no poppler here")
    (tmp_path / "x.pdf").write_bytes(content)
    done = subprocess.run(
        ["pdftotext", "-bbox", "x.pdf", "-"], cwd=tmp_path, capture_output=True, text=True, check=True
    )
    assert inside(done.stdout) > 1000


def test_word(made):
    with zipfile.ZipFile(io.BytesIO(made.files(".docx").main)) as archive:
        document = ElementTree.fromstring(archive.read("word/document.xml"))
    sections = list(document.iter(f"{W}sectPr"))
    turned = [s for s in sections if s.find(f"{W}pgSz").get(f"{W}orient") == "landscape"]
    # Runs of upright pages and of pages on their sides take turns, and all have page numbers.
    assert len(turned) >= 1
    assert len(sections) == 2 * len(turned) + 1
    assert all(s.find(f"{W}footerReference") is not None for s in sections)
    widths = [sum(int(c.get(f"{W}w")) for c in t.iter(f"{W}gridCol")) for t in document.iter(f"{W}tbl")]
    assert max(widths) <= 16838 - 2 * 1100 + 20


def test_latex(made):
    text = made.files(".tex", "x").main.decode()
    body = text[text.index(r"\begin{document}") :]
    assert balanced(body)
    assert body.count(r"\begin{landscape}") == body.count(r"\end{landscape}") >= 1


@pytest.mark.skipif(shutil.which("pdflatex") is None, reason="no TeX here")
def test_latex_compiles(made, tmp_path):
    files = made.files(".tex", "x")
    (tmp_path / "x.tex").write_bytes(files.main)
    (tmp_path / "x-figures").mkdir()
    for path, data in files.beside.items():
        (tmp_path / path).write_bytes(data)
    command = ["pdflatex", "-interaction=nonstopmode", "-halt-on-error", "x.tex"]
    for _ in range(2):  # widths of long tables are known at the second time
        done = subprocess.run(command, cwd=tmp_path, capture_output=True, timeout=120)
        assert done.returncode == 0, done.stdout[-2000:]
    assert all(float(size) < 30 for size in re.findall(rb"Overfull \\hbox \(([\d.]+)pt", done.stdout))
    assert "Checklist" in pdf_text((tmp_path / "x.pdf").read_bytes())


def test_html(made):
    text = made.files(".html").main.decode()
    regions = re.findall(r'<div class="wide" role="group" tabindex="0"\s+aria-label="([^"]+)"', text)
    assert len([name for name in regions if name != "A wide formula"]) == len(
        [block for block in wide(made) if isinstance(block, Table)]
    )
    assert all(regions)
