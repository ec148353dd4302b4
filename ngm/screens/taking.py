"""Rows of buttons below a picture or a matrix: save it as SVG, PNG or CSV, copy it as CSV, LaTeX or plain text.

What is saved is what is on the screen: the picture is taken from the page by the browser itself. Copying is one press of
one button. The script is ours and fixed; the scenario's text reaches it as data only, never as HTML.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any, Literal

import streamlit as st

from ngm.results import Matrix, TextMatrix
from ngm.screens import parts
from ngm.spreadsheet import csv_rows

__all__ = ["diagram", "formula", "matrix", "picture", "table_of"]

#: A picture drawn from more rows offers no CSV here: the page has a button of its own for what is large.
MOST_ROWS = 5_000
#: A matrix with more types is copied from the command line.
MOST_TYPES = 60

_HTML = '<div class="row" role="group"></div>'
_CSS = """
.row { display: flex; flex-wrap: wrap; gap: 0.4rem; align-items: center; font-family: var(--st-font); padding: 2px; }
span { font-size: 0.875rem; color: var(--st-text-color); }
button { font: inherit; font-size: 0.875rem; padding: 0.15rem 0.6rem; cursor: pointer; color: var(--st-text-color);
  background: var(--st-background-color); border: 1px solid var(--st-border-color); border-radius: var(--st-button-radius); }
