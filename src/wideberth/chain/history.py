"""The history of a study: every set of goals, limits and choices that a memo was written with.

Whoever tries ten sets of goals and shows one has chosen; the memo says how many there were. The
file is a line of JSON an entry; each carries its own hash and that of the line before, so that a
line that was changed, moved or taken out shows. Lines taken off the end do not show in the file;
every record keeps the number that stood there when it was made.
"""

from __future__ import annotations

import hashlib
import json
from pathlib import Path
from typing import Any

from wideberth.chain.as_json import Json, study_json
from wideberth.errors import Fault, InputError
from wideberth.study.records import Study

FILE = "history.jsonl"
_NOT_FITTED = ("failed", "confirm")


def tried_with(study: Study, seed: int, before: bytes) -> tuple[int, bytes]:
    """Count the different sets tried so far, this one included, and give the file as it is then.

    Parameters
    ----------
    study : Study
    seed : int
    before : bytes
        The file as it stands, empty when there is none. An unchanged rerun adds nothing to it.

    Raises
    ------
    InputError
        When a line was changed, moved or taken out.
    """
    lines = before.splitlines(keepends=True)
    entries = [_read(lines, i) for i in range(len(lines))]
    now = _stated(study, seed)
    known = [entry["stated"] for entry in entries]
    different = len({_text(stated) for stated in [*known, now]})
    if known and known[-1] == now:
        return different, before
    previous = hashlib.sha256(lines[-1]).hexdigest() if lines else ""
    line = _text(_signed({"previous": previous, "stated": now})) + "\n"
    return different, before + line.encode("utf-8")


def read_history(folder: Path) -> bytes:
    """Read the file of a study folder; nothing when there is none yet."""
    try:
        return (folder / FILE).read_bytes()
    except FileNotFoundError:
        return b""
    except OSError as error:
        reason = (error.strerror or "it cannot be read").lower()
        raise InputError([Fault(f"{FILE}: {reason}", str(folder), "mend the file")]) from error


def _read(lines: list[bytes], i: int) -> Json:
    previous = hashlib.sha256(lines[i - 1]).hexdigest() if i else ""
    try:
        entry = json.loads(lines[i])
        bare = {key: entry[key] for key in ("previous", "stated")}
        whole = bare["previous"] == previous and entry == _signed(bare)
    except (ValueError, KeyError, TypeError):
        whole = False
    if not whole or not lines[i].endswith(b"\n"):
        raise InputError(
            [
                Fault(
                    "it does not follow from the line before: a line was changed or taken out",
                    f"{FILE} line {i + 1}",
                    f"put the true {FILE} back, or move it away to begin a new one",
                )
            ]
        )
    result: Json = entry
    return result


def _stated(study: Study, seed: int) -> Json:
    plain = study_json(study)
    kinds, measured = plain["runs"]["kind"], plain["runs"]["measured"]
    rows = plain["runs"]["rows"]
    return {
        "goals and limits": plain["responses"],
        "region": plain["region"],
        "constraints": plain["constraints"],
        "left out": [row for row, kind in zip(rows, kinds, strict=True) if kind in _NOT_FITTED],
        "empty cells": sum(value is None for values in measured for value in values),
        "seed": seed,
        "data": study.sha256.get(study.runs.file, ""),
    }


def _signed(entry: Json) -> Json:
    return {**entry, "sha256": hashlib.sha256(_text(entry).encode("utf-8")).hexdigest()}


def _text(content: Any) -> str:
    return json.dumps(content, ensure_ascii=False, sort_keys=True, allow_nan=False)
