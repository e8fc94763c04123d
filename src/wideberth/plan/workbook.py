"""Planned runs as an .xlsx workbook: locked plan, open cells with input checks, fit to print."""

from __future__ import annotations

import io
from datetime import datetime
from typing import Any
from zipfile import ZipFile

import xlsxwriter
from openpyxl import load_workbook
from openpyxl.styles import Protection
from xlsxwriter.utility import xl_col_to_name

from wideberth.errors import Fault, InputError
from wideberth.plan.records import Plan
from wideberth.plan.sheet import cells, check_columns, headings
from wideberth.study.naming import AS_RUN
from wideberth.study.sheet import KINDS, header_name
from wideberth.study.tables import SheetTable

SHEET = "runs"
_CHECKED_ROWS = 500
_ANY = 1e300
# a workbook says when it was made; the same plan must give the same bytes
_MADE = datetime(2000, 1, 1)
_DRAWN = ("xl/charts/", "xl/media/", "xl/pivotTables/", "xl/vbaProject")
_LINE = "#8a929b"
_PLANNED = "#e9ecef"


def workbook_bytes(plan: Plan) -> bytes:
    """Write a new workbook."""
    target = io.BytesIO()
    book = xlsxwriter.Workbook(target, {"in_memory": True, "strings_to_formulas": False})
    book.set_properties({"created": _MADE, "title": plan.study.title})
    sheet = book.add_worksheet(SHEET)
    columns = headings(plan.study)
    _write_cells(book, sheet, plan, columns)
    _check_input(sheet, plan, columns)
    _set_page(sheet, plan, columns)
    book.close()
    return target.getvalue()


def appended_workbook(plan: Plan, raw: bytes, table: SheetTable) -> bytes:
    """Add the planned runs below the rows of a workbook's first visible sheet.

    Raises
    ------
    InputError
        When a column is missing, or the workbook holds what adding to it would lose.
    """
    check_columns(plan, table)
    book = load_workbook(io.BytesIO(raw))
    _check_losses(book, raw, table.file)
    sheet = next(sheet for sheet in book.worksheets if sheet.sheet_state == "visible")
    row = max(row for row, _ in table.rows)
    for run in plan.runs:
        row += 1
        content = cells(run)
        for column, heading in enumerate(table.header, start=1):
            cell = sheet.cell(row, column)
            value = content.get(header_name(heading), None)
            if isinstance(value, str) and value:
                # set as text, so that nothing is taken for a formula
                cell.value, cell.data_type = value, "s"
            elif value != "":
                cell.value = value
            locked = header_name(heading) in _locked_names(plan)
            cell.protection = Protection(locked=locked)
    target = io.BytesIO()
    book.save(target)
    return target.getvalue()


def _check_losses(book: Any, raw: bytes, file: str) -> None:
    """Refuse a workbook with what the library does not carry over: saved values and pictures."""
    faults = []
    for sheet in book.worksheets:
        formulas = [c.coordinate for row in sheet.iter_rows() for c in row if c.data_type == "f"]
        if formulas:
            where = f"{file} sheet {sheet.title}, cell {formulas[0]}"
            what = f"{len(formulas)} formulas would lose their saved values"
            faults.append(Fault(what, where, "paste them as values, then add the runs"))
    with ZipFile(io.BytesIO(raw)) as archive:
        drawn = [name for name in archive.namelist() if name.startswith(_DRAWN)]
    if drawn:
        mend = "move them to a workbook of their own, then add the runs"
        faults.append(Fault("the workbook's charts or pictures would be lost", file, mend))
    if faults:
        raise InputError(faults)


def _locked_names(plan: Plan) -> set[str]:
    return {"run", "block", *(factor.name for factor in plan.study.factors)}


def _write_cells(book: Any, sheet: Any, plan: Plan, columns: list[str]) -> None:
    line = {"border": 1, "border_color": _LINE, "valign": "vcenter", "align": "center"}
    head = book.add_format({**line, "bold": True, "text_wrap": True, "bg_color": _PLANNED})
    locked = book.add_format({**line, "bg_color": _PLANNED})
    open_cell = book.add_format({**line, "locked": False})
    names = _locked_names(plan)
    for column, heading in enumerate(columns):
        sheet.write_string(0, column, heading, head)
    for row, run in enumerate(plan.runs, start=1):
        # high enough to write in by hand
        sheet.set_row(row, 20)
        content = cells(run)
        for column, heading in enumerate(columns):
            name = header_name(heading)
            value = content.get(name, "")
            style = locked if name in names else open_cell
            if value == "":
                sheet.write_blank(row, column, None, style)
            elif isinstance(value, str):
                sheet.write_string(row, column, value, style)
            else:
                sheet.write_number(row, column, value, style)


def _check_input(sheet: Any, plan: Plan, columns: list[str]) -> None:
    """Let only numbers into number cells, and known words into ``kind``."""
    numbers = {factor.name + AS_RUN for factor in plan.study.numeric}
    numbers |= {response.name for response in plan.study.measured}
    for column, heading in enumerate(columns):
        area = (1, column, _CHECKED_ROWS, column)
        if header_name(heading) in numbers:
            rule = {
                "validate": "decimal",
                "criteria": "between",
                "minimum": -_ANY,
                "maximum": _ANY,
                "error_title": "A number, please",
                "error_message": f"Type {heading} as a number, or leave the cell empty.",
            }
            sheet.data_validation(*area, rule)
        elif heading == "kind":
            rule = {
                "validate": "list",
                "source": list(KINDS),
                "error_title": "Kind of run",
                "error_message": "Mark a run that went wrong as failed; else leave this as it is.",
            }
            sheet.data_validation(*area, rule)


def _set_page(sheet: Any, plan: Plan, columns: list[str]) -> None:
    last = xl_col_to_name(len(columns) - 1)
    for column, heading in enumerate(columns):
        wide = 30 if heading == "note" else max(8, min(len(heading), 14) + 2)
        sheet.set_column(column, column, wide)
    sheet.set_row(0, 32)
    sheet.freeze_panes(1, 3)
    sheet.protect("", {"format_columns": True, "format_rows": True, "sort": True})
    sheet.set_landscape()
    sheet.set_paper(9)
    sheet.fit_to_pages(1, 0)
    sheet.repeat_rows(0)
    sheet.print_area(f"A1:{last}{len(plan.runs) + 1}")
    # an ampersand starts a code in headers
    title = plan.study.title.replace("&", "&&")[:120]
    sheet.set_header(f"&L{title}&Rseed {plan.seed}")
    sheet.set_footer("&LRun in this order. Stop and ask when a run looks unsafe.&R&P of &N")
