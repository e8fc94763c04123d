"""Reading the run sheet: a table of text with one row a run, checked cell by cell."""

from __future__ import annotations

import hashlib
import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field, replace
from pathlib import Path

import numpy as np

from wideberth.errors import Fault
from wideberth.study.gathering import gather
from wideberth.study.naming import AS_RUN, nearest
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
from wideberth.study.tables import SheetTable, split_text
from wideberth.study.template import template_sheet

KINDS = ("factorial", "axial", "centre", "confirm", "failed")
_HEADER = re.compile(r"(?P<name>.*?)\s*(?:\[(?P<unit>[^\]]*)\])?\s*")
_UNFITTED = ("confirm", "failed")
_OWN_COLUMNS = ("run", "block", "kind", "note", "weight", "sample")
EVEN_SO = "EVEN SO:"
"""How a plan marks a run that it wrote although it must not be run."""


@dataclass(frozen=True, slots=True, eq=False)
class SheetContent:
    """The runs, or the faults that kept them from being read, and what is worth saying."""

    runs: Runs | None
    faults: tuple[Fault, ...]
    notes: tuple[Finding, ...] = ()
    sha256: str = ""
    every_run: Runs | None = None
    assays: Mapping[str, Assays] = field(default_factory=dict)


def read_sheet(
    folder: Path,
    file: str,
    factors: tuple[Factor, ...],
    responses: tuple[Response, ...],
    left_out: tuple[LeftOut, ...] = (),
    *,
    draft: bool = False,
) -> SheetContent:
    """Read the run sheet of a study folder against its factors and responses.

    A ``draft`` may be missing, be that of the template, and hold no results yet.
    """
    raw, fault = _sheet_bytes(folder, file)
    if draft and (raw == template_sheet().encode() or fault == _missing(folder, file)):
        found = hashlib.sha256(raw).hexdigest() if raw else ""
        return SheetContent(no_runs(file, factors, responses), (), sha256=found)
    if fault is not None:
        return SheetContent(None, (fault,))
    table, faults = _split(raw, file)
    if table is None:
        return SheetContent(None, faults)
    if not table.rows:
        empty = Fault("the sheet holds no run", file, "add one row a run below the header")
        return (
            SheetContent(
                no_runs(file, factors, responses), (), sha256=hashlib.sha256(raw).hexdigest()
            )
            if draft
            else SheetContent(None, (empty,))
        )
    content = _interpret(table, factors, responses, left_out, draft=draft)
    return replace(content, sha256=hashlib.sha256(raw).hexdigest())


def _sheet_bytes(folder: Path, file: str) -> tuple[bytes, Fault | None]:
    """Give the sheet's bytes, or why they cannot be read."""
    path, stated = folder / file, "study.toml, study.runs"
    if not path.resolve().is_relative_to(folder.resolve()):
        return b"", Fault(f"{file} lies outside the study folder", stated, "move it in")
    if path.suffix.lower() not in (".csv", ".xlsx"):
        return b"", Fault(f"{file} is neither .csv nor .xlsx", stated, "save it as one of them")
    try:
        return path.read_bytes(), None
    except FileNotFoundError:
        return b"", _missing(folder, file)
    except OSError as error:
        reason = (error.strerror or "it cannot be read").lower()
        return b"", Fault(f"{file}: {reason}", str(folder), "put the run sheet there")


def _missing(folder: Path, file: str) -> Fault:
    return Fault(f"{file}: no such file", str(folder), "put the run sheet there, or plan it")


def _split(raw: bytes, file: str) -> tuple[SheetTable | None, tuple[Fault, ...]]:
    if not file.lower().endswith(".xlsx"):
        return split_text(raw, file)
    # the library that reads workbooks is slow to load and most sheets need none
    from wideberth.study.workbook import split_workbook  # noqa: PLC0415

    return split_workbook(raw, file)


