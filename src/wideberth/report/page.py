"""The memo as one self-contained HTML page that asks nothing from outside."""

from __future__ import annotations

import re

from jinja2 import Environment, PackageLoader, StrictUndefined
from markupsafe import Markup

from wideberth.report.blocks import LONG_WORD, Block, Drawing, Memo


def memo_page(memo: Memo) -> bytes:
    """Write the memo as HTML in UTF-8."""
    environment = Environment(
        loader=PackageLoader("wideberth.report"),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    environment.filters["breakable"] = _breakable
    blocks = [(type(block).__name__, block, _drawing(block)) for block in memo.blocks]
    text = environment.get_template("memo.html").render(
        title=memo.title,
        blocks=blocks,
        footer=memo.footer,
        page_foot=_style_text(memo.footer),
    )
    return text.encode("utf-8")


def _drawing(block: Block) -> Markup:
    # the drawing is our own figure library's output; every text in it is drawn as outlines
    return Markup(block.svg) if isinstance(block, Drawing) else Markup("")


def _breakable(text: str) -> Markup:
    """Escape a text and let a very long word break, so that its table stays on the page."""
    return Markup("<wbr>").join(LONG_WORD.sub("\\1\0", text).split("\0"))


def _style_text(text: str) -> Markup:
    """Write a text for a style sheet, where every character that might mean something is a code."""
    return Markup(re.sub(r"[^A-Za-z0-9 ,.-]", lambda one: f"\\{ord(one.group()):06x} ", text))
