"""Reading the run sheet: a table of text with one row a run, checked cell by cell."""

from __future__ import annotations

import csv
import hashlib
import io
import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field, replace
from pathlib import Path

import numpy as np

from wideberth.errors import Fault
from wideberth.study.gathering import gather
from wideberth.study.naming import nearest
from wideberth.study.records import (
    Assays,
    CategoricalFactor,
    Factor,
    Finding,
    FloatArray,
    Formula,
    IntArray,
    LeftOut,
    NumericFactor,
    Response,
    Runs,
)

KINDS = ("factorial", "axial", "centre", "confirm", "failed")
_HEADER = re.compile(r"(?P<name>.*?)\s*(?:\[(?P<unit>[^\]]*)\])?\s*")
_OWN_COLUMNS = ("run", "block", "kind", "note", "weight", "sample")


@dataclass(frozen=True, slots=True, eq=False)
class SheetContent:
    """The runs, or the faults that kept them from being read, and what is worth saying."""

    runs: Runs | None
    faults: tuple[Fault, ...]
    notes: tuple[Finding, ...] = ()
    sha256: str = ""
    every_run: Runs | None = None
    assays: Mapping[str, Assays] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class _Table:
    """Header and rows as text; ``rows`` holds the row of the file and its cells."""

    file: str
    header: tuple[str, ...]
    rows: tuple[tuple[int, tuple[str, ...]], ...]
    semicolons: bool


def read_sheet(
    folder: Path,
    file: str,
    factors: tuple[Factor, ...],
    responses: tuple[Response, ...],
    left_out: tuple[LeftOut, ...] = (),
) -> SheetContent:
    """Read the run sheet of a study folder against its factors and responses."""
    path = folder / file
    if not path.resolve().is_relative_to(folder.resolve()):
        fault = Fault(
            f"{file} lies outside the study folder", "study.toml, study.runs", "move it in"
        )
        return SheetContent(None, (fault,))
    if path.suffix.lower() != ".csv":
        fault = Fault(f"{file} is not a .csv file", "study.toml, study.runs", "save it as .csv")
        return SheetContent(None, (fault,))
    try:
        raw = path.read_bytes()
    except OSError as error:
        reason = (error.strerror or "it cannot be read").lower()
        fault = Fault(f"{file}: {reason}", str(folder), "put the run sheet there")
        return SheetContent(None, (fault,))
    table, faults = _split(raw, file)
    if table is None:
        return SheetContent(None, faults)
    content = _interpret(table, factors, responses, left_out)
    return replace(content, sha256=hashlib.sha256(raw).hexdigest())


def _split(raw: bytes, file: str) -> tuple[_Table | None, tuple[Fault, ...]]:
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = raw[: error.start].count(b"\n") + 1
        return None, (Fault("not written in UTF-8", f"{file} row {line}", "save it as UTF-8"),)
    if "\0" in text:
        return None, (Fault("not a text file", file, "save the sheet as .csv"),)
    first = text.split("\n", 1)[0]
    semicolons = first.count(";") > first.count(",")
    reader = csv.reader(io.StringIO(text, newline=""), delimiter=";" if semicolons else ",")
    rows: list[tuple[int, tuple[str, ...]]] = []
    before = 0
    try:
        for cells in reader:
            if any(cell.strip() for cell in cells):
                rows.append((before + 1, tuple(cell.strip() for cell in cells)))
            before = reader.line_num
    except csv.Error as error:
        return None, (Fault(f"not a valid table: {error}", f"{file} row {before + 1}", "mend it"),)
    if len(rows) < 2:
        return None, (Fault("the sheet holds no run", file, "add one row a run below the header"),)
    return _Table(file, rows[0][1], tuple(rows[1:]), semicolons), ()


