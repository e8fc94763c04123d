"""Planned runs as a run sheet: what stands in each column, and the sheet as a .csv text.

Text that a spreadsheet would take for a formula gets a quote in front, which reading takes off.
"""

from __future__ import annotations

import csv
import io

from wideberth.errors import Fault, InputError
from wideberth.plan.records import Plan, PlannedRun
from wideberth.study.naming import AS_RUN
from wideberth.study.records import NumericFactor, Study
from wideberth.study.sheet import EVEN_SO, header_name
from wideberth.study.tables import SheetTable

_FORMULA = ("=", "+", "-", "@", "\t", "\r")
Cell = str | float | int


def headings(study: Study) -> list[str]:
    """Give the columns: planned settings beside settings as run, then responses, lot and note."""
    factors = []
    for factor in study.factors:
        factors.append(_with_unit(factor.name, factor.unit))
        if isinstance(factor, NumericFactor):
            factors.append(_with_unit(factor.name + AS_RUN, factor.unit))
    responses = [_with_unit(r.name, r.unit) for r in study.measured]
    taken = {one.name for one in (*study.factors, *study.responses)}
    lot = [] if "lot" in taken else ["lot"]
    return ["run", "block", "kind", *factors, *responses, *lot, "note"]


def cells(run: PlannedRun) -> dict[str, Cell]:
    """Give what stands in each column of a planned run, by the column's name."""
    note = f"{EVEN_SO} {'; '.join(run.offences)}" if run.offences else ""
    return {
        "run": run.order,
        "block": run.block,
        "kind": run.kind,
        **run.setting,
        "note": note,
    }


def sheet_text(plan: Plan) -> str:
    """Write a new .csv sheet."""
    target = io.StringIO()
    writer = csv.writer(target, lineterminator="\n")
    columns = headings(plan.study)
    writer.writerow([_as_text(heading) for heading in columns])
    writer.writerows(_line(run, columns) for run in plan.runs)
    return target.getvalue()


def appended_text(plan: Plan, raw: str, table: SheetTable) -> str:
    """Add the planned runs below the lines of a .csv sheet, which stay as they are.

    Raises
    ------
    InputError
        When the sheet lacks a column that the planned runs need.
    """
    check_columns(plan, table)
    end = "\r\n" if "\r\n" in raw else "\n"
    target = io.StringIO()
    writer = csv.writer(target, lineterminator=end, delimiter=";" if table.semicolons else ",")
    for run in plan.runs:
        line = _line(run, table.header)
        # where columns are separated by semicolons, a comma is the decimal sign
        writer.writerow(
            [
                cell.replace(".", ",") if table.semicolons and isinstance(value, float) else cell
                for cell, value in zip(line, _values(run, table.header), strict=True)
            ]
        )
    gap = "" if raw.endswith("\n") else end
    return raw + gap + target.getvalue()


def check_columns(plan: Plan, table: SheetTable) -> None:
    """Refuse to append to a sheet without a column for what the planned runs say."""
    there = {header_name(heading) for heading in table.header}
    needed = ["block", *(factor.name for factor in plan.study.factors)]
    needed += ["note"] if plan.offending else []
    faults = [
        Fault(f"no column is called {name}", f"{table.file} row 1", f"add a column {name}")
        for name in needed
        if name not in there
    ]
    if faults:
        raise InputError(faults)


def _values(run: PlannedRun, columns: list[str] | tuple[str, ...]) -> list[Cell]:
    content = cells(run)
    return [content.get(header_name(heading), "") for heading in columns]


def _line(run: PlannedRun, columns: list[str] | tuple[str, ...]) -> list[str]:
    return [_as_text(value) for value in _values(run, columns)]


def _as_text(value: Cell) -> str:
    if isinstance(value, str):
        return f"'{value}" if value.startswith(_FORMULA) else value
    return f"{value:.12g}"


def _with_unit(name: str, unit: str) -> str:
    return f"{name} [{unit}]" if unit else name
