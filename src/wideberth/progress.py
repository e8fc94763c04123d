"""How a long step tells whoever waits how far it is; doors decide how that looks."""

from __future__ import annotations

from typing import Protocol


class Progress(Protocol):
    """Called with the step's name and the share done, from 0 to 1."""

    def __call__(self, step: str, share: float) -> None:
        """Take note that ``share`` of ``step`` is done."""


def silent(step: str, share: float) -> None:
    """Report to nobody."""
