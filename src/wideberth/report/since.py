"""What changed since an earlier record: the part that a second memo owes its reader."""

from __future__ import annotations

from typing import Any

from wideberth.chain.as_json import Json
from wideberth.report.blocks import Block, Heading, Paragraph, Table


def since(compared: Json | None, tried: int | None) -> list[Block]:
    """Write what was tried before this memo, and what changed since an earlier record."""
    return [*_tried(tried), *_changed(compared)]


def _tried(tried: int | None) -> list[Block]:
    if tried is None:
        return []
    sets = "1 set" if tried == 1 else f"{tried} different sets"
    return [
        Heading(3, "What was tried"),
        Paragraph(
            f"Memos of this study have been written with {sets} of goals, limits, model orders,"
            " left-out runs, data and seed, this one included; history.jsonl in the study keeps"
            " every one. The more were tried, the less one that looks good says."
        ),
    ]


def _changed(compared: Json | None) -> list[Block]:
    if compared is None:
        return []
    lead = f"Held against the record {compared['sha256'][:16]}"
    rows = tuple(
        (one["part"], one["what"].replace(".", " "), _shown(one["before"]), _shown(one["now"]))
        for one in compared["changes"]
    )
    blocks: list[Block] = [Heading(3, "What changed since the earlier record")]
    if not rows:
        return [*blocks, Paragraph(f"{lead}, nothing changed.")]
    causes = [part for part, *_ in rows if part != "answer"]
    words = f"because of {_listed(causes)}" if causes else "with nothing else changed"
    answered = len(causes) < len(rows)
    verdict = f"the answer changed, {words}" if answered else "the answer stayed as it was"
    return [
        *blocks,
        Paragraph(f"{lead}, {verdict}."),
        Table("Changes, causes first", ("Part", "What", "Before", "Now"), rows),
    ]


def _listed(parts: list[str]) -> str:
    return ", ".join(dict.fromkeys(parts))


def _shown(value: Any) -> str:
    if value is None:
        return "none"
    if isinstance(value, float):
        return f"{value:.6g}"
    if isinstance(value, list):
        return ", ".join(_shown(item) for item in value)
    if isinstance(value, dict):
        return ", ".join(f"{key} {_shown(item)}" for key, item in value.items())
    return str(value)
