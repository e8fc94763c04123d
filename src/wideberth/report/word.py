"""The memo as a Word document: real styles, captions, header rows, texts for pictures."""

from __future__ import annotations

import datetime as dt
import io
import zipfile
from collections.abc import Iterable
from itertools import groupby
from typing import Any

from docx import Document
from docx.document import Document as WordDocument
from docx.enum.text import WD_BREAK
from docx.oxml import OxmlElement
from docx.oxml.ns import qn
from docx.shared import Emu, Mm, Pt, RGBColor
from docx.text.paragraph import Paragraph as WordParagraph

from wideberth.report.blocks import (
    Block,
    Bullets,
    Drawing,
    Heading,
    Memo,
    PageBreak,
    Paragraph,
    SignOff,
    Table,
)
from wideberth.report.typeset import pictures, width_of

_FONT = "Arial"
_INK = RGBColor(0x22, 0x27, 0x2E)
_BLUE = RGBColor(0x1F, 0x5A, 0x94)
_PAGE = (Mm(210), Mm(297))
_TEXT_WIDTH = Mm(180)
_HALF_WIDTH = Mm(89)
_IDENTITY_WIDTH = Mm(36)
_TEXT_STYLES = {"Normal": 8.5, "List Bullet": 8.5, "Caption": 7.5, "Footer": 7.0}
_HEADING_STYLES = {"Heading 1": 14.0, "Heading 2": 11.0, "Heading 3": 9.5}
_CELL_SIZE = Pt(7.5)
_UNDATED = (2000, 1, 1)
_ZIP_DATE = (1980, 1, 1, 0, 0, 0)


def memo_docx(memo: Memo) -> bytes:
    """Write the memo as a Word document; the same memo always gives the same bytes."""
    document = Document()
    _dress(document, memo)
    drawings = [block for block in memo.blocks if isinstance(block, Drawing)]
    shown = dict(zip(drawings, pictures(drawings), strict=True))
    for beside, group in groupby(memo.blocks, lambda b: isinstance(b, Drawing) and b.half):
        blocks = list(group)
        for start in range(0, len(blocks), 2 if beside else 1):
            _add(document, blocks[start : start + (2 if beside else 1)], shown)
    target = io.BytesIO()
    document.save(target)
    return _same_bytes(target.getvalue())


def _dress(document: WordDocument, memo: Memo) -> None:
    """Set page, styles, footer and properties."""
    section = document.sections[0]
    section.page_width, section.page_height = _PAGE
    section.left_margin = section.right_margin = Mm(15)
    section.top_margin = section.bottom_margin = Mm(13)
    section.header_distance = section.footer_distance = Mm(6)
    for name, size in {**_TEXT_STYLES, **_HEADING_STYLES}.items():
        style: Any = document.styles[name]
        style.font.name, style.font.size = _FONT, Pt(size)
        style.font.color.rgb = _BLUE if name == "Heading 3" else _INK
        style.font.italic = False
        fonts = style.element.get_or_add_rPr().get_or_add_rFonts()
        for theme in ("asciiTheme", "hAnsiTheme", "eastAsiaTheme", "cstheme"):
            fonts.attrib.pop(qn(f"w:{theme}"), None)
        style.paragraph_format.space_before = Pt(7 if name in _HEADING_STYLES else 0)
        style.paragraph_format.space_after = Pt(2)
        style.paragraph_format.line_spacing = 1.0
    caption: Any = document.styles["Caption"]
    caption.font.bold = True
    properties = document.core_properties
    properties.title, properties.author, properties.comments = memo.title[:255], "", ""
    properties.language = "en"
    stated = dt.datetime(*(memo.date or _UNDATED), tzinfo=dt.UTC)
    properties.created = properties.modified = stated
    properties.last_modified_by, properties.revision = "", 1
    foot = section.footer.paragraphs[0]
    foot.add_run(f"{memo.footer}\t\t")
    _add_field(foot, "PAGE", "1")
    foot.add_run(" / ")
    _add_field(foot, "NUMPAGES", "1")
    foot.paragraph_format.tab_stops.add_tab_stop(_TEXT_WIDTH)


def _add(document: WordDocument, blocks: list[Block], shown: dict[Drawing, bytes]) -> None:
    block = blocks[0]
    match block:
        case Heading():
            document.add_heading(block.text, block.level)
        case Paragraph():
            document.add_paragraph().add_run(block.text).bold = block.tone == "lead"
        case Bullets():
            if block.label:
                label = document.add_paragraph()
                label.add_run(block.label).bold = True
                label.paragraph_format.keep_with_next = True
            for item in block.items:
                document.add_paragraph(item, "List Bullet")
        case Table():
            _add_table(document, block)
        case Drawing():
            _add_drawings(document, [b for b in blocks if isinstance(b, Drawing)], shown)
        case SignOff():
            _add_signatures(document, block)
        case PageBreak():
            document.add_paragraph().add_run().add_break(WD_BREAK.PAGE)


