"""The memo: one content from a record, written as HTML, PDF or Word beside ``record.json``."""

from __future__ import annotations

import datetime as dt
import hashlib
from collections.abc import Callable, Iterable, Mapping
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Literal

from wideberth.chain.as_json import Json, dumps_record, record_json
from wideberth.chain.files import write_all
from wideberth.chain.record import Record
from wideberth.report.blocks import Block, Memo, prepared, printable, texts_of
from wideberth.report.evidence import evidence
from wideberth.report.page import memo_page
from wideberth.report.page_one import page_one
from wideberth.report.since import since
from wideberth.report.typeset import memo_pdf
from wideberth.report.word import memo_docx

Format = Literal["html", "pdf", "docx"]
FORMATS: tuple[Format, ...] = ("html", "pdf", "docx")
_WRITERS: Mapping[Format, Callable[[Memo], bytes]] = {
    "html": memo_page,
    "pdf": memo_pdf,
    "docx": memo_docx,
}


@dataclass(frozen=True, slots=True)
class Aside:
    """What a memo says of its own past.

    Attributes
    ----------
    compared : mapping or None
        What `chain.changes.compared_with` found against an earlier record.
    tried : int or None
        How many different sets of goals, limits and choices memos were written with so far.
    """

    compared: Json | None = None
    tried: int | None = None


NOTHING = Aside()


def memo_of(record: Record, aside: Aside = NOTHING) -> Memo:
    """Give the memo's content, whatever format is written, with the hash of its record in it.

    ``aside`` is what the record cannot know from its study.
    """
    return _with_data(record, aside)[0]


def full_record(record: Record, aside: Aside = NOTHING) -> Json:
    """Give what ``record.json`` holds: all numbers, and the memo's words as they are printed."""
    return _full(record, aside, _memo(record, _behind(record, aside), ""))


def memo_html(record: Record) -> str:
    """Write the memo as one HTML text that asks nothing from outside."""
    return memo_page(memo_of(record)).decode("utf-8")


def write_memo(
    record: Record,
    directory: Path,
    formats: Iterable[Format] = ("html",),
    *,
    aside: Aside = NOTHING,
    beside: Mapping[Path, bytes] | None = None,
) -> tuple[Path, ...]:
    """Write the memo in the formats asked for and ``record.json`` into a folder, all or none.

    ``beside`` are other files to write in the same step.

    Raises
    ------
    InputError
        When the folder cannot be written.
    """
    memo, data = _with_data(record, aside)
    wanted = set(formats)
    files = {
        directory / f"memo.{name}": write(memo)
        for name, write in _WRITERS.items()
        if name in wanted
    }
    files[directory / "record.json"] = data
    write_all({**files, **(beside or {})})
    return tuple(files)


def _with_data(record: Record, aside: Aside) -> tuple[Memo, bytes]:
    """Give the memo and the bytes of ``record.json``, whose hash the memo carries."""
    behind = _behind(record, aside)
    data = dumps_record(_full(record, aside, _memo(record, behind, ""))).encode("utf-8")
    return _memo(record, behind, hashlib.sha256(data).hexdigest()), data


def _behind(record: Record, aside: Aside) -> tuple[Block, ...]:
    return (*evidence(record), *since(aside.compared, aside.tried))


def _full(record: Record, aside: Aside, memo: Memo) -> Json:
    printed = list(texts_of(memo.blocks))
    return {**record_json(record), **asdict(aside), "printed": printed}


def _memo(record: Record, behind: Iterable[Block], digest: str) -> Memo:
    context = record.study.context
    revision = f"revision {context.revision}" if context.revision else "no revision"
    parts = (context.document or "no document number", revision, record.study.stage)
    footer = ", ".join((*parts, *((f"record {digest[:16]}",) if digest else ())))
    return Memo(
        title=printable(f"Setpoint memo: {record.study.title}"),
        footer=printable(footer),
        date=_date(context.date),
        blocks=prepared((*page_one(record, digest), *behind)),
    )


def _date(text: str) -> tuple[int, int, int] | None:
    try:
        stated = dt.date.fromisoformat(text)
    except ValueError:
        return None
    return stated.year, stated.month, stated.day
