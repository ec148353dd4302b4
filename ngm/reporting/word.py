"""The page of the Word form: A4, margins, letters, page numbers. Pandoc writes the text; what it has no option for is here."""

from __future__ import annotations

import io
import re
import zipfile
from collections.abc import Callable

__all__ = ["SIDEWAYS", "on_pages"]

#: A4 in twentieths of a point, and the margins.
_FOOTER_HERE = '<w:footerReference w:type="default" r:id="rIdPageNumbers"/>'
_MARGINS = (
    '<w:pgMar w:top="1200" w:right="1100" w:bottom="1200" w:left="1100" w:header="600" w:footer="600" w:gutter="0"/>'
)
_PAGE = f'{_FOOTER_HERE}<w:pgSz w:w="11906" w:h="16838"/>{_MARGINS}'


def _ends(size: str) -> str:
    """Return a paragraph, nearly without height, that ends a run of pages of a size."""
    small = '<w:spacing w:before="0" w:after="0" w:line="20" w:lineRule="exact"/>'
    section = f"<w:sectPr>{_FOOTER_HERE}{size}{_MARGINS}</w:sectPr>"
    return f"<w:p><w:pPr>{small}{section}</w:pPr></w:p>"


#: What stands before and after blocks that need pages on their sides.
SIDEWAYS = (
    _ends('<w:pgSz w:w="11906" w:h="16838"/>'),
    _ends('<w:pgSz w:w="16838" w:h="11906" w:orient="landscape"/>'),
)
_TEXT_WIDTH = 11906 - 2 * 1100
_SIDE_WIDTH = 16838 - 2 * 1100
#: The width for which pandoc lays out the columns of tables.
_PANDOC_WIDTH = 7920

_FOOTER = (
    '<?xml version="1.0" encoding="UTF-8" standalone="yes"?>'
    '<w:ftr xmlns:w="http://schemas.openxmlformats.org/wordprocessingml/2006/main"><w:p><w:pPr><w:jc w:val="center"/></w:pPr>'
    '<w:r><w:fldChar w:fldCharType="begin"/></w:r><w:r><w:instrText xml:space="preserve"> PAGE </w:instrText></w:r>'
    '<w:r><w:fldChar w:fldCharType="separate"/></w:r><w:r><w:t>1</w:t></w:r><w:r><w:fldChar w:fldCharType="end"/></w:r>'
    "</w:p></w:ftr>"
)
_RELATION = (
    '<Relationship Id="rIdPageNumbers" Target="footer1.xml" '
    'Type="http://schemas.openxmlformats.org/officeDocument/2006/relationships/footer"/>'
)
_CONTENT = (
    '<Override PartName="/word/footer1.xml" '
    'ContentType="application/vnd.openxmlformats-officedocument.wordprocessingml.footer+xml"/>'
)


def on_pages(content: bytes) -> bytes:
    """Return a Word file laid out for A4 with page numbers, smaller letters in tables, and lines between their rows."""
    out = io.BytesIO()
    with zipfile.ZipFile(io.BytesIO(content)) as old, zipfile.ZipFile(out, "w", zipfile.ZIP_DEFLATED) as new:
        for item in old.infolist():
            data = old.read(item)
            change = _CHANGES.get(item.filename)
            if change is not None:
                data = change(data.decode("utf-8")).encode("utf-8")
            new.writestr(item.filename, data)
        new.writestr("word/footer1.xml", _FOOTER)
    return out.getvalue()


def _document(text: str) -> str:
    # Only the layout of the page and the widths of columns: what is said is not looked at.
    head, mark, tail = text.rpartition("<w:sectPr>")
    # What lies on its side stands between the two ends of `SIDEWAYS`.
    upright, *sideways = head.split(SIDEWAYS[0])
    parts = [_scaled(upright, _TEXT_WIDTH)]
    for run in sideways:
        wide, mark_after, rest = run.partition(SIDEWAYS[1])
        parts.append(_scaled(wide, _SIDE_WIDTH) + mark_after + _scaled(rest, _TEXT_WIDTH))
    head = SIDEWAYS[0].join(parts)
    place = tail.find("<w:footnotePr>")
    reference, size = _PAGE.split("<w:pgSz", 1)
    end = tail.find("</w:footnotePr>") + len("</w:footnotePr>") if place >= 0 else 0
    return f"{head}{mark}{reference}{tail[:end]}<w:pgSz{size}{tail[end:]}"


def _scaled(text: str, width: int) -> str:
    """Return text with the columns of its tables scaled to a width of the page."""
    return re.sub(
        r'<w:gridCol w:w="(\d+)" />',
        lambda found: f'<w:gridCol w:w="{round(int(found[1]) * width / _PANDOC_WIDTH)}" />',
        text,
    )


def _styles(text: str) -> str:
    letters = '<w:rFonts w:ascii="Liberation Sans" w:hAnsi="Liberation Sans" w:cs="Liberation Sans" />'
    text = re.sub(r"<w:rFonts w:asciiTheme[^>]*/>", letters, text)
    text = text.replace('<w:sz w:val="24" />', '<w:sz w:val="20" />', 1).replace(
        '<w:szCs w:val="24" />', '<w:szCs w:val="20" />', 1
    )
    text = text.replace('"Consolas"', '"Liberation Mono"').replace('<w:sz w:val="22" />', '<w:sz w:val="17" />')
    text = _within(text, "Heading1", lambda s: s.replace('"40"', '"28"').replace('w:before="360"', 'w:before="300"'))
    text = _within(text, "Title", lambda s: s.replace('w:val="center"', 'w:val="left"').replace('"56"', '"40"'))
    text = _within(
        text,
        "Compact",
        lambda s: s.replace("</w:pPr>", '</w:pPr><w:rPr><w:sz w:val="18" /><w:szCs w:val="18" /></w:rPr>'),
    )
    text = _within(text, "BodyText", lambda s: s.replace('"180"', '"110"'))
    lines = '<w:tblBorders><w:insideH w:val="single" w:sz="2" w:color="B0B0B0" /></w:tblBorders><w:tblCellMar>'
    return _within(text, "Table", lambda s: s.replace("<w:tblCellMar>", lines).replace('w:w="108"', 'w:w="70"'))


def _within(text: str, style: str, change: Callable[[str], str]) -> str:
    """Return the style sheet with one style changed."""
    start = text.find(f'w:styleId="{style}"')
    end = text.find("</w:style>", start)
    if start < 0:
        return text
    return text[:start] + change(text[start:end]) + text[end:]


def _relations(text: str) -> str:
    return text.replace("</Relationships>", f"{_RELATION}</Relationships>")


def _types(text: str) -> str:
    return text.replace("</Types>", f"{_CONTENT}</Types>")


_CHANGES = {
    "word/document.xml": _document,
    "word/styles.xml": _styles,
    "word/_rels/document.xml.rels": _relations,
    "[Content_Types].xml": _types,
}
