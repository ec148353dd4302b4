"""Each form is read back: the same numbers, nothing executed, nothing fetched, nothing unbalanced."""

from __future__ import annotations

import io
import json
import re
import shutil
import subprocess
import zipfile
from html.parser import HTMLParser
from itertools import pairwise
from xml.etree import ElementTree

import pytest

import ngm
from ngm.__main__ import main
from ngm.reporting.forms import FORMS, write
from ngm.reporting.make import compose
from ngm.reporting.numbers import lookup
from tests.reporting import examples

SCENARIOS = {
    "hostile": examples.hostile,
    "no R0": examples.without_R0,
    "vectors": lambda: examples.shipped("vector-borne"),
    "reducible": lambda: examples.shipped("two-strains"),
    "groups": lambda: examples.shipped("age-groups"),
}
W = "{http://schemas.openxmlformats.org/wordprocessingml/2006/main}"
M = "{http://schemas.openxmlformats.org/officeDocument/2006/math}"


@pytest.fixture(scope="module", params=SCENARIOS.values(), ids=SCENARIOS)
def made(request):
    return compose(request.param(), made_on="2026-01-02")


def expected(made):
    """Return what every form must hold, as `solve --json` and the other verbs print it: not the report's own list."""
    solve = made.companion["solve"]
    found = [
        solve["growth_rate"],
        *(solve["R0_bounds"] or []),
        *(v for v in (solve["R0"], solve["per_cycle"]) if v is not None),
    ]
    found += [v for row in (solve["K"] or [])[:3] for v in row[:3] if v]
    found += [t["T"] for t in made.companion["control"]["type_reproduction"][:4] if t["T"] is not None]
    return {repr(float(value)) for value in found}


def holds(text, made):
    flat = re.sub(r"\s+|\u200b", "", text).replace("\u2212", "-")
    missing = [value for value in expected(made) if value not in flat]
    assert not missing


class Page(HTMLParser):
    """What a page is made of."""

    def __init__(self, text):
        super().__init__()
        self.tags, self.numbers, self.name, self.text = [], [], None, ""
        self.feed(text)

    def handle_starttag(self, tag, attrs):
        held = dict(attrs)
        self.tags.append((tag, held))
        if tag == "span" and "data-json" in held:
            self.name = held["data-json"]

    def handle_data(self, data):
        self.text += data
        if self.name is not None:
            self.numbers.append((self.name, data))
            self.name = None


def test_html(made):
    text = made.files(".html").main.decode()
    page = Page(text)
    tree = json.loads(made.companion_text())
    assert len(page.numbers) == len(list(made.document.numbers()))
    for name, shown in page.numbers:
        assert float(shown.replace(",", "")) == pytest.approx(lookup(tree, name), rel=5e-6, abs=1e-300)
    holds(page.text, made)
    # Nothing is run or fetched: no script, no handler, and every address is data or a place on the page.
    assert not {tag for tag, _ in page.tags} & {"script", "iframe", "object", "embed", "link", "form", "base"}
    for _, held in page.tags:
        assert not [key for key in held if key.startswith("on")]
        for key in ("src", "href", "srcset", "action"):
            assert held.get(key, "#").startswith(("#", "data:")), held
    assert [h for tag, h in page.tags if tag == "meta" and (h.get("content") or "").startswith("default-src 'none';")]
    assert "@import" not in text
    # For those who listen to it: headings without a gap, words for pictures, heads for tables, a language, mathematics.
    levels = [int(tag[1]) for tag, _ in page.tags if re.fullmatch(r"h[1-6]", tag)]
    assert levels[0] == 1
    assert levels.count(1) == 1
    assert all(b <= a + 1 for a, b in pairwise(levels))
    assert all(held.get("alt") for tag, held in page.tags if tag == "img")
    assert [held["lang"] for tag, held in page.tags if tag == "html"] == ["en"]
    count = [tag for tag, _ in page.tags].count
    assert count("thead") == count("table") == count("caption")
    assert count("math") > 0


def test_markdown(made):
    files = made.files(".md", "name")
    text = files.main.decode()
    tree = json.loads(made.companion_text())
    spans = re.findall(r'<span class="number" data-json="([^"]*)">([^<]*)</span>', text)
    assert len(spans) == len(list(made.document.numbers()))
    for name, shown in spans:
        value = lookup(tree, name.replace("&quot;", '"'))
        assert float(shown.replace(",", "")) == pytest.approx(value, rel=5e-6, abs=1e-300)
    holds(text, made)
    assert text.startswith("# ")
    for path in re.findall(r'<img src="([^"]*)"', text):
        assert path in files.beside
        ElementTree.fromstring(files.beside[path])
    # Outside of the listing of the scenario itself nothing of a label is markup.
    shown = re.sub(r"(?m)^    .*$", "", text)
    assert "<script" not in re.sub(r"`[^`\n]*`", "", shown).replace("\\<script", "")
    assert not re.search(r"(?<!\\)\]\((?!#)", re.sub(r"`+[^`\n]*`+", "", shown))