def no_runs(file: str, factors: tuple[Factor, ...], responses: tuple[Response, ...]) -> Runs:
    """Give a sheet without any run."""
    numeric = sum(isinstance(f, NumericFactor) for f in factors)
    measured = sum(r.formula is None for r in responses)
    return Runs(
        file=file,
        rows=(),
        numeric_actual=np.zeros((0, numeric)),
        levels=np.zeros((0, len(factors) - numeric), dtype=np.int64),
        measured=np.zeros((0, measured)),
        blocks=(),
        block=np.zeros(0, dtype=np.int64),
        kind=(),
        order=None,
        note=(),
    )


def _interpret(
    table: SheetTable,
    factors: tuple[Factor, ...],
    responses: tuple[Response, ...],
    left_out: tuple[LeftOut, ...],
    *,
    draft: bool,
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
    faults += reader.problems([*factors, *responses])
    kinds = tuple(reader.kinds(faults))
    numeric = [f for f in factors if isinstance(f, NumericFactor)]
    categorical = [f for f in factors if isinstance(f, CategoricalFactor)]
    measured = tuple(r for r in responses if r.formula is None)
    n = len(table.rows)
    planned = np.array([reader.factor(f, faults) for f in numeric]).reshape(len(numeric), n).T
    as_run = np.array([reader.as_run(f, faults) for f in numeric]).reshape(len(numeric), n).T
    actual, strayed = _as_run(table, numeric, planned, as_run)
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
        filled=bool(np.isfinite(values).any() or np.isfinite(as_run).any())
        or reader.remarked(lots="lot" not in {f.name for f in (*factors, *responses)}),
        weight=reader.weights(faults),
        others={name: tuple(reader.texts(name)) for name in reader.others(factors, responses)},
    )
    if faults:
        return SheetContent(None, tuple(faults))
    gathered, late = gather(runs, list(reader.texts("sample")), left_out, measured)
    if gathered is None:
        return SheetContent(None, late)
    if not draft:
        faults += _enough(gathered.runs, measured)
    notes = (*strayed, *_missing_notes(gathered.every_run or gathered.runs, measured))
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


def header_name(heading: str) -> str:
    """Take the unit off a heading."""
    match = _HEADER.fullmatch(heading)
    return match["name"] if match else heading


