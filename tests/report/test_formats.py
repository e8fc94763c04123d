"""Three formats, one text: nothing lost, nothing interpreted, the same bytes each time."""

import hashlib
import io
import re
import unicodedata
import zipfile
from dataclasses import replace
from html.parser import HTMLParser

import docx
import pypdf
import pytest

from wideberth.report.blocks import Drawing, Memo, Paragraph, Table, prepared, texts_of
from wideberth.report.fonts import drawable
from wideberth.report.memo import FORMATS, memo_of, write_memo
from wideberth.report.page import memo_page
from wideberth.report.typeset import memo_pdf, pictures
from wideberth.report.word import memo_docx


class _Words(HTMLParser):
    """Collects what a page shows: no styles, no drawings."""

    def __init__(self):
        super().__init__()
        self.words, self._hidden = [], 0

    def handle_starttag(self, tag, attrs):
        self._hidden += tag in ("style", "svg", "head")

    def handle_endtag(self, tag):
        self._hidden -= tag in ("style", "svg", "head")

    def handle_data(self, data):
        if not self._hidden:
            self.words.append(data)


def _html_text(data):
    reader = _Words()
    reader.feed(data.decode("utf-8"))
    return "".join(reader.words)


def _docx_text(data):
    body = docx.Document(io.BytesIO(data)).element.body
    name = "{http://schemas.openxmlformats.org/wordprocessingml/2006/main}t"
    return "".join(one.text for one in body.iter(name))


def _pdf_text(data, footer):
    pages = pypdf.PdfReader(io.BytesIO(data)).pages
    texts = [_bare(page.extract_text()) for page in pages]
    feet = [f"{footer}{i}/{len(texts)}" for i in range(1, len(texts) + 1)]
    assert all(foot in text for foot, text in zip(feet, texts, strict=True))
    return "".join(text.replace(foot, "") for foot, text in zip(feet, texts, strict=True))


def _bare(text):
    """Drop spaces, line ends and list marks; write letters in one way."""
    return re.sub(r"[\s\u200b•‣_]+", "", unicodedata.normalize("NFKC", text))


def _missing(texts, shown):
    """Give the first text that does not come next, in reading order."""
    place = 0
    for text in texts:
        found = shown.find(_bare(text), place)
        if found < 0:
            return text
        place = found + len(_bare(text))
    return None


@pytest.fixture(scope="module", params=["small_record", "nasty_record"])
def memo(request):
    return memo_of(request.getfixturevalue(request.param))


def test_html_and_word_hold_exactly_the_words_of_the_blocks(memo):
    said = _bare("".join(texts_of(memo.blocks)))
    html = _bare(_html_text(memo_page(memo)))
    assert html == said + _bare(memo.footer)
    assert _bare(_docx_text(memo_docx(memo))) == said


def test_pdf_holds_every_word_of_the_blocks_in_order(memo):
    texts = [drawable(text) for text in texts_of(memo.blocks)]
    shown = _pdf_text(memo_pdf(memo), _bare(drawable(memo.footer)))
    assert _missing(texts, shown) is None
    assert _missing([*texts, "not said"], shown) == "not said"


def test_the_text_comparison_sees_a_changed_digit(small_record):
    memo = memo_of(small_record)
    texts = list(texts_of(memo.blocks))
    place = next(i for i, text in enumerate(texts) if re.fullmatch(r"\d+\.\d+", text))
    changed = [*texts[:place], texts[place] + "7", *texts[place + 1 :]]
    assert _missing(changed, _pdf_text(memo_pdf(memo), _bare(memo.footer))) is not None


def test_the_same_memo_gives_the_same_bytes(small_record):
    memo = memo_of(small_record)
    again = memo_of(small_record)
    for write in (memo_page, memo_pdf, memo_docx):
        assert write(memo) == write(again)


