"""What a memo is made of: blocks of words, numbers and drawings, whatever writes them."""

from __future__ import annotations

from dataclasses import dataclass


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


@dataclass(frozen=True, slots=True)
class Drawing:
    """A figure as SVG, with a text for those who cannot see it; ``half`` puts two side by side."""

    svg: str
    alt: str
    caption: str
    half: bool = False


@dataclass(frozen=True, slots=True)
class SignOff:
    """Lines to sign: who, and what the signature means."""

    lines: tuple[tuple[str, str], ...]


@dataclass(frozen=True, slots=True)
class PageBreak:
    """What follows starts on a new page."""


Block = Heading | Paragraph | Bullets | Table | Drawing | SignOff | PageBreak