def balanced(text):
    """Return whether braces and environments of LaTeX are balanced, what stands verbatim left out."""
    text = re.sub(r"(?s)\\begin\{verbatim\}.*?\\end\{verbatim\}", "", text)
    text = re.sub(r"\\\\|\\[{}%]", "", text)
    text = re.sub(r"(?m)%.*$", "", text)
    depth = 0
    for c in text:
        depth += (c == "{") - (c == "}")
        if depth < 0:
            return False
    open_ones = []
    for kind, name in re.findall(r"\\(begin|end)\{([^}]*)\}", text):
        if kind == "begin":
            open_ones.append(name)
        elif not open_ones or open_ones.pop() != name:
            return False
    return depth == 0 and not open_ones


def test_latex(made):
    files = made.files(".tex", "name")
    text = files.main.decode()
    body = text[text.index(r"\begin{document}") :]
    holds(re.sub(r"\{\}|\\textquotesingle|\\", "", body), made)
    assert balanced(body)
    said = re.sub(r"(?s)\\begin\{verbatim\}.*?\\end\{verbatim\}", "", body)
    assert not re.search(r"\\(input|include|write|openin|immediate|catcode|def|csname)\b(?!graphics)", said)
    for path in re.findall(r"\\includegraphics(?:\[[^\]]*\])?\{([^}]*)\}", body):
        assert files.beside[path].startswith(b"%PDF")


@pytest.mark.skipif(shutil.which("pdflatex") is None and shutil.which("xelatex") is None, reason="no TeX here")
def test_latex_compiles(made, tmp_path):
    files = made.files(".tex", "name")
    (tmp_path / "name.tex").write_bytes(files.main)
    for path, data in files.beside.items():
        (tmp_path / path).parent.mkdir(exist_ok=True)
        (tmp_path / path).write_bytes(data)
    engine = shutil.which("xelatex") or shutil.which("pdflatex")
    done = subprocess.run(
        [engine, "-interaction=nonstopmode", "-halt-on-error", "name.tex"],
        cwd=tmp_path,
        capture_output=True,
        timeout=120,
    )
    assert done.returncode == 0, done.stdout[-2000:]
    # Nothing stands out into the margin (22 mm) by more than 10 mm.
    wide = re.findall(rb"Overfull \\hbox \(([\d.]+)pt", done.stdout)
    assert all(float(size) < 30 for size in wide), wide


def test_word(made):
    content = made.files(".docx").main
    with zipfile.ZipFile(io.BytesIO(content)) as archive:
        for name in archive.namelist():
            if name.endswith((".xml", ".rels")):
                ElementTree.fromstring(archive.read(name))
        document = ElementTree.fromstring(archive.read("word/document.xml"))
        links = archive.read("word/_rels/document.xml.rels").decode()
        footer = archive.read("word/footer1.xml").decode()
    text = "".join(node.text or "" for node in document.iter() if node.tag in (f"{W}t", f"{M}t"))
    holds(text, made)
    # Equations are equations, tables repeat their heads, pictures have words, pages have numbers, links stay inside.
    equations = list(document.iter(f"{M}oMath"))
    assert len(equations) >= 5
    assert not [e for e in equations if not "".join(t.text or "" for t in e.iter(f"{M}t"))]
    tables = list(document.iter(f"{W}tbl"))
    assert len(tables) == len(list(document.iter(f"{W}tblHeader"))) == len(list(document.iter(f"{W}tblCaption")))
    drawn = [node for node in document.iter() if node.tag.endswith("}docPr")]
    assert len(drawn) == len(made.document.figures())
    assert all(node.get("descr") for node in drawn)
    assert "PAGE" in footer
    assert "evil.example" not in links
    assert 'w:w="11906"' in ElementTree.tostring(document).decode().replace("ns0:", "w:")


@pytest.mark.skipif(shutil.which("soffice") is None, reason="no LibreOffice here")
def test_word_opens(tmp_path):
    made = compose(examples.shipped("vector-borne"))
    (tmp_path / "x.docx").write_bytes(made.files(".docx").main)
    profile = f"-env:UserInstallation=file://{tmp_path}/profile"
    subprocess.run(
        ["soffice", profile, "--headless", "--convert-to", "pdf", "x.docx"], cwd=tmp_path, timeout=180, check=True
    )
    text = pdf_text((tmp_path / "x.pdf").read_bytes())
    assert "What control must reach" in text
    assert "¿" not in text


def pdf_text(content):
    from pypdf import PdfReader

    return "\n".join(page.extract_text() for page in PdfReader(io.BytesIO(content)).pages)