def _interpret(
    table: _Table,
    factors: tuple[Factor, ...],
    responses: tuple[Response, ...],
    left_out: tuple[LeftOut, ...],
) -> SheetContent:
    columns, faults = _columns(table, factors, responses)
    n_cells = len(table.header)
    for row, cells in table.rows:
        if len(cells) > n_cells and any(cells[n_cells:]):
            mend = "separate columns by semicolons if commas are decimal signs"
            faults.append(
                Fault(
                    f"{len(cells)} cells under {n_cells} headings", f"{table.file} row {row}", mend
                )
            )
    if faults:
        return SheetContent(None, tuple(faults))
    reader = _Cells(table, columns)
    kinds = tuple(reader.kinds(faults))
    numeric = [f for f in factors if isinstance(f, NumericFactor)]
    categorical = [f for f in factors if isinstance(f, CategoricalFactor)]
    measured = tuple(r for r in responses if r.formula is None)
    n = len(table.rows)
    actual = np.array([reader.factor(f, faults) for f in numeric]).reshape(len(numeric), n).T
    levels = np.array([reader.levels(f, faults) for f in categorical], dtype=np.int64)
    read = {r.name: np.array(reader.response(r, faults)) for r in measured if r.derived is None}
    read |= {factor.name: actual[:, j] for j, factor in enumerate(numeric)}
    read |= {r.name: _derived(r.derived, read, n) for r in measured if r.derived is not None}
    values = np.array([read[r.name] for r in measured]).reshape(len(measured), n).T
    blocks, block = reader.blocks(faults)
    runs = Runs(
        file=table.file,
        rows=tuple(row for row, _ in table.rows),
        numeric_actual=actual,
        levels=levels.reshape(len(categorical), n).T,
        measured=values,
        blocks=blocks,
        block=block,
        kind=kinds,
        order=reader.order(),
        note=tuple(reader.texts("note")),
        weight=reader.weights(faults),
        others={name: tuple(reader.texts(name)) for name in reader.others(factors, responses)},
    )
    if faults:
        return SheetContent(None, tuple(faults))
    gathered, late = gather(runs, list(reader.texts("sample")), left_out, measured)
    if gathered is None:
        return SheetContent(None, late)
    faults = _enough(gathered.runs, measured)
    notes = _missing_notes(gathered.every_run or gathered.runs, measured)
    return SheetContent(
        None if faults else gathered.runs,
        tuple(faults),
        notes,
        every_run=gathered.every_run,
        assays=gathered.assays,
    )


def _derived(formula: Formula, read: Mapping[str, FloatArray], n_rows: int) -> FloatArray:
    """Compute a derived response from the columns that it names; empty where one of them is."""
    value = np.zeros(n_rows)
    for names, number in formula.terms.items():
        term = np.full(n_rows, number)
        for name in names:
            # a name without a column is a fault of the statement, and said there
            term = term * read.get(name, np.full(n_rows, np.nan))
        value = value + term
    return value


def _columns(
    table: _Table, factors: tuple[Factor, ...], responses: tuple[Response, ...]
) -> tuple[dict[str, int], list[Fault]]:
    """Find each column; report doubles, units that differ, and missing ones."""
    units = {f.name: f.unit for f in factors} | {r.name: r.unit for r in responses}
    columns: dict[str, int] = {}
    faults: list[Fault] = []
    where = f"{table.file} row 1"
    for index, heading in enumerate(table.header):
        match = _HEADER.fullmatch(heading)
        name = match["name"] if match else heading
        unit = match["unit"] if match else None
        if name in columns and (name in units or name in _OWN_COLUMNS):
            faults.append(Fault(f"two columns are called {name}", where, "rename or delete one"))
        columns.setdefault(name, index)
        if unit is not None and name in units and unit.strip() != units[name]:
            faults.append(
                Fault(
                    f"{name} is in [{unit}], but study.toml says [{units[name]}]",
                    where,
                    "write the same unit in both, and convert the numbers if they differ",
                )
            )
    needed = [f.name for f in factors]
    needed += [r.name for r in responses if r.formula is None and r.derived is None]
    unknown = [name for name in columns if name and name not in units]
    for name in needed:
        if name not in columns:
            mend = nearest(name, unknown, f"add a column {name}")
            faults.append(Fault(f"no column is called {name}", where, mend))
    return columns, faults


