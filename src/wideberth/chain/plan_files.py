"""Putting a plan on disk: the run sheet and plan.json, all or nothing, results never lost."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from pathlib import Path
from types import MappingProxyType

from wideberth.chain.as_json import Json, dumps, plan_json
from wideberth.chain.files import write_all
from wideberth.errors import Fault, InputError, refusal
from wideberth.plan.plan import offence_faults
from wideberth.plan.records import Plan
from wideberth.plan.sheet import appended_text, sheet_text
from wideberth.study.tables import split_text

PLAN_FILE = "plan.json"


def write_plan(
    plan: Plan,
    *,
    append: bool = False,
    even_so: bool = False,
    beside: Mapping[str, bytes] = MappingProxyType({}),
) -> tuple[Path, ...]:
    """Write the run sheet and plan.json into the study folder; give the files written.

    Parameters
    ----------
    beside : mapping
        Further files of the plan by name, written with them.

    Raises
    ------
    InputError
        When a run must not be made (unless ``even_so``), when the sheet changed since it was
        read, or when the folder cannot be written; nothing is touched then.
    """
    if plan.offending and not even_so:
        raise InputError(offence_faults(plan))
    folder = plan.study.directory
    sheet = folder / plan.study.runs.file
    before = _unchanged(plan, sheet)
    content = _sheet_bytes(plan, before if append else None)
    stages = [*_stages(folder / PLAN_FILE, kept=append and bool(plan.study.runs.rows))]
    stages.append(plan_json(plan))
    files = {sheet: content, folder / PLAN_FILE: dumps({"stages": stages}).encode()}
    files |= {folder / name: content for name, content in beside.items()}
    write_all(files)
    return tuple(files)


def _unchanged(plan: Plan, sheet: Path) -> bytes | None:
    """Give the sheet's bytes as they were when it was read; ``None`` when there was none."""
    now = sheet.read_bytes() if sheet.exists() else None
    read = plan.study.sha256.get(plan.study.runs.file, "")
    if (hashlib.sha256(now).hexdigest() if now is not None else "") != read:
        raise refusal("the sheet changed while it was planned", str(sheet), "plan once more")
    return now


def _sheet_bytes(plan: Plan, before: bytes | None) -> bytes:
    file = plan.study.runs.file
    kept = before if plan.study.runs.rows else None
    if file.lower().endswith(".xlsx"):
        # the libraries for workbooks are slow to load and most sheets need none
        from wideberth.plan.workbook import appended_workbook, workbook_bytes  # noqa: PLC0415
        from wideberth.study.workbook import split_workbook  # noqa: PLC0415

        if kept is None:
            return workbook_bytes(plan)
        table, faults = split_workbook(kept, file)
        if table is None:
            raise InputError(faults)
        return appended_workbook(plan, kept, table)
    if kept is None:
        return sheet_text(plan).encode()
    table, faults = split_text(kept, file)
    if table is None:
        raise InputError(faults)
    mark = kept[:3] if kept.startswith(b"\xef\xbb\xbf") else b""
    return mark + appended_text(plan, kept[len(mark) :].decode(), table).encode()


def _stages(path: Path, *, kept: bool) -> list[Json]:
    """Read the stages planned before, so that every one stays on record."""
    if not kept or not path.exists():
        return []
    try:
        stages = json.loads(path.read_text(encoding="utf-8"))["stages"]
    except (OSError, ValueError, KeyError, TypeError) as error:
        fault = Fault(f"{path.name} is not a plan's record", str(path), "move it away")
        raise InputError([fault]) from error
    return list(stages)
