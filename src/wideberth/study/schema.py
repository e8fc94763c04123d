"""The shape of ``study.toml``: tables, keys and types, checked all at once.

What a value means against other values is checked in `study.reading`. The wording of the
validation library never reaches the person.
"""

from __future__ import annotations

from collections.abc import Mapping
from difflib import get_close_matches
from typing import Annotated, Any, Literal

from pydantic import BaseModel, ConfigDict, Field, ValidationError

from wideberth.errors import Fault
from wideberth.study.lines import KeyPath

Number = Annotated[float, Field(allow_inf_nan=False)]
Positive = Annotated[Number, Field(gt=0)]
Pair = Annotated[list[Number], Field(min_length=2, max_length=2)]
CountPair = Annotated[list[Annotated[int, Field(ge=0)]], Field(min_length=2, max_length=2)]
Text = Annotated[str, Field(min_length=1)]


class _Table(BaseModel):
    model_config = ConfigDict(strict=True, extra="forbid")


class StudyTable(_Table):
    """``[study]``."""

    title: str = ""
    runs: Text = "runs.csv"
    seed: Annotated[int, Field(ge=0)] = 1


class ContextTable(_Table):
    """``[context]``: texts for the memo."""

    product: str = ""
    equipment: str = ""
    scale_run: str = ""
    scale_intended: str = ""
    held_constant: str = ""
    document: str = ""
    revision: str = ""
    date: str = ""


class FactorTable(_Table):
    """``[factors.NAME]``."""

    unit: str | None = None
    low: Number | None = None
    high: Number | None = None
    allowed: Pair | None = None
    tolerance: Annotated[Number, Field(gt=0)] | None = None
    settable_step: Annotated[Number, Field(gt=0)] | None = None
    reading_error: Annotated[Number, Field(ge=0)] | None = None
    scale: Literal["linear", "log"] = "linear"
    levels: Annotated[list[Text], Field(min_length=2)] | None = None


class GoalTable(_Table):
    """``goal`` of a response."""

    want: Literal["more", "less", "near"]
    poor: Number | Pair | None = None
    ideal: Number | Pair | None = None
    exponent: Annotated[Number, Field(gt=0)] | Pair = 1.0
    priority: Annotated[Number, Field(gt=0)] = 1.0


class LimitTable(_Table):
    """``limit`` of a response."""

    low: Number | None = None
    high: Number | None = None
    guard: Literal["none", "mean", "batch", "share"] | None = None
    confidence: Annotated[Number, Field(gt=0.5, lt=1)] = 0.95
    share: Annotated[Number, Field(gt=0.5, lt=1)] = 0.99
    point: Literal["chosen", "fixed"] = "chosen"


class ModelTable(_Table):
    """``model`` of a response."""

    order: Literal[1, 2] | None = None
    terms: Text | Annotated[list[Text], Field(min_length=1)] = "all"
    transform: Literal["none"] = "none"


class KnownSdTable(_Table):
    """``known_sd`` of a response."""

    value: Annotated[Number, Field(gt=0)]
    df: Annotated[int, Field(ge=1)]


class ResponseTable(_Table):
    """``[responses.NAME]``."""

    unit: str
    goal: GoalTable | None = None
    limit: LimitTable | None = None
    model: ModelTable | None = None
    known_sd: KnownSdTable | None = None
    block_sd: Annotated[Number, Field(gt=0)] | None = None
    formula: dict[str, Number] | None = None


class ConstraintTable(_Table):
    """One of ``[[constraints]]``."""

    name: Text
    sum: Annotated[dict[str, Number], Field(min_length=1)]
    at_most: Number | None = None
    at_least: Number | None = None


class RadiusTable(_Table):
    """``keep = { radius = r }``."""

    radius: Annotated[Number, Field(gt=0)]


class RegionTable(_Table):
    """``[region]``."""

    keep: Literal["explored", "allowed"] | RadiusTable = "explored"


class PlanTable(_Table):
    """``[plan]``: the runs that are to be planned."""

    design: Literal["central composite", "box-behnken", "two-level", "optimal"] = (
        "central composite"
    )
    core: Literal["full", "half", "quarter", "eighth", "sixteenth"] | None = None
    axial: Literal["rotatable", "spherical", "face", "orthogonal-blocks"] | Positive = "rotatable"
    shrink: Annotated[Number, Field(gt=0, le=1)] = 1.0
    centre_runs: Annotated[int, Field(ge=0)] | CountPair | None = None
    blocks: Annotated[int, Field(ge=1)] = 1
    replicates: Annotated[int, Field(ge=1)] = 1
    runs: Annotated[int, Field(ge=1)] | None = None
    criterion: Literal["D", "I"] = "I"
    order: Literal[1, 2] = 2
    error_sd: dict[str, Positive] = Field(default_factory=dict)
    hold: list[Text] | None = None


class BlocksTable(_Table):
    """``[blocks]``."""

    future: Literal["recur", "sample"]


class MemoTable(_Table):
    """``[memo]``."""

    stage: Literal["draft", "final"] = "draft"


class LeaveOutTable(_Table):
    """One of ``[[leave_out]]``."""

    rows: Annotated[list[int], Field(min_length=1)]
    reason: Text
    responses: Annotated[list[Text], Field(min_length=1)] | None = None


