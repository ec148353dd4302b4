"""The five forms: one document in, the files of a form out. Nothing is fetched, and no TeX or office is needed.

The document tree is handed to pandoc (a program of its own, from its wheel), which writes HTML with MathML, Word with
native equations, LaTeX, Markdown, or typst for the PDF. Figures are converted from SVG to what each form can show.
"""

from __future__ import annotations

import re
import subprocess
import tempfile
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

from ngm.reporting.document import Document, Figure
from ngm.reporting.letters import declarations
from ngm.reporting.syntax import tree
from ngm.reporting.templates import LATEX_HEAD, TYPST, html
from ngm.reporting.word import on_pages

__all__ = ["FORMS", "Files", "write"]

#: Ending -> what it is.
FORMS: Mapping[str, str] = {
    ".html": "HTML",
    ".md": "Markdown",
    ".tex": "LaTeX",
    ".docx": "Word",
    ".pdf": "PDF",
}
#: A form takes well under a second; past this it is stuck.
SECONDS = 120

_ENDING = {".html": "svg", ".md": "svg", ".tex": "pdf", ".docx": "png", ".pdf": "svg"}


@dataclass(frozen=True, slots=True)
class Files:
    """The file of a form, and the figures that lie beside it: path below the file's folder -> bytes."""

    main: bytes
    beside: Mapping[str, bytes]


def write(document: Document, ending: str, name: str = "report") -> Files:
    """Return a document in one form.

    Parameters
    ----------
    document : Document
    ending : str
        One of `FORMS`.
    name : str
        Name of the file without its ending; figures beside it lie in ``NAME-figures/``.

    Raises
    ------
    RuntimeError
        The form could not be written: a mistake of the program, not of the input.
    """
    figures = {f"{figure.name}.{_ENDING[ending]}": _converted(figure, ending) for figure in document.figures()}
    with tempfile.TemporaryDirectory() as place:
        folder = Path(place)
        beside = f"{name}-figures" if ending in {".md", ".tex"} else "figures"
        (folder / beside).mkdir()
        for file, content in figures.items():
            (folder / beside / file).write_bytes(content)
        main = _form(document, ending, folder, beside)
    kept = {f"{beside}/{file}": content for file, content in figures.items()} if ending in {".md", ".tex"} else {}
    return Files(main, kept)


def _converted(figure: Figure, ending: str) -> bytes:
    import vl_convert

    match _ENDING[ending]:
        case "svg" if ending == ".pdf":
            # Typst has no sans of its own; with the letters of the text around it a picture stays text.
            return re.sub(r"font-family=(\"[^\"]*\"|'[^']*')", 'font-family="Libertinus Serif"', figure.svg).encode()
        case "svg":
            return figure.svg.encode()
        case "png":
            return bytes(vl_convert.svg_to_png(figure.svg, scale=2))
        case _:
            return bytes(vl_convert.svg_to_pdf(figure.svg))


def _form(document: Document, ending: str, folder: Path, beside: str) -> bytes:
    def path(figure: Figure) -> str:
        return f"{beside}/{figure.name}.{_ENDING[ending]}"

    match ending:
        case ".html":
            (folder / "template.html").write_text(html(), encoding="utf-8")
            return _pandoc(
                tree(document, "html", path),
                folder,
                "--to=html5",
                "--mathml",
                "--embed-resources",
                "--template=template.html",
                "--toc",
                "--toc-depth=2",
                "--shift-heading-level-by=1",
            )
        case ".md":
            return _pandoc(
                tree(document, "markdown", path),
                folder,
                "--to=gfm-yaml_metadata_block",
                "--shift-heading-level-by=1",
                "--wrap=none",
            )
        case ".tex":
            (folder / "head.tex").write_text(LATEX_HEAD, encoding="utf-8")
            latex = _pandoc(
                tree(document, "latex", path),
                folder,
                "--to=latex",
                "--include-in-header=head.tex",
                "--variable=geometry:margin=22mm",
                "--variable=papersize:a4",
                "--variable=colorlinks:true",
            ).decode("utf-8")
            return latex.replace(r"\begin{document}", declarations(latex) + r"\begin{document}", 1).encode("utf-8")
        case ".docx":
            return on_pages(_pandoc(tree(document, "docx", path), folder, "--to=docx", "--output=-"))
        case ".pdf":
            (folder / "template.typ").write_text(TYPST, encoding="utf-8")
            text = _pandoc(tree(document, "typst", path), folder, "--to=typst", "--template=template.typ")
            (folder / "report.typ").write_bytes(text)
            return _typst(folder)
    raise ValueError(ending)


def _pandoc(text: str, folder: Path, *options: str) -> bytes:
    import pypandoc  # type: ignore[import-untyped]

    done = subprocess.run(
        [pypandoc.get_pandoc_path(), "--from=json", "--standalone", "--fail-if-warnings", "--sandbox=false", *options],
        input=text.encode(),
        capture_output=True,
        cwd=folder,
        timeout=SECONDS,
        check=False,
    )
    if done.returncode != 0:
        raise RuntimeError(f"pandoc: {done.stderr.decode(errors='replace')[:1000]}")
    return done.stdout


def _typst(folder: Path) -> bytes:
    import typst

    fonts = typst.Fonts(include_system_fonts=False)
    source, root = str(folder / "report.typ"), str(folder)
    try:
        # PDF/UA-1: tagged, with a text for every picture and formula.
        made = typst.compile(source, root=root, font_paths=fonts, pdf_standards=["ua-1"])
    except RuntimeError:
        # A sign that no font here has keeps it from that standard, and from nothing else.
        made = typst.compile(source, root=root, font_paths=fonts)
    assert isinstance(made, bytes)
    return made
