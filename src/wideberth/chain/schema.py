"""The published shape of ``record.json``, drawn from the very records that are written.

``python -m wideberth.chain.schema > docs/record.schema.json`` writes it anew after a change.
"""

from __future__ import annotations

import json
import sys
from collections.abc import Mapping
from dataclasses import fields, is_dataclass
from decimal import Decimal
from types import UnionType
from typing import Any, Literal, Union, get_args, get_origin, get_type_hints

import numpy as np

from wideberth.chain.as_json import FORMULAS, NOT_TOLD, Json
from wideberth.decide.alternatives import Alternative
from wideberth.decide.every_run import EveryRun
from wideberth.decide.frontier import Frontier
from wideberth.decide.give_ups import GiveUp
from wideberth.decide.priorities import Priorities
from wideberth.decide.prospects import Prospects
from wideberth.decide.records import Choice, FactorMap
from wideberth.fit.records import (
    Between,
    Check,
    FittedTerm,
    LackOfFit,
    LeftOutRun,
    Part,
    Pooled,
    RunDiagnosis,
)
from wideberth.operate.records import Outward, Robustness, Window
from wideberth.study.records import Finding, Study
from wideberth.surface.records import Shape
from wideberth.uncertainty.records import Uncertainty

_NUMBER_OR_NULL: Json = {"type": ["number", "null"]}
_TEXT: Json = {"type": "string"}
_ATOMS: Mapping[Any, Json] = {
    float: {"type": "number"},
    Decimal: {"type": "number"},
    int: {"type": "integer"},
    str: _TEXT,
    bool: {"type": "boolean"},
    type(None): {"type": "null"},
}
_HEAD: Json = {"command": _TEXT, "version": _TEXT, "study_sha256": {"type": ["string", "null"]}}


def record_schema() -> Json:
    """Give the JSON Schema (draft 2020-12) of a record."""
    defs: Json = {}

    def of(kind: Any) -> Json:
        return _schema(kind, defs)

    def step(kind: Any) -> Json:
        """Give a record that the writer puts a head before."""
        whole = _object_of(kind, defs)
        return _object({**_HEAD, **whole["properties"]}, whole["description"])

    def optional(kind: Any) -> Json:
        return {"anyOf": [of(kind), {"type": "null"}]}

    shape = _object_of(Shape, defs, left_out=("response",))
    without_levels = {k: v for k, v in shape["properties"].items() if k != "levels"}
    parts: Json = {
        "command": {"const": "memo"},
        "version": {**_TEXT, "description": "Of wideberth."},
        "packages": {"type": "object", "additionalProperties": _TEXT},
        "seed": {"type": "integer", "minimum": 0},
        "draws": {"type": "integer", "minimum": 1},
        "sha256": {
            "type": "object",
            "additionalProperties": {"type": "string", "pattern": "^[0-9a-f]{64}$"},
            "description": "Of each input file by name, and of all together under 'study'.",
        },
        "study": _object_of(Study, defs, left_out=("directory", "sha256")),
        "doubts": of(tuple[Finding, ...]),
        "fit": {"type": "object", "additionalProperties": _model(of)},
        "shape": {
            "type": "object",
            "additionalProperties": {
                "anyOf": [
                    _object(without_levels, shape["description"]),
                    {"type": "array", "items": _object(shape["properties"], shape["description"])},
                ]
            },
        },
        "recommend": _with(step(Choice), "with_every_run", of(EveryRun | None)),
        "uncertainty": step(Uncertainty),
        "window": step(Window),
        "robustness": step(Robustness),
        "outward": of(Outward),
        "give_ups": {
            "type": "array",
            "items": _object_of(GiveUp, defs, left_out=("scales", "units")),
        },
        "priorities": optional(Priorities),
        "frontier": optional(Frontier),
        "alternatives": of(tuple[Alternative, ...]),
        "prospects": of(Prospects),
        "maps": of(tuple[FactorMap, ...]),
        "compared": {
            "anyOf": [
                _object(
                    {"sha256": _TEXT, "changes": {"type": "array", "items": _change()}},
                    "What changed since an earlier record, which had this hash.",
                ),
                {"type": "null"},
            ]
        },
        "tried": {
            "type": ["integer", "null"],
            "description": "Different sets of goals, limits and choices that memos had so far.",
        },
        "printed": {
            "type": "array",
            "items": _TEXT,
            "description": "Every text of the memo in reading order, as it is printed.",
        },
    }
    return {
        "$schema": "https://json-schema.org/draft/2020-12/schema",
        "title": "Record of a wideberth memo",
        **_object(parts, "Every number of the memo at full precision, and what it was made from."),
        "$defs": dict(sorted(defs.items())),
    }