def test_pdf(made):
    from pypdf import PdfReader

    content = made.files(".pdf").main
    text = pdf_text(content)
    holds(text, made)
    reader = PdfReader(io.BytesIO(content))
    pages = len(reader.pages)
    assert f"1 / {pages}" in reader.pages[0].extract_text()
    assert reader.pages[-1].extract_text().count("Checklist") == 1
    root = reader.trailer["/Root"]
    assert root["/MarkInfo"]["/Marked"]
    assert root["/Lang"] == "en"
    # Every picture has its words and every formula its text for those who listen; rows and columns of tables have heads.
    tagged = list(elements(root["/StructTreeRoot"]["/K"]))
    pictures = [element.get("/Alt") for element in tagged if element.get("/S") == "/Figure"]
    assert pictures == [figure.alt for figure in made.document.figures()]
    formulas = [element.get("/Alt") for element in tagged if element.get("/S") == "/Formula"]
    assert formulas
    assert all(formulas)
    kinds = [element.get("/S") for element in tagged]
    assert kinds.count("/Table") == kinds.count("/THead") == kinds.count("/Caption") - len(pictures)
    assert kinds.count("/H1") == len(made.sections)
    # PDF/UA-1, as the file says of itself; a sign that no font has is the one thing that keeps a report from it.
    assert ("pdfuaid" in root["/Metadata"].get_data().decode()) or "\u202e" in made.document.title


def elements(node):
    """Yield the elements of a tagged PDF in order."""
    node = node.get_object() if hasattr(node, "get_object") else node
    if isinstance(node, list):
        for part in node:
            yield from elements(part)
    elif isinstance(node, dict):
        if "/S" in node:
            yield node
        if "/K" in node:
            yield from elements(node["/K"])


@pytest.mark.skipif(shutil.which("pdftotext") is None, reason="no poppler here")
def test_nothing_runs_off_the_page(made, tmp_path):
    (tmp_path / "x.pdf").write_bytes(made.files(".pdf").main)
    done = subprocess.run(
        ["pdftotext", "-bbox", "x.pdf", "-"], cwd=tmp_path, capture_output=True, text=True, check=True
    )
    assert inside(done.stdout) > 300


def inside(boxes):
    """Return how many words there are on pages; fail where one stands in a margin of 20 mm, header and footer aside."""
    count = 0
    for width, height, page in re.findall(r'<page width="([\d.]+)" height="([\d.]+)">(.*?)</page>', boxes, re.S):
        words = re.findall(
            r'<word xMin="([-\d.]+)" yMin="([-\d.]+)" xMax="([-\d.]+)" yMax="([-\d.]+)">(.*?)</word>', page
        )
        # A formula may reach into the margin by the width of a bracket.
        assert not [w for w in words if float(w[0]) < 50 or float(w[2]) > float(width) - 50]
        assert not [w for w in words if float(w[1]) < 20 or float(w[3]) > float(height) - 20]
        count += len(words)
    return count


def test_hostile_text_is_shown_as_it_is():
    made = compose(examples.hostile())
    html = " ".join(Page(made.files(".html").main.decode()).text.split())
    pdf = re.sub(r"\s+", "", pdf_text(made.files(".pdf").main))
    for text in examples.HOSTILE_TEXTS[:7]:
        assert text in html
    for text in ("<script>alert(1)</script>", r"\input{/etc/passwd}", '#read("/etc/passwd")', "=heading", "+#import"):
        assert text in pdf


@pytest.mark.parametrize("ending", FORMS)
def test_the_command_writes_each_form(ending, tmp_path, capsys):
    path = tmp_path / f"out{ending}"
    source = str(next((examples.ROOT / "scenarios").glob("seir*.toml")))
    assert main(["report", source, "--to", str(path), "--json", "--companion", "--set", "beta=0.3"]) == 0
    told = json.loads(capsys.readouterr().out)
    assert set(told) == {"path", "form", "sections", "warnings"}
    assert told["path"] == str(path)
    assert told["form"] == ending[1:]
    assert path.stat().st_size > 10_000
    companion = json.loads((tmp_path / "out.json").read_text())
    assert companion["solve"]["R0"] == ngm.solve(ngm.load(source).with_values(beta="0.3")).R0
    assert (tmp_path / "out-figures").is_dir() == (ending in {".md", ".tex"})


@pytest.mark.parametrize(
    ("to", "told"),
    [
        ("x.odt", "the ending must be one of .html .md .tex .docx .pdf, not '.odt'"),
        ("report", "the ending must be one of"),
        ("nowhere/at/all/x.pdf", "there is no folder 'nowhere/at/all'"),
    ],
)
def test_a_wrong_path_is_refused(to, told, capsys):
    source = str(next((examples.ROOT / "scenarios").glob("seir*.toml")))
    assert main(["report", source, "--to", to]) == 2
    found = capsys.readouterr()
    assert told in found.err
    assert found.out == ""


def test_figures_are_drawn_for_every_form():
    document = compose(examples.plain(), sections=["diagram"]).document
    assert write(document, ".tex", "a").beside["a-figures/flow-diagram.pdf"].startswith(b"%PDF")
    assert b"<svg" in write(document, ".md", "a").beside["a-figures/flow-diagram.svg"]