class StudyFile(_Table):
    """The whole file."""

    study: StudyTable = StudyTable()
    context: ContextTable = ContextTable()
    factors: dict[str, FactorTable] = Field(default_factory=dict)
    responses: dict[str, ResponseTable] = Field(default_factory=dict)
    constraints: list[ConstraintTable] = Field(default_factory=list)
    region: RegionTable = RegionTable()
    blocks: BlocksTable | None = None
    leave_out: list[LeaveOutTable] = Field(default_factory=list)
    today: dict[str, Number | str] = Field(default_factory=dict)
    plan: PlanTable = PlanTable()
    memo: MemoTable = MemoTable()


_TABLES: dict[str, type[BaseModel]] = {
    "study": StudyTable,
    "context": ContextTable,
    "factors.*": FactorTable,
    "responses.*": ResponseTable,
    "responses.*.goal": GoalTable,
    "responses.*.limit": LimitTable,
    "responses.*.model": ModelTable,
    "responses.*.known_sd": KnownSdTable,
    "constraints.*": ConstraintTable,
    "region": RegionTable,
    "region.keep": RadiusTable,
    "blocks": BlocksTable,
    "leave_out.*": LeaveOutTable,
    "plan": PlanTable,
    "memo": MemoTable,
    "": StudyFile,
}


def parse_tables(
    data: Mapping[str, object], lines: Mapping[KeyPath, int]
) -> tuple[StudyFile | None, tuple[Fault, ...]]:
    """Check the file's shape: the tables, or every fault found with its line."""
    try:
        return StudyFile.model_validate(data), ()
    except ValidationError as error:
        faults: dict[str, Fault] = {}
        details = error.errors(include_url=False, include_context=True)
        for detail in details:
            path = _own_path(detail["loc"])
            fault = _fault(detail, path, lines)
            faults.setdefault(f"{fault.where}{path}", fault)
        return None, tuple(faults.values())


def place(path: KeyPath, lines: Mapping[KeyPath, int]) -> str:
    """Say where a key stands: file, line if known, and the key's path."""
    shown = path
    while shown and shown not in lines:
        shown = shown[:-1]
    line = f" line {lines[shown]}" if shown in lines else ""
    written = ".".join(str(part) for part in path)
    return f"study.toml{line}" + (f", {written}" if written else "")


def _own_path(location: tuple[int | str, ...]) -> KeyPath:
    """Drop what the library adds to a location for the arms of a union."""
    noise = {"float", "str", "RadiusTable", "constrained-float", "constrained-int"}
    return tuple(
        part
        for part in location
        if not (isinstance(part, str) and (part in noise or part.startswith(("literal[", "list["))))
    )


def _fault(detail: Any, path: KeyPath, lines: Mapping[KeyPath, int]) -> Fault:
    kind, value, limits = detail["type"], detail["input"], detail.get("ctx", {})
    # an item of a list is known by the list's name
    key = next((part for part in reversed(path) if isinstance(part, str)), "")
    where = place(path, lines)
    if kind == "extra_forbidden":
        known = _known_keys(path[:-1])
        near = get_close_matches(key, known, n=1, cutoff=0.6)
        mend = f"did you mean '{near[0]}'?" if near else f"known keys: {', '.join(known)}"
        return Fault(f"unknown key '{key}'", where, mend)
    if kind == "missing":
        return Fault(f"key '{key}' is missing", where, f"state '{key}'")
    shown = str(value) if not isinstance(value, str) else f"'{value}'"
    if path in _SEVERAL:
        return Fault(f"'{key}' is {shown[:60]}", where, _SEVERAL[path])
    allowed = _ALLOWED.get(kind, "see the study reference for what may stand here")
    if kind == "literal_error":
        allowed = f"use {limits.get('expected', 'one of the known words')}"
    elif kind in _BOUND_WORDS:
        key_of_bound, word = _BOUND_WORDS[kind]
        bound = limits.get(key_of_bound)
        allowed = f"give a number {word} {bound}"
    elif kind in ("too_short", "too_long"):
        count = limits.get("min_length", limits.get("max_length"))
        allowed = f"give {'at least' if kind == 'too_short' else 'at most'} {count} items"
    return Fault(f"'{key}' is {shown[:60]}", where, allowed)


_BOUND_WORDS = {
    "greater_than": ("gt", "above"),
    "greater_than_equal": ("ge", "at least"),
    "less_than": ("lt", "below"),
    "less_than_equal": ("le", "at most"),
}
# keys that take values of different kinds
_SEVERAL: dict[KeyPath, str] = {
    ("plan", "axial"): "use 'rotatable', 'spherical', 'face', 'orthogonal-blocks' or a number"
    " above 0",
    ("plan", "centre_runs"): "give a whole number, or two for the two-level blocks and the axial"
    " block",
}
_ALLOWED = {
    "float_type": "give a number without quotes",
    "int_type": "give a whole number without quotes",
    "string_type": "give a text in quotes",
    "finite_number": "give a finite number",
    "list_type": "give a list in square brackets",
    "dict_type": "give a table",
    "model_type": "give a table",
    "string_too_short": "give a text that is not empty",
}


def _known_keys(table: KeyPath) -> list[str]:
    parts = [
        "*"
        if i and str(table[0]) in ("factors", "responses", "constraints", "leave_out") and i == 1
        else str(part)
        for i, part in enumerate(table)
    ]
    model = _TABLES.get(".".join(parts))
    return sorted(model.model_fields) if model else []
