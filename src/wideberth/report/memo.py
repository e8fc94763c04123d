"""The memo: content from a record, written as one self-contained HTML file."""

from __future__ import annotations

from pathlib import Path

from jinja2 import Environment, PackageLoader, StrictUndefined
from markupsafe import Markup

from wideberth.chain.as_json import dumps_record, record_json
from wideberth.chain.files import write_all
from wideberth.chain.record import Record
from wideberth.report.blocks import Block, Drawing
from wideberth.report.evidence import evidence
from wideberth.report.page_one import page_one


def memo_blocks(record: Record) -> tuple[Block, ...]:
    """Give the memo's content, whatever format is written."""
    return (*page_one(record), *evidence(record))


def memo_html(record: Record) -> str:
    """Write the memo as one HTML text that asks nothing from outside."""
    environment = Environment(
        loader=PackageLoader("wideberth.report"),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    template = environment.get_template("memo.html")
    blocks = [(type(block).__name__, block, _drawing(block)) for block in memo_blocks(record)]
    context = record.study.context
    footer = " ".join(part for part in (context.document, context.revision) if part)
    return template.render(
        title=f"Setpoint memo: {record.study.title}",
        blocks=blocks,
        footer=footer,
        hash=record.study.sha256.get("study", "")[:12],
    )


def write_memo(record: Record, directory: Path) -> tuple[Path, Path]:
    """Write ``memo.html`` and ``record.json`` into a folder, both or neither.

    Raises
    ------
    InputError
        When the folder cannot be written.
    """
    memo, data = directory / "memo.html", directory / "record.json"
    write_all(
        {
            memo: memo_html(record).encode("utf-8"),
            data: dumps_record(record_json(record)).encode("utf-8"),
        }
    )
    return memo, data


def _drawing(block: Block) -> Markup:
    # the drawing is our own figure library's output; every text in it is drawn as outlines
    return Markup(block.svg) if isinstance(block, Drawing) else Markup("")
