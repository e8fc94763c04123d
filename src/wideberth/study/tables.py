"""A run sheet as a table of text: header and rows, with the row of the file that each stands in."""

from __future__ import annotations

import csv
import io
from collections.abc import Mapping
from dataclasses import dataclass, field

from wideberth.errors import Fault


@dataclass(frozen=True, slots=True)
class SheetTable:
    """Header and rows as text.

    Attributes
    ----------
    rows : tuple of (int, tuple of str)
        The row of the file and its cells.
    semicolons : bool
        Columns are separated by semicolons, so a comma may be a decimal sign.
    workbook : bool
        Cells have names of their own.
    problems : mapping
        What is wrong with a cell itself, by row and column (from 0; -1: the whole row), and
        whether that matters only where a number must stand.
    """

    file: str
    header: tuple[str, ...]
    rows: tuple[tuple[int, tuple[str, ...]], ...]
    semicolons: bool = False
    workbook: bool = False
    problems: Mapping[tuple[int, int], tuple[Fault, bool]] = field(default_factory=dict)

    def where(self, row: int, column: int, name: str) -> str:
        """Say where a cell stands."""
        place = f"cell {column_letters(column)}{row}" if self.workbook else f"row {row}"
        return f"{self.file} {place}, column {name}"


def column_letters(column: int) -> str:
    """Name a column, counted from 0, as spreadsheets do."""
    letters, left = "", column + 1
    while left:
        left, place = divmod(left - 1, 26)
        letters = chr(ord("A") + place) + letters
    return letters


def split_text(raw: bytes, file: str) -> tuple[SheetTable | None, tuple[Fault, ...]]:
    """Split the bytes of a .csv file; without any line the header is missing, a fault."""
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
    if not rows:
        return None, (Fault("the sheet holds no run", file, "add one row a run below the header"),)
    return SheetTable(file, rows[0][1], tuple(rows[1:]), semicolons), ()
