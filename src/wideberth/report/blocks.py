"""What a memo is made of: blocks of words, numbers and drawings, whatever writes them."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass, replace


@dataclass(frozen=True, slots=True)
class Heading:
    """A heading; level 1 is the memo's title, 2 a part, 3 a section."""

    level: int
    text: str


@dataclass(frozen=True, slots=True)
class Paragraph:
    """A paragraph; ``lead`` carries a verdict, ``small`` a remark."""

    text: str
    tone: str = "plain"


@dataclass(frozen=True, slots=True)
class Bullets:
    """A list of sentences under a short label."""

    label: str
    items: tuple[str, ...]
    tone: str = "plain"


@dataclass(frozen=True, slots=True)
class Table:
    """A table whose first column heads its rows."""

    caption: str
    header: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]
    number: int = 0

    @property
    def titled(self) -> str:
        """Its caption with its number; empty for a table that needs none."""
        return f"Table {self.number}. {self.caption}" if self.caption else ""


@dataclass(frozen=True, slots=True)
class Drawing:
    """A figure as SVG, with a text for those who cannot see it; ``half`` puts two side by side."""

    svg: str
    alt: str
    caption: str
    half: bool = False
    number: int = 0

    @property
    def titled(self) -> str:
        """Its caption with its number."""
        return f"Figure {self.number}. {self.caption}"


@dataclass(frozen=True, slots=True)
class SignOff:
    """Lines to sign: who, and what the signature means."""

    lines: tuple[tuple[str, str], ...]


@dataclass(frozen=True, slots=True)
class PageBreak:
    """What follows starts on a new page."""


Block = Heading | Paragraph | Bullets | Table | Drawing | SignOff | PageBreak


@dataclass(frozen=True, slots=True)
class Memo:
    """A whole memo as the writers take it.

    ``footer`` stands at the foot of every page; ``date`` is the study's own, year, month and day,
    ``None`` where it states none in that form.
    """

    title: str
    footer: str
    date: tuple[int, int, int] | None
    blocks: tuple[Block, ...]


LONG_WORD = re.compile(r"(\S{16})(?=\S)")
"""A stretch of a word after which a line may break, where the page would be left otherwise."""
_MOST_COLUMNS = 9
# nothing prints these, some formats cannot hold them, and the last ones turn the text around
_UNPRINTABLE = re.compile("[\x00-\x1f\x7f-\x9f\ud800-\udfff\ufffe\uffff\u202a-\u202e\u2066-\u2069]")


def printable(text: str) -> str:
    """Replace what no page can show, line ends by spaces and control characters by a mark."""
    return _UNPRINTABLE.sub("\ufffd", re.sub(r"[\t\r\n]+", " ", text))


def prepared(blocks: Iterable[Block]) -> tuple[Block, ...]:
    """Make blocks ready for any writer: printable texts, narrow tables, numbered captions."""
    tables = figures = 0
    ready: list[Block] = []
    for block in blocks:
        for part in _narrowed(with_texts(block, printable)):
            if isinstance(part, Table) and part.caption:
                tables += 1
                ready.append(replace(part, number=tables))
            elif isinstance(part, Drawing):
                figures += 1
                ready.append(replace(part, number=figures))
            else:
                ready.append(part)
    return tuple(ready)


def with_texts(block: Block, change: Callable[[str], str]) -> Block:
    """Give the block with every text in it changed."""
    match block:
        case Heading() | Paragraph():
            return replace(block, text=change(block.text))
        case Bullets():
            return replace(
                block, label=change(block.label), items=tuple(change(item) for item in block.items)
            )
        case Table():
            return replace(
                block,
                caption=change(block.caption),
                header=tuple(change(cell) for cell in block.header),
                rows=tuple(tuple(change(cell) for cell in row) for row in block.rows),
            )
        case Drawing():
            return replace(block, alt=change(block.alt), caption=change(block.caption))
        case SignOff():
            return replace(
                block, lines=tuple((change(who), change(what)) for who, what in block.lines)
            )
        case PageBreak():
            return block


def texts_of(blocks: Iterable[Block]) -> Iterator[str]:
    """Give every text that is printed, in reading order."""
    for block in blocks:
        match block:
            case Heading() | Paragraph():
                yield block.text
            case Bullets():
                yield block.label
                yield from block.items
            case Table():
                yield block.titled
                yield from block.header if block.caption else ()
                for row in block.rows:
                    yield from row
            case Drawing():
                yield block.titled
            case SignOff():
                for who, meaning in block.lines:
                    yield f"{who} (name, date)"
                    yield meaning
            case PageBreak():
                pass


def _narrowed(block: Block) -> Iterator[Block]:
    """Cut a table with more columns than a page takes; every piece keeps the first column."""
    if not isinstance(block, Table) or len(block.header) <= _MOST_COLUMNS:
        yield block
        return
    others = len(block.header) - 1
    n_pieces = -(-others // (_MOST_COLUMNS - 1))
    for piece in range(n_pieces):
        taken = range(1 + piece * others // n_pieces, 1 + (piece + 1) * others // n_pieces)
        yield replace(
            block,
            caption=f"{block.caption} ({piece + 1} of {n_pieces})",
            header=(block.header[0], *(block.header[i] for i in taken)),
            rows=tuple((row[0], *(row[i] for i in taken)) for row in block.rows),
        )
