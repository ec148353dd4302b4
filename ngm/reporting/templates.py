"""What surrounds the text in each form: page, letters, and how wide things are kept on the page."""

from __future__ import annotations

from base64 import b64encode
from functools import cache
from pathlib import Path

__all__ = ["LATEX_HEAD", "TYPST", "html"]

#: A subset of Noto Sans Math (SIL Open Font License, beside it): brackets and roots stretch only where a font for
#: mathematics is there, and most readers have none.
_FONT = Path(__file__).parent / "fonts" / "noto-sans-math-subset.woff2"

#: Nothing may be fetched: the policy says so to the browser, too.
_HTML = """<!DOCTYPE html>
<html lang="en">
<head>
<meta charset="utf-8">
<meta name="viewport" content="width=device-width, initial-scale=1">
<meta http-equiv="Content-Security-Policy"
 content="default-src 'none'; img-src data:; font-src data:; style-src 'unsafe-inline'">
<title>$pagetitle$</title>
<style>
:root { color-scheme: light; }
body { margin: 0; color: #1b1f27; background: #fff; font: 1rem/1.55 "Liberation Sans", Arial, Helvetica, sans-serif; }
main { max-width: 54rem; margin: 0 auto; padding: 1.5rem 1.25rem 4rem; }
h1 { font-size: 1.8rem; margin: .5rem 0; line-height: 1.25; }
h2 { font-size: 1.35rem; margin: 2.2rem 0 .6rem; padding-top: .5rem; border-top: 1px solid #c3cad4; line-height: 1.25; }
nav { background: #f3f6f9; padding: .6rem 1.2rem; border-radius: 6px; }
nav ul { columns: 2; padding-left: 1.1rem; margin: .4rem 0; }
nav p { margin: .2rem 0; font-weight: bold; }
a { color: #0b4f8a; }
table { border-collapse: collapse; min-width: min(100%, 32rem); margin: .8rem 0 1.2rem; font-size: .92rem; }
.wide { overflow-x: auto; overflow-y: hidden; }
.wide th, .wide td { overflow-wrap: normal; white-space: nowrap; }
caption { text-align: left; caption-side: top; padding: .3rem 0; color: #3c4350; }
th, td { border-bottom: 1px solid #d5dae1; padding: .28rem 1rem .28rem 0; vertical-align: top;
  text-align: left; overflow-wrap: anywhere; }
thead th { border-bottom: 2px solid #1b1f27; }
tbody th { font-weight: 600; }
code { font-family: "Liberation Mono", Consolas, monospace; font-size: .9em; overflow-wrap: anywhere; }
pre { background: #f3f6f9; padding: .8rem; white-space: pre-wrap; overflow-wrap: anywhere; font-size: .85rem; }
blockquote { margin: .8rem 0; padding: .1rem 1rem; border-left: 4px solid #b34700; background: #fdf5ee; }
figure { margin: 1rem 0; }
figure img { max-width: 100%; height: auto; }
figcaption { color: #3c4350; font-size: .92rem; }
@font-face { font-family: "Report Math"; src: url("data:font/woff2;base64,MATH_FONT") format("woff2"); }
math { font-family: "Report Math", math, "STIX Two Math", "Cambria Math", "Latin Modern Math"; }
math, mtable { math-style: normal; }
mtd { padding: .3em .5em; text-align: center !important; }
math[display="block"] { padding: .4rem 0; }
@media (max-width: 34rem) { main { padding: 1rem .6rem 3rem; } table { font-size: .78rem; }
  th, td { padding-right: .5rem; } nav ul { columns: 1; } math[display="block"] { font-size: .9rem; } }
@media print { nav { display: none; } main { max-width: none; } h2 { break-after: avoid; } tr, figure { break-inside: avoid; } }
</style>
</head>
<body>
<main>
<h1 class="title">$title$</h1>
$if(toc)$
<nav aria-label="Contents">
<p>Contents</p>
$table-of-contents$
</nav>
$endif$
$body$
</main>
</body>
</html>
"""


@cache
def html() -> str:
    """Return the template of the HTML form with the font for mathematics in it."""
    return _HTML.replace("MATH_FONT", b64encode(_FONT.read_bytes()).decode("ascii"))


LATEX_HEAD = r"""\usepackage{iftex}
\setcounter{MaxMatrixCols}{40}
\renewcommand{\arraystretch}{1.3}
\setlength{\emergencystretch}{4em}
\allowdisplaybreaks
\AtBeginDocument{\ifdefined\LTcapwidth\setlength{\LTcapwidth}{\textwidth}\fi}
\IfFileExists{float.sty}{\usepackage{float}\floatplacement{figure}{H}}{}
\IfFileExists{pdflscape.sty}{\usepackage{pdflscape}}{\usepackage{lscape}}
"""

#: Formulas that are a little too wide are made smaller; figures keep their size but never pass the margins.
TYPST = r"""#set document(title: [$title$])
#set page(paper: "a4", margin: (x: 20mm, y: 22mm), numbering: "1 / 1",
  header: context { if counter(page).get().first() > 1 { set text(size: 8.5pt, fill: luma(80)); align(right)[$title$] } })
#set text(font: ("Libertinus Serif", "New Computer Modern"), size: 10.5pt, lang: "en")
#set par(justify: false, leading: 0.62em)
#set heading(numbering: none)
#show heading: set text(size: 13pt)
#show heading: set block(above: 1.5em, below: 0.8em)
#set table(stroke: (x, y) => (bottom: if y == 0 { 0.9pt } else { 0.3pt + luma(170) }), inset: (x: 4pt, y: 4pt))
#show table.cell: set text(size: 9pt, hyphenate: true)
#show table.cell.where(y: 0): set text(weight: "bold")
#show table: set par(justify: false)
#show figure.where(kind: table): set block(breakable: true)
#show figure.where(kind: table): set figure.caption(position: top)
#show figure.caption: set align(left)
#show figure.caption: set text(size: 9pt)
#show figure.where(kind: table): it => { show figure.caption: c => block(sticky: true, c); it }
#show figure.where(kind: table): set align(left)
#show figure.where(kind: table): it => { show align: a => { set align(left); a.body }; it }
#show table: it => { show math.equation.where(block: false): e => context {
  // A line makes too little room for a fraction: what it lacks is added.
  let high = measure(math.equation(block: true, e.body)).height
  box(inset: (y: if high > 1.6em.to-absolute() { 0.36em } else { 0pt }), e) }
  it }
#show raw: set text(size: 8.5pt)
#show raw.where(block: false): it => { show regex("[^\s]{24,}"): m => m.text.clusters().join(sym.zws); it }
#show quote.where(block: true): it => block(width: 100%, inset: (left: 9pt, y: 4pt),
  stroke: (left: 2.5pt + rgb("#b34700")), it.body)
#show math.equation.where(block: true): it => layout(s => { let w = measure(it).width
  if w > s.width { scale(s.width / w * 100%, reflow: true, box(width: w, it)) } else { it } })
#show math.frac: it => math.display(it)
#let horizontalrule = line(length: 100%, stroke: 0.5pt)
#let fitted(path, alt) = layout(s => { let it = image(path, alt: alt)
  let m = measure(it)
  let f = calc.min(1, s.width / m.width, 170mm / m.height)
  image(path, alt: alt, width: m.width * f) })

#text(size: 19pt, weight: "bold")[$title$]

$body$
"""
