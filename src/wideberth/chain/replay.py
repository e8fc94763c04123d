"""Holding a record against the same job done anew: the same bits, the printed digits, or neither.

Two machines round the last bits differently, so a number counts as the same up to 1e-9 of its
size; the memo prints far fewer digits.
"""

from __future__ import annotations

import hashlib
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Literal

from wideberth.chain.as_json import Json

RELATIVE = 1e-9
_SMALLEST = 1e-12
_APART = ("version", "packages")
"""Parts that say where a record was made; they are reported, never counted as a difference."""


@dataclass(frozen=True, slots=True)
class Difference:
    """One value that differs: its place in the record, as recorded and as computed now."""

    place: str
    recorded: Any
    now: Any


@dataclass(frozen=True, slots=True)
class Replay:
    """What came of computing a record again.

    Attributes
    ----------
    outcome : {"same bits", "same printed digits", "differs"}
        ``same printed digits``: every printed text is the same and every number to 1e-9.
    first : Difference or None
        The first number or text that differs by more than that; for ``same printed digits`` the
        first that has other bits.
    made_elsewhere : tuple of Difference
        Versions of packages, Python and processor that are not those of the record.
    inputs : mapping
        Each input file beside the record: ``as recorded``, ``differs`` or ``not found``.
    """

    outcome: Literal["same bits", "same printed digits", "differs"]
    first: Difference | None
    made_elsewhere: tuple[Difference, ...]
    inputs: dict[str, str]


def compare(recorded: Json, now: Json, folder: Path) -> Replay:
    """Compare a record with the same computed now; ``folder`` is where its inputs should lie."""
    one, other = _counted(recorded), _counted(now)
    bits = next(differences(one, other, "", exact=True), None)
    numbers = next(differences(one, other, "", exact=False), None)
    outcome: Literal["same bits", "same printed digits", "differs"] = "differs"
    if bits is None:
        outcome = "same bits"
    elif numbers is None:
        outcome = "same printed digits"
    return Replay(
        outcome,
        numbers or bits,
        tuple(differences(_apart(recorded), _apart(now), "", exact=True)),
        _inputs(recorded["sha256"], folder),
    )


def _counted(record: Json) -> Json:
    return {key: part for key, part in record.items() if key not in _APART}


def _apart(record: Json) -> Json:
    return {key: record.get(key) for key in _APART}


def differences(one: Any, other: Any, place: str, *, exact: bool) -> Iterator[Difference]:
    """Go through two pieces of JSON in their own order; numbers to the bit, or to 1e-9."""
    if isinstance(one, dict) and isinstance(other, dict):
        for key in dict.fromkeys([*one, *other]):
            where = f"{place}.{key}" if place else str(key)
            yield from differences(one.get(key), other.get(key), where, exact=exact)
    elif isinstance(one, list) and isinstance(other, list) and len(one) == len(other):
        for i, (left, right) in enumerate(zip(one, other, strict=True)):
            yield from differences(left, right, f"{place}[{i}]", exact=exact)
    elif not _same(one, other, exact=exact):
        yield Difference(place, one, other)


def _same(one: Any, other: Any, *, exact: bool) -> bool:
    numbers = all(isinstance(v, int | float) and not isinstance(v, bool) for v in (one, other))
    if exact or not numbers:
        return type(one) is type(other) and bool(one == other)
    return bool(abs(one - other) <= RELATIVE * max(abs(one), abs(other)) + _SMALLEST)


def _inputs(digests: dict[str, str], folder: Path) -> dict[str, str]:
    found = {}
    for name, digest in digests.items():
        if name == "study":
            continue
        path = folder / Path(name).name
        if not path.is_file():
            found[name] = "not found"
        elif hashlib.sha256(path.read_bytes()).hexdigest() == digest:
            found[name] = "as recorded"
        else:
            found[name] = "differs"
    return found
