"""Which characters can be drawn: one font of our own, and what the machine has beside it.

The browser and the word processor choose fonts themselves; figures and PDF must carry theirs.
"""

from __future__ import annotations

from collections.abc import Iterator
from functools import cache
from pathlib import Path

from matplotlib import get_data_path
from matplotlib.font_manager import fontManager
from matplotlib.ft2font import FT2Font

FAMILY = "DejaVu Sans"
FOLDER = Path(get_data_path()) / "fonts" / "ttf"
# widespread fonts for Chinese, Japanese and Korean, in the order they are preferred
_EASTERN = (
    "Noto Sans CJK JP",
    "Noto Sans CJK SC",
    "Noto Sans JP",
    "Noto Sans SC",
    "WenQuanYi Zen Hei",
    "Droid Sans Fallback",
    "Hiragino Sans",
    "PingFang SC",
    "Yu Gothic",
    "Microsoft YaHei",
    "Malgun Gothic",
    "IPAexGothic",
)


@cache
def families() -> tuple[str, ...]:
    """Give the font families to draw with, the house's own first."""
    return (FAMILY, *_others())


def folders() -> tuple[Path, ...]:
    """Give the folders that hold those families."""
    return (FOLDER, *dict.fromkeys(path.parent for path in _others().values()))


def drawable(text: str) -> str:
    """Write a character that no font at hand holds as its code, ``[U+7C98]``."""
    if text.isascii():
        return text
    return "".join(
        one if one.isascii() or ord(one) in _known() else f"[U+{ord(one):04X}]" for one in text
    )


@cache
def _others() -> dict[str, Path]:
    at_hand = {entry.name: Path(entry.fname) for entry in fontManager.ttflist}
    return {name: at_hand[name] for name in _EASTERN if name in at_hand}


@cache
def _known() -> frozenset[int]:
    return frozenset(code for path in _paths() for code in FT2Font(str(path)).get_charmap())


def _paths() -> Iterator[Path]:
    yield FOLDER / "DejaVuSans.ttf"
    yield from _others().values()
