"""What changed since an earlier record, and why: statements and data first, then the answer."""

from __future__ import annotations

import hashlib
from collections.abc import Iterator
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any

from wideberth.chain.as_json import Json
from wideberth.chain.from_json import read_record, refused_record, study_of
from wideberth.chain.replay import differences

_ELSEWHERE = ("runs", "notes", "title", "context", "seed", "responses")
_MANY = 8


@dataclass(frozen=True, slots=True)
class Change:
    """One thing that is not what it was; ``part`` says whether it is a cause or the answer."""

    part: str
    what: str
    before: Any
    now: Any


def read_earlier(path: Path) -> tuple[Json, str]:
    """Read an earlier record to compare with, and give its hash.

    Raises
    ------
    InputError
        When it is no record, or its study or its answer is not whole.
    """
    record = read_record(path)
    study_of(record, path)
    try:
        changes(record, record)
    except (AttributeError, KeyError, TypeError, ValueError) as error:
        raise refused_record(f"{path.name} holds no whole answer", path) from error
    return record, hashlib.sha256(path.read_bytes()).hexdigest()


def changes(before: Json, now: Json) -> tuple[Change, ...]:
    """List what changed between two records, causes before answers; empty when nothing did."""
    return (*_causes(before, now), *_answers(before, now))


def compared_with(before: Json, digest: str, now: Json) -> Json:
    """Give the comparison as a part of a record: the hash of the earlier one, and every change."""
    return {"sha256": digest, "changes": [asdict(change) for change in changes(before, now)]}


def _causes(before: Json, now: Json) -> Iterator[Change]:
    one, other = before["study"], now["study"]
    yield from _runs(one["runs"], other["runs"])
    yield from _parts("goals and limits", _named(one["responses"]), _named(other["responses"]))
    stated = [
        {key: _named(part) for key, part in study.items() if key not in _ELSEWHERE}
        for study in (one, other)
    ]
    yield from _parts("other statements", stated[0], stated[1])
    yield from _parts("model", _models(before), _models(now))
    kept = ("version", "packages", "seed", "draws")
    made = [{key: record.get(key) for key in kept} for record in (before, now)]
    yield from _parts("how it was computed", made[0], made[1])


def _runs(one: Json, other: Json) -> Iterator[Change]:
    """Say how many runs there are, and which rows read differently."""
    if len(one["rows"]) != len(other["rows"]):
        yield Change("data", "number of runs", len(one["rows"]), len(other["rows"]))
    lines = [_lines(one), _lines(other)]
    changed = [str(row) for row in lines[0] if lines[1].get(row, lines[0][row]) != lines[0][row]]
    if changed:
        rows = ", ".join(changed[:_MANY]) + (" and more" if len(changed) > _MANY else "")
        yield Change("data", f"rows that read differently: {rows}", 0, len(changed))


def _lines(runs: Json) -> dict[int, tuple[Any, ...]]:
    parts = ("numeric_actual", "levels", "measured", "block", "kind")
    columns = [runs[part] for part in parts]
    return dict(zip(runs["rows"], zip(*columns, strict=True), strict=True))


def _models(record: Json) -> Json:
    return {
        name: {"order": model["order"], "terms": [term["term"] for term in model["coefficients"]]}
        for name, model in record["fit"].items()
    }


def _answers(before: Json, now: Json) -> Iterator[Change]:
    yield from _parts("answer", _answer(before), _answer(now))


def _answer(record: Json) -> Json:
    choice, box = record["recommend"], record["window"]
    return {
        "status": choice["status"],
        "setting": choice["setpoint"],
        "overall desirability": choice["desirability"],
        "limit that rules": choice["ruling"],
        "mean": {name: one["mean"] for name, one in choice["predictions"].items()},
        "margin": {f"{one['response']} {one['side']}": one["margin"] for one in choice["limits"]},
        "window": {
            name: {"low": low, "high": high} for name, (low, high) in box["settable"].items()
        },
    }


def _parts(part: str, one: Json, other: Json) -> Iterator[Change]:
    for found in differences(one, other, "", exact=False):
        yield Change(part, found.place, found.recorded, found.now)


def _named(part: Any) -> Any:
    """Key a list of named things by their names, so that a new one shifts no other."""
    if isinstance(part, list) and part and all(isinstance(i, dict) and "name" in i for i in part):
        return {item["name"]: {k: v for k, v in item.items() if k != "name"} for item in part}
    return part
