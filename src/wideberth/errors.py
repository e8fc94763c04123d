"""The one tree of errors, so that a caller can choose the level to catch.

::

    WideberthError
    ├── InputError        the study, the sheet or a call is wrong: carries every fault found
    │   └── RefusedError  the input is sound, but not for what was asked of it
    └── NumericalError    our arithmetic failed: a fault of ours, never of the person's

A question that has no answer (limits in conflict, nothing provable) is not an error: the
answer's record carries it as its ``status``.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Fault:
    """One thing that is wrong: what it is, where it stands, how to mend it."""

    what: str
    where: str
    mend: str

    def __str__(self) -> str:
        return f"{self.where}: {self.what} - {self.mend}"


class WideberthError(Exception):
    """Root of everything that wideberth raises on purpose."""


class InputError(WideberthError):
    """The input is wrong. ``faults`` lists all that was found, in reading order."""

    def __init__(self, faults: Iterable[Fault]) -> None:
        self.faults = tuple(faults)
        super().__init__("\n".join(str(fault) for fault in self.faults))


class RefusedError(InputError):
    """The input is sound but does not hold what the call needs (no goal, no limit)."""


class NumericalError(WideberthError):
    """An own computation did not reach an answer."""


def refusal(what: str, where: str, mend: str) -> RefusedError:
    """Word a single refusal in its three parts."""
    return RefusedError([Fault(what, where, mend)])