def _columns(
    table: SheetTable, factors: tuple[Factor, ...], responses: tuple[Response, ...]
) -> tuple[dict[str, int], list[Fault]]:
    """Find each column; report doubles, units that differ, and missing ones."""
    units = {f.name: f.unit for f in factors} | {r.name: r.unit for r in responses}
    units |= {f.name + AS_RUN: f.unit for f in factors}
    columns: dict[str, int] = {}
    faults: list[Fault] = []
    where = f"{table.file} row 1"
    for index, heading in enumerate(table.header):
        match = _HEADER.fullmatch(heading)
        name = header_name(heading)
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

    table: SheetTable
    columns: dict[str, int]

    def _column(self, name: str) -> Iterator[tuple[int, str]]:
        index = self.columns[name]
        for row, cells in self.table.rows:
            yield row, cells[index] if index < len(cells) else ""

    def _where(self, row: int, name: str) -> str:
        return self.table.where(row, self.columns[name], name)

    def problems(self, used: list[Factor | Response]) -> list[Fault]:
        """Give what is wrong with the cells themselves, in the columns that are read."""
        names = {"run", "block", "kind", "note", *(u.name for u in used)}
        names |= {u.name + AS_RUN for u in used}
        texts = {"note", *(u.name for u in used if isinstance(u, CategoricalFactor))}
        places = {self.columns[name]: name for name in names if name in self.columns}
        return [
            fault
            for (row, column), (fault, number_only) in sorted(self.table.problems.items())
            if column < 0 or (column in places and not (number_only and places[column] in texts))
        ]

    def remarked(self, *, lots: bool) -> bool:
        """Tell whether a person wrote a note or a lot, or marked a run failed or a confirmation.

        ``lots``: a column ``lot`` is what a plan leaves open, not a factor or response.
        """
        notes = any(note and not note.startswith(EVEN_SO) for note in self.texts("note"))
        kinds = any(kind in _UNFITTED for kind in self.texts("kind"))
        return notes or kinds or (lots and any(self.texts("lot")))

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

    def _spoiled(self, row: int, name: str) -> bool:
        """Tell whether a cell has a fault of its own, which is then said once."""
        return (row, self.columns[name]) in self.table.problems

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
            number = np.nan if self._spoiled(row, factor.name) else self._number(cell)
            if number is None:
                shown = f"'{cell}'" if cell else "empty"
                faults.append(
                    Fault(
                        f"the setting is {shown}",
                        self._where(row, factor.name),
                        f"give a number in {factor.unit}" + self._decimal_hint(cell),
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

    def as_run(self, factor: NumericFactor, faults: list[Fault]) -> list[float]:
        """Read what the settings really were; NaN where nothing was entered."""
        name = factor.name + AS_RUN
        if name not in self.columns:
            return [np.nan] * len(self.table.rows)
        numbers = []
        for row, cell in self._column(name):
            number = self._number(cell) if cell and not self._spoiled(row, name) else np.nan
            if number is None or (factor.scale == "log" and number <= 0):
                faults.append(
                    Fault(
                        f"the setting as run is '{cell}'",
                        self._where(row, name),
                        f"give a number in {factor.unit} or leave the cell empty"
                        + self._decimal_hint(cell),
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
            number = (
                self._number(cell) if cell and not self._spoiled(row, response.name) else np.nan
            )
            if number is None:
                faults.append(
                    Fault(
                        f"the measured value is '{cell}'",
                        self._where(row, response.name),
                        f"give a number in {response.unit} or leave the cell empty"
                        + self._decimal_hint(cell),
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
        known |= {f"{f.name}{AS_RUN}" for f in factors}
        return [name for name in self.columns if name and name not in known]

    def _decimal_hint(self, cell: str) -> str:
        if not re.fullmatch(r"[-+]?\d+,\d+", cell):
            return ""
        if self.table.workbook:
            return "; this one is text with a decimal comma: type it as a number"
        return "; with decimal commas, separate the columns by semicolons"

    def order(self) -> tuple[int, ...] | None:
        cells = list(self.texts("run"))
        if not all(re.fullmatch(r"\d+", cell) for cell in cells):
            return None
        return tuple(int(cell) for cell in cells)


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


def _as_run(
    table: SheetTable, factors: list[NumericFactor], planned: FloatArray, as_run: FloatArray
) -> tuple[FloatArray, tuple[Finding, ...]]:
    """Take the settings as run where they are off by more than the reading error."""
    actual, notes = planned.copy(), []
    for j, factor in enumerate(factors):
        off = np.abs(as_run[:, j] - planned[:, j])
        scale = max(float(np.nanmax(np.abs(planned[:, j]), initial=0.0)), factor.high)
        strayed = off > (factor.reading_error or 0.0) + 1e-12 * scale
        actual[strayed, j] = as_run[strayed, j]
        within = (off > 0) & ~strayed
        rows = [str(row) for (row, _), flag in zip(table.rows, strayed, strict=True) if flag]
        if rows:
            many = "row" if len(rows) == 1 else "rows"
            text = (
                f"{factor.name}: not run as planned in {many} {', '.join(rows)} (up to"
                f" {off[strayed].max():.3g} {factor.unit} off); fitted as run."
            )
            notes.append(Finding("look", text, factor.name))
        if within.any():
            text = (
                f"{factor.name}: {int(within.sum())} settings as run lie within the reading error"
                f" of {factor.reading_error:g} {factor.unit}; fitted as planned."
            )
            notes.append(Finding("fine", text, factor.name))
    return actual, tuple(notes)


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