def _add_table(document: WordDocument, block: Table) -> None:
    if block.caption:
        caption = _captioned(document, "Table", block.number, block.caption)
        caption.paragraph_format.keep_with_next = True
    lines = [block.header, *block.rows] if block.caption else list(block.rows)
    table = document.add_table(rows=len(lines), cols=len(block.header))
    table.autofit = False
    _rule(table, ("top", "bottom", "insideH") if block.caption else ("insideH",))
    widths = _widths(block)
    for column, width in zip(table.columns, widths, strict=True):
        column.width = width
    for i, line in enumerate(lines):
        row = table.rows[i]
        row_marks = row._tr.get_or_add_trPr()  # noqa: SLF001 - the library offers no other way
        row_marks.append(OxmlElement("w:cantSplit"))
        heads = bool(block.caption) and i == 0
        if heads:
            row_marks.append(OxmlElement("w:tblHeader"))
        for cell, text, width in zip(row.cells, line, widths, strict=True):
            cell.width = width
            run = cell.paragraphs[0].add_run(text)
            run.font.size, run.bold = _CELL_SIZE, heads
            cell.paragraphs[0].paragraph_format.space_after = Pt(1)
    document.add_paragraph().paragraph_format.line_spacing = Pt(4)


def _widths(block: Table) -> list[Emu]:
    """Share the line by the length of the longest text of each column, within bounds."""
    if not block.caption:
        return [Emu(_IDENTITY_WIDTH), Emu(_TEXT_WIDTH - _IDENTITY_WIDTH)]
    columns = zip(block.header, *block.rows, strict=True)
    shares = [max(9, min(40, *map(len, column))) for column in columns]
    return [Emu(_TEXT_WIDTH * share // sum(shares)) for share in shares]


def _rule(table: Any, edges: Iterable[str]) -> None:
    """Draw thin level lines only."""
    borders = OxmlElement("w:tblBorders")
    for edge in edges:
        line = OxmlElement(f"w:{edge}")
        for key, value in (("val", "single"), ("sz", "4"), ("space", "0"), ("color", "C9CED4")):
            line.set(qn(f"w:{key}"), value)
        borders.append(line)
    table._tbl.tblPr.append(borders)  # noqa: SLF001 - the library offers no other way


def _add_drawings(
    document: WordDocument, drawings: list[Drawing], shown: dict[Drawing, bytes]
) -> None:
    paragraph = document.add_paragraph()
    paragraph.paragraph_format.keep_with_next = True
    for drawing in drawings:
        widest = _HALF_WIDTH if drawing.half else _TEXT_WIDTH
        width = Emu(min(Pt(width_of(drawing)), widest))
        picture = paragraph.add_run().add_picture(io.BytesIO(shown[drawing]), width=width)
        described = picture._inline.docPr  # noqa: SLF001 - the library offers no other way
        described.set("descr", drawing.alt)
        described.set("name", f"Figure {drawing.number}")
    for drawing in drawings:
        _captioned(document, "Figure", drawing.number, drawing.caption)


def _captioned(document: WordDocument, word: str, number: int, text: str) -> WordParagraph:
    caption = document.add_paragraph(style="Caption")
    caption.add_run(f"{word} ")
    _add_field(caption, f"SEQ {word} \\* ARABIC", str(number))
    caption.add_run(f". {text}")
    return caption


def _add_field(paragraph: WordParagraph, instruction: str, shown: str) -> None:
    """Add a field that the word processor keeps up to date, with what it shows until then."""
    field = OxmlElement("w:fldSimple")
    field.set(qn("w:instr"), instruction)
    run, text = OxmlElement("w:r"), OxmlElement("w:t")
    text.text = shown
    run.append(text)
    field.append(run)
    paragraph._p.append(field)  # noqa: SLF001 - the library offers no other way


def _add_signatures(document: WordDocument, block: SignOff) -> None:
    table = document.add_table(rows=1, cols=len(block.lines))
    for cell, (who, meaning) in zip(table.rows[0].cells, block.lines, strict=True):
        cell.paragraphs[0].add_run("_" * 34).font.size = _CELL_SIZE
        signer = cell.add_paragraph().add_run(f"{who} (name, date)")
        signer.font.size, signer.bold = _CELL_SIZE, True
        cell.add_paragraph().add_run(meaning).font.size = _CELL_SIZE


def _same_bytes(package: bytes) -> bytes:
    """Pack anew without the clock's times, which the zip format would carry."""
    target = io.BytesIO()
    with (
        zipfile.ZipFile(io.BytesIO(package)) as source,
        zipfile.ZipFile(target, "w", zipfile.ZIP_DEFLATED) as packed,
    ):
        # the format wants its list of contents first
        names = sorted(source.namelist(), key=lambda name: (name != "[Content_Types].xml", name))
        for name in names:
            entry = zipfile.ZipInfo(name, _ZIP_DATE)
            entry.compress_type, entry.external_attr = zipfile.ZIP_DEFLATED, 0o600 << 16
            packed.writestr(entry, source.read(name))
    return target.getvalue()