button:hover { border-color: var(--st-primary-color); }
button:focus-visible { outline: 2px solid var(--st-primary-color); outline-offset: 1px; }
"""
_JS = """
const put = async text => {
    try { await navigator.clipboard.writeText(text); return true; } catch { /* not allowed here: the old way */ }
    const area = document.createElement('textarea');
    area.value = text; document.body.append(area); area.select();
    const done = document.execCommand('copy'); area.remove();
    return done;
};
const save = (blob, name) => {
    const link = document.createElement('a');
    link.href = URL.createObjectURL(blob); link.download = name; link.click();
    setTimeout(() => URL.revokeObjectURL(link.href), 10000);
};
const drawn = host => {
    let at = host.closest('[data-testid="stElementContainer"]');
    while ((at = at?.previousElementSibling)) {
        // Icons of buttons are pictures too, but small ones.
        const wide = svg => svg.getBoundingClientRect().width;
        const found = [...at.querySelectorAll('svg')].sort((a, b) => wide(b) - wide(a))[0];
        if (found && wide(found) > 60) return found;
    }
    return null;
};
const asText = (svg, background) => {
    const box = svg.getBoundingClientRect(), copy = svg.cloneNode(true);
    copy.setAttribute('xmlns', 'http://www.w3.org/2000/svg');
    copy.setAttribute('width', box.width); copy.setAttribute('height', box.height);
    if (!copy.getAttribute('viewBox')) copy.setAttribute('viewBox', `0 0 ${box.width} ${box.height}`);
    copy.removeAttribute('style');
    const [x, y, width, height] = copy.getAttribute('viewBox').split(/[ ,]+/);
    const ground = document.createElementNS('http://www.w3.org/2000/svg', 'rect');
    for (const [name, value] of Object.entries({x, y, width, height, fill: background})) ground.setAttribute(name, value);
    copy.prepend(ground);
    return [new XMLSerializer().serializeToString(copy), box];
};
export default function({data, parentElement}) {
    const host = parentElement.host ?? parentElement, row = parentElement.querySelector('.row');
    row.replaceChildren();
    row.setAttribute('aria-label', `${data.verb} ${data.what}`);
    const head = document.createElement('span'), told = document.createElement('span');
    head.textContent = data.verb + (data.show ? ' ' + data.what : '') + ' as';
    told.setAttribute('role', 'status');
    row.append(head);
    const button = (label, action) => {
        const made = document.createElement('button');
        made.type = 'button'; made.textContent = label;
        made.setAttribute('aria-label', `${data.verb} ${data.what} as ${label}`);
        made.onclick = async () => { told.textContent = await action(); setTimeout(() => { told.textContent = ''; }, 4000); };
        row.append(made);
    };
    const background = getComputedStyle(host).getPropertyValue('--st-background-color') || '#ffffff';
    if (data.picture) {
        button('SVG', () => {
            const svg = drawn(host);
            if (!svg) return 'The picture is not there yet.';
            save(new Blob([asText(svg, background)[0]], {type: 'image/svg+xml'}), data.file + '.svg');
            return '';
        });
        button('PNG', async () => {
            const svg = drawn(host);
            if (!svg) return 'The picture is not there yet.';
            const [text, box] = asText(svg, background), image = new Image(), canvas = document.createElement('canvas');
            image.src = 'data:image/svg+xml;charset=utf-8,' + encodeURIComponent(text);
            await image.decode();
            canvas.width = 2 * box.width; canvas.height = 2 * box.height;
            canvas.getContext('2d').drawImage(image, 0, 0, canvas.width, canvas.height);
            save(await new Promise(done => canvas.toBlob(done, 'image/png')), data.file + '.png');
            return '';
        });
    }
    if (data.csv) button('CSV', () => { save(new Blob([data.csv], {type: 'text/csv'}), data.file + '.csv'); return ''; });
    for (const [label, text] of data.texts ?? []) {
        button(label, async () => await put(text) ? 'Copied.' : 'The browser does not let pages copy here.');
    }
    row.append(told);
}
"""

_row = st.components.v2.component("ngm_taking", html=_HTML, css=_CSS, js=_JS)


def picture(
    chart: Any,
    file: str,
    what: str = "the picture",
    *,
    width: Literal["stretch", "content"] = "stretch",
    rows: Sequence[Sequence[object]] | None = None,
) -> None:
    """Show a chart, and below it the ways to save it: SVG, PNG, and as CSV `rows` (heads first) or else what is drawn."""
    st.altair_chart(chart, width=width)
    if rows is None:
        drawn = _drawn(chart)
        heads = list(dict.fromkeys(key for row in drawn for key in row))
        rows = [heads, *([row.get(head, "") for head in heads] for row in drawn)] if drawn else []
    _buttons(file, what, csv=csv_rows(rows) if rows else "")


def diagram(graph: Any, file: str, rows: Sequence[Sequence[object]]) -> None:
    """Show a diagram of arrows, and below it the ways to save it; `rows`: its arrows as a table, heads first."""
    st.graphviz_chart(graph.dot, alt=graph.alt, width="content")
    _buttons(file, "the diagram", csv=csv_rows(rows))


def matrix(
    name: str, numbers: Matrix | None, types: Sequence[str], text: TextMatrix | None = None, columns: Sequence[str] = ()
) -> None:
    """Place buttons that copy a matrix: its numbers as CSV at full precision, its formulas as LaTeX and as plain text."""
    if len(types) > MOST_TYPES or (numbers is None and text is None):
        return
    heads = list(columns) or list(types)
    texts = []
    if numbers is not None:
        texts.append(("CSV", csv_rows([["", *heads], *([t, *row] for t, row in zip(types, numbers, strict=True))])))
    entries = text if text is not None else tuple(tuple(repr(value) for value in row) for row in numbers or ())
    latex = parts.latex_matrix(entries, types, columns or None)
    if latex is not None:
        # Without the distance of rows that the page sets for itself.
        body = latex[latex.index(r"\begin") :]
        texts.append(("LaTeX", f"{name} = {body}"))
    texts.append(("plain text", table_of([["", *heads], *([t, *row] for t, row in zip(types, entries, strict=True))])))
    _buttons(name, name, verb="Copy", texts=texts, show=True, is_picture=False)


def formula(name: str, text: str) -> None:
    """Place buttons that copy a formula as LaTeX and as plain text."""
    texts = [("LaTeX", parts.latex(text)), ("plain text", text)]
    _buttons(name, name, verb="Copy", texts=texts, show=True, is_picture=False)


def table_of(rows: Sequence[Sequence[object]]) -> str:
    """Return rows as columns of plain text."""
    cells = [[str(value) for value in row] for row in rows]
    widths = [max(len(row[k]) for row in cells) for k in range(len(cells[0]))]
    return "\n".join(
        "  ".join(cell.ljust(width) for cell, width in zip(row, widths, strict=True)).rstrip() for row in cells
    )


def _drawn(chart: Any) -> list[dict[str, Any]]:
    """Return the rows of the data set that most of a chart is drawn from."""
    layers = [chart, *(getattr(chart, "layer", None) or [])]
    found = [
        layer.data.values for layer in layers if isinstance(getattr(getattr(layer, "data", None), "values", None), list)
    ]
    rows: list[Any] = max(found, key=len, default=[])
    return [row for row in rows if isinstance(row, dict)] if len(rows) <= MOST_ROWS else []


def _buttons(
    file: str,
    what: str,
    *,
    verb: str = "Save",
    csv: str = "",
    texts: Sequence[tuple[str, str]] = (),
    show: bool = False,
    is_picture: bool = True,
) -> None:
    data: Mapping[str, object] = {
        "file": "".join(c if c.isalnum() or c in "-_" else "-" for c in file)[:80],
        "what": what,
        "verb": verb,
        "csv": csv,
        "texts": [list(pair) for pair in texts],
        "show": show,
        "picture": is_picture,
    }
    _row(data=data, key=f"taking.{verb}.{what}.{file}")
