"""Reading a study folder: ``study.toml`` and the run sheet, with all faults at once."""

from __future__ import annotations

import hashlib
import tomllib
from pathlib import Path

from wideberth.errors import Fault, InputError
from wideberth.study.lines import key_lines
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
    folder = Path(directory)
    raw = _read_bytes(folder / STUDY_FILE, "start a study there first")
    text = _decode(raw)
    try:
        data = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise InputError(
            [Fault(f"not valid TOML: {error}", STUDY_FILE, "mend the line that is named")]
        ) from error
    lines = key_lines(text)
    tables, faults = parse_tables(data, lines)
    if tables is None:
        raise InputError(faults)
    statement = Statement(tables, lines)
    found = list(statement.faults())
    if found:
        # the sheet can still be read against the names when those are sound
        raise InputError([*found, *_sheet_faults(folder, statement)])
    factors, responses = statement.factors(), statement.responses()
    left_out = statement.left_out()
    sheet = read_sheet(folder, tables.study.runs, factors, responses, left_out)
    late = [*sheet.faults, *statement.block_faults(sheet)]
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
        runs=sheet.runs,
        sha256=hashes,
        notes=sheet.notes,
        left_out=left_out,
        every_run=sheet.every_run,
        assays=sheet.assays,
    )


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


def _sheet_faults(folder: Path, statement: Statement) -> tuple[Fault, ...]:
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
    return read_sheet(folder, tables.study.runs, statement.factors(), statement.responses()).faults
