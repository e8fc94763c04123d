"""The memo as PDF (tagged, PDF/A), and drawings as pictures, by one typesetter.

Words and numbers are handed over as data; the layout is a fixed file that never holds any of them.
"""

from __future__ import annotations

import json
import re
from collections.abc import Iterable, Iterator
from dataclasses import asdict
from importlib.resources import files
from itertools import groupby
from typing import Any

import typst

from wideberth.report.blocks import LONG_WORD, Block, Drawing, Memo, Table, with_texts
from wideberth.report.fonts import drawable, families, folders

_STANDARDS = ["a-2a", "ua-1"]
_DOTS_PER_INCH = 200.0
# PDF/A wants a date, and the clock's would change the bytes
_UNDATED = (2000, 1, 1)
# widths in letters; a line of a table takes about 130
_SHORT, _WIDE = 18, 46
_ROOM_FOR_SHORT = 60


def memo_pdf(memo: Memo) -> bytes:
    """Write the memo as a tagged PDF/A; the same memo always gives the same bytes."""
    year, month, day = memo.date or _UNDATED
    content = {
        "title": drawable(memo.title),
        "footer": drawable(memo.footer),
        "date": {"year": year, "month": month, "day": day},
        "fonts": [name.lower() for name in families()],
        "blocks": list(_side_by_side(memo.blocks)),
    }
    return _compiled("memo.typ", {"memo": content}, pdf_standards=_STANDARDS)[0]


def pictures(drawings: Iterable[Drawing]) -> list[bytes]:
    """Turn drawings into PNG pictures."""
    shown = [{"svg": one.svg, "width": width_of(one)} for one in drawings]
    if not shown:
        return []
    return _compiled("pictures.typ", {"drawings": shown}, format="png", ppi=_DOTS_PER_INCH)


def width_of(drawing: Drawing) -> float:
    """Give a drawing's width in points."""
    found = re.search(r'<svg[^>]*\swidth="([0-9.]+)pt"', drawing.svg)
    assert found is not None, "our own drawings state their width in points"
    return float(found.group(1))


def _compiled(layout: str, inputs: dict[str, Any], **options: Any) -> list[bytes]:
    made = typst.compile(
        files("wideberth.report").joinpath("templates", layout).read_bytes(),
        font_paths=[str(folder) for folder in folders()],
        ignore_system_fonts=True,
        sys_inputs={name: json.dumps(value) for name, value in inputs.items()},
        **options,
    )
    return made if isinstance(made, list) else [made]


def _side_by_side(blocks: Iterable[Block]) -> Iterator[dict[str, Any]]:
    """Give the blocks as plain data, half-width drawings that follow each other in pairs."""
    for half, group in groupby(blocks, lambda b: isinstance(b, Drawing) and b.half):
        plain = [_plain(block) for block in group]
        if not half:
            yield from plain
            continue
        for i in range(0, len(plain), 2):
            yield {"kind": "Pair", "drawings": plain[i : i + 2]}


def _plain(block: Block) -> dict[str, Any]:
    shown = with_texts(block, lambda text: _breakable(drawable(text)))
    content = {"kind": type(shown).__name__, **asdict(shown)}
    if isinstance(shown, Table):
        return {**content, "titled": shown.titled, "widths": _widths(shown)}
    if isinstance(shown, Drawing):
        return {**content, "titled": shown.titled, "width": width_of(shown)}
    return content


def _widths(table: Table) -> list[int]:
    """Let short columns be as wide as their words (0); long texts share the rest of the line."""
    lengths = [
        max(len(cell) for cell in column) for column in zip(table.header, *table.rows, strict=True)
    ]
    if sum(lengths) < 100:
        return [0] * len(lengths)
    short = sum(length for length in lengths if length <= _SHORT) <= _ROOM_FOR_SHORT
    return [0 if short and length <= _SHORT else max(12, min(length, _WIDE)) for length in lengths]


def _breakable(text: str) -> str:
    """Let a very long word break, so that it stays on the page."""
    return LONG_WORD.sub("\\1\u200b", text)
