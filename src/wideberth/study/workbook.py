"""Reading a run sheet from a workbook: the saved values, and what is wrong with single cells."""

from __future__ import annotations

import io
from datetime import date, datetime, time, timedelta
from typing import Any
from zipfile import BadZipFile

from openpyxl import load_workbook
from openpyxl.utils.exceptions import InvalidFileException

from wideberth.errors import Fault
from wideberth.study.tables import SheetTable, column_letters

Problems = dict[tuple[int, int], tuple[Fault, bool]]


def split_workbook(raw: bytes, file: str) -> tuple[SheetTable | None, tuple[Fault, ...]]:
    """Read the first visible sheet; its first row is the header.

    Formulas count by the values saved with them. Faults of cells are kept with the table, because
    only those in columns that are read matter.
    """
    try:
        values = load_workbook(io.BytesIO(raw), data_only=True)
        written = load_workbook(io.BytesIO(raw))
    except (BadZipFile, InvalidFileException, KeyError, ValueError, OSError):
        mend = "save it again as an .xlsx workbook without a password"
        return None, (Fault("not a workbook that can be read", file, mend),)
    visible = [sheet for sheet in values.worksheets if sheet.sheet_state == "visible"]
    if not visible:
        return None, (Fault("the workbook has no visible sheet", file, "show the run sheet"),)
    sheet, formulas = visible[0], written[visible[0].title]
    problems: Problems = {}
    lines: list[tuple[int, tuple[str, ...]]] = []
    for row, (cells, sources) in enumerate(
        zip(sheet.iter_rows(), formulas.iter_rows(), strict=True), start=1
    ):
        texts = []
        for column, (cell, source) in enumerate(zip(cells, sources, strict=True)):
            place = f"{file} cell {column_letters(column)}{row}"
            problem = _problem(cell.value, source.value, cell.data_type, place)
            if problem is not None:
                problems[row, column] = problem
            texts.append(_text(cell.value))
        if any(texts) or any((row, column) in problems for column in range(len(texts))):
            lines.append((row, tuple(texts)))
    if not lines:
        return None, (Fault("the sheet holds no run", file, "add one row a run below the header"),)
    filled = {row for row, _ in lines}
    _merged(sheet, file, problems)
    for row in sorted(filled):
        if sheet.row_dimensions[row].hidden:
            mend = "show the row, or delete it if it is not meant"
            problems[row, -1] = (Fault("the row is hidden", f"{file} cell A{row}", mend), False)
    return SheetTable(file, lines[0][1], tuple(lines[1:]), workbook=True, problems=problems), ()


def _problem(value: Any, source: Any, kind: str, place: str) -> tuple[Fault, bool] | None:
    if kind == "e":
        return Fault(f"the cell holds the error {value}", place, "mend it or empty it"), False
    if isinstance(source, str) and source.startswith("=") and value is None:
        mend = "open the workbook in a spreadsheet program and save it, or type the value"
        return Fault("a formula without a saved value", place, mend), False
    if isinstance(value, date | datetime | time | timedelta):
        return Fault(f"a date where a number must stand ({value})", place, "type the number"), True
    if isinstance(value, bool):
        return Fault(f"{value} where a number must stand", place, "type the number"), True
    return None


def _merged(sheet: Any, file: str, problems: Problems) -> None:
    for area in sheet.merged_cells.ranges:
        for row in range(area.min_row, area.max_row + 1):
            for column in range(area.min_col - 1, area.max_col):
                place = f"{file} cell {column_letters(column)}{row}"
                fault = Fault(f"part of the merged cells {area.coord}", place, "unmerge them")
                problems[row, column] = (fault, False)


def _text(value: Any) -> str:
    if value is None:
        return ""
    if isinstance(value, float) and value.is_integer() and abs(value) < 1e15:
        return str(int(value))
    return str(value).strip()