def test_pdf_is_tagged_archival_dated_by_the_study_and_carries_its_fonts(nasty_record):
    pdf = pypdf.PdfReader(io.BytesIO(memo_pdf(memo_of(nasty_record))))
    root = pdf.trailer["/Root"]
    assert root["/MarkInfo"]["/Marked"]
    assert root["/Lang"].startswith("en")
    assert "/StructTreeRoot" in root
    metadata = root["/Metadata"].get_object().get_data().decode()
    assert re.search(r"pdfaid:part>2<", metadata)
    assert re.search(r"pdfuaid:part>1<", metadata)
    assert pdf.metadata.title == "Setpoint memo: <script>alert(1)</script> #panic() {{ 1 }}"
    assert str(pdf.metadata.creation_date_raw).startswith("D:20260304")
    for page in pdf.pages:
        for font in page["/Resources"]["/Font"].values():
            for part in font.get_object()["/DescendantFonts"]:
                described = part.get_object()["/FontDescriptor"]
                assert {"/FontFile2", "/FontFile3"} & set(described)


def test_word_has_styles_header_rows_captions_and_picture_texts(small_record):
    memo = memo_of(small_record)
    document = docx.Document(io.BytesIO(memo_docx(memo)))
    styles = {paragraph.style.name for paragraph in document.paragraphs}
    assert {"Heading 1", "Heading 2", "Heading 3", "List Bullet", "Caption"} <= styles
    xml = document.element.xml
    tables = [block for block in memo.blocks if isinstance(block, Table) and block.caption]
    drawings = [block for block in memo.blocks if isinstance(block, Drawing)]
    assert xml.count("<w:tblHeader/>") == len(tables)
    assert xml.count("SEQ Table") == len(tables)
    assert xml.count("SEQ Figure") == len(drawings)
    assert [one.get("descr") for one in document.element.iter() if one.get("descr")] == [
        one.alt for one in drawings
    ]
    foot = document.sections[0].footer.paragraphs[0].text
    assert foot.startswith(memo.footer)
    package = zipfile.ZipFile(io.BytesIO(memo_docx(memo)))
    assert {entry.date_time for entry in package.infolist()} == {(1980, 1, 1, 0, 0, 0)}


def test_footers_carry_document_revision_stage_and_the_hash_of_the_record(small_record, tmp_path):
    context = replace(small_record.study.context, document="WB-9", revision="C")
    study = replace(small_record.study, context=context, stage="final")
    record = replace(small_record, study=study)
    paths = write_memo(record, tmp_path, FORMATS)
    assert [path.name for path in paths] == ["memo.html", "memo.pdf", "memo.docx", "record.json"]
    digest = hashlib.sha256((tmp_path / "record.json").read_bytes()).hexdigest()
    footer = f"WB-9, revision C, final, record {digest[:16]}"
    assert memo_of(record).footer == footer
    assert footer in (tmp_path / "memo.html").read_text(encoding="utf-8")


def test_wide_tables_are_cut_and_keep_their_first_column():
    wide = Table("many", tuple(f"h{i}" for i in range(20)), (tuple(f"c{i}" for i in range(20)),))
    parts = prepared([wide])
    assert [part.header[0] for part in parts] == ["h0"] * 3
    assert [cell for part in parts for cell in part.rows[0][1:]] == [f"c{i}" for i in range(1, 20)]
    assert [part.titled for part in parts] == [f"Table {i}. many ({i} of 3)" for i in (1, 2, 3)]


def test_control_characters_and_turned_text_reach_no_format():
    blocks = prepared([Paragraph("a\x00b\x1b[31mc\u202ed\ne")])
    assert blocks[0].text == "a�b�[31mc�d e"
    memo = Memo("t", "f", None, blocks)
    assert memo_page(memo)
    assert memo_pdf(memo)
    assert memo_docx(memo)


def test_a_character_without_a_font_is_written_as_its_code():
    assert drawable("\U0010fffd x") == "[U+10FFFD] x"
    assert drawable("Größe µ ≤ ²₃ Ω") == "Größe µ ≤ ²₃ Ω"


def test_drawings_become_pictures_of_their_own_size(small_record):
    drawings = [one for one in memo_of(small_record).blocks if isinstance(one, Drawing)]
    made = pictures(drawings)
    assert len(made) == len(drawings)
    assert all(one.startswith(b"\x89PNG") for one in made)
    assert pictures([]) == []
