"""Reading a record back: the study it was computed from, as it stood then."""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import fields, is_dataclass
from decimal import Decimal
from pathlib import Path
from types import UnionType
from typing import Any, Literal, Union, get_args, get_origin, get_type_hints

import numpy as np

from wideberth.chain.as_json import FORMULAS, Json
from wideberth.errors import Fault, InputError
from wideberth.study.records import Formula, Study

_NEEDED = (
    "version",
    "packages",
    "seed",
    "draws",
    "sha256",
    "study",
    "compared",
    "tried",
    "printed",
)


def read_record(path: Path) -> Json:
    """Read a record as plain JSON.

    Raises
    ------
    InputError
        When there is no such file, or it is not a record that ``memo`` wrote.
    """
    try:
        content = json.loads(path.read_bytes())
    except OSError as error:
        reason = (error.strerror or "it cannot be read").lower()
        raise refused_record(f"{path.name}: {reason}", path) from error
    except ValueError as error:
        raise refused_record(f"{path.name} is not JSON ({error})", path) from error
    missing = [key for key in _NEEDED if not isinstance(content, dict) or key not in content]
    if missing:
        raise refused_record(
            f"{path.name} has no '{missing[0]}', so it is no record of a memo", path
        )
    record: Json = content
    return record


def study_of(content: Json, path: Path) -> Study:
    """Build the study that a record was computed from.

    Raises
    ------
    InputError
        When the record's study is not whole.
    """
    try:
        stated = {
            **content["study"],
            "directory": path.parent,
            "sha256": content["sha256"],
        }
        study: Study = _built(Study, stated)
    except (KeyError, TypeError, ValueError, AttributeError, ArithmeticError) as error:
        raise refused_record(f"the study in {path.name} is not whole ({error})", path) from error
    return study


def refused_record(what: str, path: Path) -> InputError:
    """Word why a file is no record to work with."""
    return InputError([Fault(what, str(path), "give a record.json that 'wideberth memo' wrote")])


def _built(kind: Any, value: Any) -> Any:
    """Build a value of an annotated kind from plain JSON, the reverse of writing it."""
    origin, inner = get_origin(kind), get_args(kind)
    if origin in (Union, UnionType):
        return _built_union(inner, value)
    if origin is np.ndarray:
        return np.array(value, dtype=get_args(inner[1])[0])
    if is_dataclass(kind):
        return _built_record(kind, value)
    if origin is tuple:
        kinds = [inner[0]] * len(value) if inner[-1] is Ellipsis else inner
        return tuple(_built(one, item) for one, item in zip(kinds, value, strict=True))
    if origin is Mapping:
        return {key: _built(inner[1], item) for key, item in value.items()}
    return _checked(kind, value)


def _checked(kind: Any, value: Any) -> Any:
    """Take a plain value only when it is of its kind."""
    words = get_args(kind) if get_origin(kind) is Literal else ()
    allowed = (float, int) if kind in (float, Decimal) else kind
    if words and value not in words:
        message = f"'{value}' is none of {', '.join(map(str, words))}"
        raise ValueError(message)
    if kind in (float, Decimal, int, str, bool) and (
        not isinstance(value, allowed) or isinstance(value, bool) is not (kind is bool)
    ):
        message = f"'{value}' is no {kind.__name__.lower()}"
        raise TypeError(message)
    return Decimal(repr(value)) if kind is Decimal else value


def _built_record(kind: Any, value: Any) -> Any:
    if kind is Formula:
        return Formula({_names(term): number for term, number in value.items()})
    hints = get_type_hints(kind)
    # a formula is written only where there is one
    odd = (set(value) ^ {field.name for field in fields(kind)}) - set(FORMULAS)
    if odd:
        message = f"'{min(odd)}' of {kind.__name__} is missing or unknown"
        raise ValueError(message)
    return kind(**{name: _built(hints[name], part) for name, part in value.items()})


def _built_union(kinds: tuple[Any, ...], value: Any) -> Any:
    """Take the first record whose fields all stand there, or the only other kind."""
    if value is None:
        return None
    others = [kind for kind in kinds if kind is not type(None)]
    records = [kind for kind in others if is_dataclass(kind)]
    if len(records) > 1:
        matching = [k for k in records if {f.name for f in fields(k)} == set(value)]
        return _built(matching[0] if matching else records[0], value)
    return _built(others[0], value) if len(others) == 1 else value


def _names(term: str) -> tuple[str, ...]:
    return () if term == "constant" else tuple(term.split("*"))