@dataclass(frozen=True, slots=True)
class _Cells:
    """The cells of a table by column name; faults are added to the list that is passed in."""

    table: _Table
    columns: dict[str, int]

    def _column(self, name: str) -> Iterator[tuple[int, str]]:
        index = self.columns[name]
        for row, cells in self.table.rows:
            yield row, cells[index] if index < len(cells) else ""

    def _where(self, row: int, name: str) -> str:
        return f"{self.table.file} row {row}, column {name}"

    def texts(self, name: str) -> Iterator[str]:
        if name not in self.columns:
            yield from [""] * len(self.table.rows)
            return
        for _, cell in self._column(name):
            # a quote that keeps a spreadsheet from reading text as a formula is not part of it
            yield cell[1:] if cell[:1] == "'" and cell[1:2] in ("=", "+", "-", "@") else cell

    def kinds(self, faults: list[Fault]) -> Iterator[str]:
        for (row, _), kind in zip(self.table.rows, self.texts("kind"), strict=True):
            if kind and kind not in KINDS:
                mend = nearest(kind, KINDS, f"use {', '.join(KINDS)} or leave it empty")
                faults.append(Fault(f"'{kind}' is no kind of run", self._where(row, "kind"), mend))
            yield kind

    def _number(self, cell: str) -> float | None:
        text = cell
        if self.table.semicolons and text.count(",") == 1 and "." not in text:
            text = text.replace(",", ".")
        try:
            number = float(text)
        except ValueError:
            return None
        return number if np.isfinite(number) and "_" not in text else None

    def factor(self, factor: NumericFactor, faults: list[Fault]) -> list[float]:
        numbers = []
        for row, cell in self._column(factor.name):
            number = self._number(cell)
            if number is None:
                shown = f"'{cell}'" if cell else "empty"
                faults.append(
                    Fault(
                        f"the setting is {shown}",
                        self._where(row, factor.name),
                        f"give a number in {factor.unit}" + _decimal_hint(cell),
                    )
                )
            elif factor.scale == "log" and number <= 0:
                faults.append(
                    Fault(
                        f"{number:g} on a log scale", self._where(row, factor.name), "use above 0"
                    )
                )
            numbers.append(np.nan if number is None else number)
        return numbers

    def levels(self, factor: CategoricalFactor, faults: list[Fault]) -> list[int]:
        places = []
        for (row, _), level in zip(self.table.rows, self.texts(factor.name), strict=True):
            if level not in factor.levels:
                mend = nearest(level, factor.levels, f"use {', '.join(factor.levels)}")
                where = self._where(row, factor.name)
                faults.append(Fault(f"'{level}' is no level of {factor.name}", where, mend))
            places.append(factor.levels.index(level) if level in factor.levels else 0)
        return places

    def response(self, response: Response, faults: list[Fault]) -> list[float]:
        numbers = []
        for row, cell in self._column(response.name):
            number = self._number(cell) if cell else np.nan
            if number is None:
                faults.append(
                    Fault(
                        f"the measured value is '{cell}'",
                        self._where(row, response.name),
                        f"give a number in {response.unit} or leave the cell empty"
                        + _decimal_hint(cell),
                    )
                )
            numbers.append(np.nan if number is None else number)
        return numbers

    def blocks(self, faults: list[Fault]) -> tuple[tuple[str, ...], IntArray]:
        names = list(self.texts("block"))
        if not any(names):
            return (), np.zeros(len(names), dtype=np.int64)
        for (row, _), name in zip(self.table.rows, names, strict=True):
            if not name:
                where = self._where(row, "block")
                faults.append(Fault("the block is empty", where, "name the block of every run"))
        different = tuple(dict.fromkeys(name for name in names if name))
        places = [different.index(name) if name else 0 for name in names]
        return different, np.array(places, dtype=np.int64)

    def weights(self, faults: list[Fault]) -> FloatArray | None:
        if "weight" not in self.columns:
            return None
        numbers = []
        for row, cell in self._column("weight"):
            number = self._number(cell)
            if number is None or number <= 0:
                shown = f"'{cell}'" if cell else "empty"
                faults.append(
                    Fault(
                        f"the weight is {shown}",
                        self._where(row, "weight"),
                        "give a number above 0: how many single batches the row is worth",
                    )
                )
            numbers.append(1.0 if number is None else number)
        return np.array(numbers)

    def others(self, factors: tuple[Factor, ...], responses: tuple[Response, ...]) -> list[str]:
        known = {f.name for f in factors} | {r.name for r in responses} | set(_OWN_COLUMNS)
        return [name for name in self.columns if name and name not in known]

    def order(self) -> tuple[int, ...] | None:
        cells = list(self.texts("run"))
        if not all(re.fullmatch(r"\d+", cell) for cell in cells):
            return None
        return tuple(int(cell) for cell in cells)


def _decimal_hint(cell: str) -> str:
    comma = re.fullmatch(r"[-+]?\d+,\d+", cell)
    return "; with decimal commas, separate the columns by semicolons" if comma else ""


def _enough(runs: Runs, measured: tuple[Response, ...]) -> list[Fault]:
    fitted = runs.fitted
    settings = np.concatenate([runs.numeric_actual, runs.levels], axis=1)[fitted]
    if len(np.unique(settings, axis=0)) < 2:
        what = "fewer than two different settings were run"
        mend = "add runs at other settings (confirm, failed and left-out runs are not fitted)"
        return [Fault(what, runs.file, mend)]
    return [
        Fault(
            f"no run has a value of {response.name}",
            f"{runs.file}, column {response.name}",
            "fill in what was measured",
        )
        for i, response in enumerate(measured)
        if not np.isfinite(runs.measured[fitted, i]).any()
    ]


def _missing_notes(runs: Runs, measured: tuple[Response, ...]) -> tuple[Finding, ...]:
    notes = []
    for i, response in enumerate(measured):
        empty = [
            str(row)
            for row, used, value in zip(runs.rows, runs.fitted, runs.measured[:, i], strict=True)
            if used and np.isnan(value)
        ]
        if empty:
            rows = "row" if len(empty) == 1 else "rows"
            text = f"{response.name}: no value in {rows} {', '.join(empty)}; left out of its model."
            notes.append(Finding("look", text, response.name))
    return tuple(notes)
