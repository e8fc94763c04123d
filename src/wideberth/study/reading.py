"""Reading a study folder: ``study.toml`` and the run sheet, with all faults at once."""

from __future__ import annotations

import hashlib
import tomllib
from collections.abc import Mapping
from pathlib import Path
from types import MappingProxyType
from typing import Any

from wideberth.errors import Fault, InputError
from wideberth.study.lines import key_lines
from wideberth.study.plan_statement import goes_with, plan_choice
from wideberth.study.records import Constraint, Context, RegionChoice, Study
from wideberth.study.schema import RadiusTable, parse_tables
from wideberth.study.sheet import read_sheet
from wideberth.study.statement import STUDY_FILE, Statement


def read_study(directory: Path | str) -> Study:
    """Read and check a study folder.

    Raises
    ------
    InputError
        Carrying every fault of the file and the sheet: what, where, how to mend.
    """
    return _read(Path(directory), {}, draft=False)


def read_draft(
    directory: Path | str, overrides: Mapping[str, object] = MappingProxyType({})
) -> Study:
    """Read a study whose runs are still to be planned: the sheet may be missing or empty.

    Parameters
    ----------
    overrides : mapping
        Keys of ``[plan]`` and their values, instead of the stated ones. With another design,
        stated keys that it does not take are dropped.

    Raises
    ------
    InputError
        Carrying every fault of the file, the sheet and the overrides.
    """
    return _read(Path(directory), overrides, draft=True)


def _read(folder: Path, overrides: Mapping[str, object], *, draft: bool) -> Study:
    raw = _read_bytes(folder / STUDY_FILE, "start a study there first")
    text = _decode(raw)
    try:
        data = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise InputError(
            [Fault(f"not valid TOML: {error}", STUDY_FILE, "mend the line that is named")]
        ) from error
    lines = key_lines(text)
    _override(data, overrides)
    tables, faults = parse_tables(data, lines)
    if tables is None:
        raise InputError(faults)
    statement = Statement(tables, lines)
    found = list(statement.faults())
    if found:
        # the sheet can still be read against the names when those are sound
        raise InputError([*found, *_sheet_faults(folder, statement, draft=draft)])
    factors, responses = statement.factors(), statement.responses()
    left_out = statement.left_out()
    sheet = read_sheet(folder, tables.study.runs, factors, responses, left_out, draft=draft)
    late = [*sheet.faults, *(() if draft else statement.block_faults(sheet))]
    if draft and sheet.faults:
        what = "the sheet that is there does not fit the study"
        late.append(Fault(what, tables.study.runs, "mend it, or move it away to plan a new one"))
    if late or sheet.runs is None:
        raise InputError(late)
    hashes = {STUDY_FILE: hashlib.sha256(raw).hexdigest(), sheet.runs.file: sheet.sha256}
    hashes["study"] = hashlib.sha256("".join(hashes.values()).encode()).hexdigest()
    region = tables.region.keep
    radius = region.radius if isinstance(region, RadiusTable) else None
    return Study(
        directory=folder,
        title=tables.study.title or folder.resolve().name,
        seed=tables.study.seed,
        context=Context(**tables.context.model_dump()),
        factors=factors,
        responses=responses,
        constraints=tuple(
            Constraint(c.name, dict(c.sum), c.at_most, c.at_least) for c in tables.constraints
        ),
        region=RegionChoice("radius", radius)
        if isinstance(region, RadiusTable)
        else RegionChoice(region),
        future_blocks=tables.blocks.future if tables.blocks and sheet.runs.blocks else None,
        today=dict(tables.today),
        plan=plan_choice(tables.plan),
        runs=sheet.runs,
        sha256=hashes,
        stage=tables.memo.stage,
        notes=sheet.notes,
        left_out=left_out,
        every_run=sheet.every_run,
        assays=sheet.assays,
    )


def _override(data: dict[str, Any], overrides: Mapping[str, object]) -> None:
    """Put the overrides in place of what ``[plan]`` states, checked on their own first."""
    if not overrides:
        return
    _, faults = parse_tables({"plan": dict(overrides)}, {})
    if faults:
        said = "study.toml, plan."
        raise InputError(
            [
                Fault(f.what, f"--{f.where.removeprefix(said).replace('_', '-')}", f.mend)
                for f in faults
            ]
        )
    stated = data.get("plan", {})
    if not isinstance(stated, dict):
        return
    design = overrides.get("design")
    kept = {
        key: value for key, value in stated.items() if design is None or goes_with(key, str(design))
    }
    if design not in (None, "central composite") and isinstance(kept.get("centre_runs"), list):
        del kept["centre_runs"]
    data["plan"] = kept | dict(overrides)


def _read_bytes(path: Path, mend: str) -> bytes:
    try:
        return path.read_bytes()
    except OSError as error:
        reason = error.strerror or "it cannot be read"
        raise InputError(
            [Fault(f"{path.name}: {reason.lower()}", str(path.parent), mend)]
        ) from error


def _decode(raw: bytes) -> str:
    try:
        return raw.decode("utf-8-sig").replace("\r\n", "\n")
    except UnicodeDecodeError as error:
        line = raw[: error.start].count(b"\n") + 1
        raise InputError(
            [Fault("not written in UTF-8", f"{STUDY_FILE} line {line}", "save the file as UTF-8")]
        ) from error


def _sheet_faults(folder: Path, statement: Statement, *, draft: bool) -> tuple[Fault, ...]:
    """Read the sheet as well when factors and responses can be built at all."""
    tables = statement.tables
    sound = (
        tables.factors
        and tables.responses
        and all(
            table.levels is not None or (table.low is not None and table.high is not None)
            for table in tables.factors.values()
        )
    )
    if not sound:
        return ()
    factors, responses = statement.factors(), statement.responses()
    return read_sheet(folder, tables.study.runs, factors, responses, draft=draft).faults
