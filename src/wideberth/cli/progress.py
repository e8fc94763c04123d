"""Showing how far a long step is: one line rewritten on a terminal, plain lines elsewhere."""

from __future__ import annotations

import sys
import time

import click


class ProgressLine:
    """Prints step, share done and time left on standard error."""

    def __init__(self, *, quiet: bool) -> None:
        self._quiet = quiet
        self._live = sys.stderr.isatty()
        self._started = time.monotonic()
        self._step = ""

    def __call__(self, step: str, share: float) -> None:
        """Take note that ``share`` of the job is done, now at ``step``."""
        if self._quiet:
            return
        if self._live:
            passed = time.monotonic() - self._started
            left = f", about {passed * (1 - share) / share:.0f} s left" if share > 0.1 else ""
            click.echo(f"\r\033[K{step}: {100 * share:.0f} % done{left}", nl=False, err=True)
        elif step != self._step:
            click.echo(f"{step} ({100 * share:.0f} % done)", err=True)
        self._step = step

    def close(self) -> None:
        """Clear the line."""
        if self._live and not self._quiet:
            click.echo("\r\033[K", nl=False, err=True)