def _with(whole: Json, name: str, part: Json) -> Json:
    """Add a property that the writer adds to a record."""
    return _object({**whole["properties"], name: part}, whole["description"])


def _change() -> Json:
    anything: Json = {}
    properties = {"part": _TEXT, "what": _TEXT, "before": anything, "now": anything}
    return _object(properties, "One thing that is not what it was.")


def _model(of: Any) -> Json:
    properties: Json = {
        "unit": _TEXT,
        "exact": of(bool),
        "order": of(int),
        "n": of(int),
        "df_residual": of(int),
        "df_error": of(int),
        "coefficients": of(tuple[FittedTerm, ...]),
        **dict.fromkeys(("s", "r2", "r2_adjusted", "press", "r2_press"), _NUMBER_OR_NULL),
        "lack_of_fit": of(LackOfFit | None),
        "noise_free": of(bool),
        "anova": of(tuple[Part, ...]),
        "checks": of(tuple[Check, ...]),
        "runs": of(tuple[RunDiagnosis, ...]),
        "findings": of(tuple[Finding, ...]),
        "grade": _TEXT,
        "reasons": of(Mapping[str, str]),
        "left_out": of(tuple[LeftOutRun, ...]),
        "between_blocks": of(Between | None),
        "pooled": of(Pooled | None),
        "unscaled_covariance": of(np.ndarray),
    }
    return _object(properties, "The model of one response and its diagnosis.")


def _schema(kind: Any, defs: Json) -> Json:
    """Give the schema of an annotated kind; records go to the definitions by name."""
    origin, inner = get_origin(kind), get_args(kind)
    if kind in _ATOMS:
        return _ATOMS[kind]
    if origin in (Union, UnionType):
        return {"anyOf": [_schema(one, defs) for one in inner]}
    if origin is Literal:
        return {"enum": list(inner)}
    if is_dataclass(kind):
        return _reference(kind, defs)
    if kind is np.ndarray or origin is np.ndarray:
        defs["Array"] = {
            "type": "array",
            "items": {"anyOf": [_NUMBER_OR_NULL, {"$ref": "#/$defs/Array"}]},
        }
        return {"$ref": "#/$defs/Array"}
    return _collection(origin, inner, defs)


def _collection(origin: Any, inner: tuple[Any, ...], defs: Json) -> Json:
    if origin is Mapping:
        return {"type": "object", "additionalProperties": _schema(inner[1], defs)}
    if inner[-1] is Ellipsis:
        return {"type": "array", "items": _schema(inner[0], defs)}
    parts = [_schema(one, defs) for one in inner]
    return {"type": "array", "prefixItems": parts, "minItems": len(parts), "maxItems": len(parts)}


def _reference(kind: Any, defs: Json) -> Json:
    name = kind.__name__
    if name not in defs:
        defs[name] = {}
        defs[name] = _object_of(kind, defs)
    return {"$ref": f"#/$defs/{name}"}


def _object_of(kind: Any, defs: Json, left_out: tuple[str, ...] = ()) -> Json:
    hints = get_type_hints(kind)
    names = [f.name for f in fields(kind) if f.name not in (*left_out, *NOT_TOLD)]
    made = _object(
        {name: _schema(hints[name], defs) for name in names}, kind.__doc__.strip().splitlines()[0]
    )
    for name in FORMULAS:
        if name in hints:
            terms = {"type": "object", "additionalProperties": {"type": "number"}}
            made["properties"][name] = terms
    return made


def _object(properties: Json, description: str) -> Json:
    return {
        "type": "object",
        "description": description,
        "properties": properties,
        "required": list(properties),
        "additionalProperties": False,
    }


if __name__ == "__main__":
    sys.stdout.write(json.dumps(record_schema(), indent=1, ensure_ascii=False) + "\n")
