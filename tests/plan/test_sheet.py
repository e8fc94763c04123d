"""Run sheets: written, read back, added to; nothing that a person entered is ever touched."""

import io
from dataclasses import replace
from datetime import date

import numpy as np
import openpyxl
import openpyxl.chart
import pytest

from support.plans import plan_of
from wideberth.chain.plan_files import write_plan
from wideberth.errors import InputError
from wideberth.plan.plan import plan_runs
from wideberth.plan.sheet import sheet_text
from wideberth.plan.workbook import workbook_bytes
from wideberth.study.reading import read_draft, read_study

STATEMENT = """\
[study]
title = "Kneading & drying"
runs = "{runs}"
[factors.speed]
unit = "rpm"
low = 20
high = 40
allowed = [10, 50]
settable_step = 1
reading_error = 0.5
[factors.lot]
levels = ["=A1", "plain"]
[responses.crumb]
unit = "mm"
[blocks]
future = "recur"
[plan]
design = "two-level"
centre_runs = 2
"""


@pytest.fixture(params=["runs.csv", "runs.xlsx"])
def folder(request, tmp_path):
    (tmp_path / "study.toml").write_text(STATEMENT.format(runs=request.param), encoding="utf-8")
    return tmp_path


def _write(folder, **options):
    append = options.get("append", False)
    return write_plan(plan_runs(read_draft(folder), append=append), **options)


def _fill(folder, cells):
    """Enter values: {(row, heading): value}."""
    path = next(p for p in folder.iterdir() if p.name.startswith("runs."))
    if path.suffix == ".xlsx":
        book = openpyxl.load_workbook(path)
        sheet = book.active
        heads = [cell.value for cell in sheet[1]]
        for (row, heading), value in cells.items():
            sheet.cell(row, heads.index(heading) + 1).value = value
        book.save(path)
        return
    lines = [line.split(",") for line in path.read_text(encoding="utf-8").splitlines()]
    for (row, heading), value in cells.items():
        lines[row - 1][lines[0].index(heading)] = str(value)
    path.write_text("\n".join(",".join(line) for line in lines) + "\n", encoding="utf-8")


def _results(n, start=2):
    return {(row, "crumb [mm]"): 3 + 0.1 * row for row in range(start, start + n)}


def test_a_plan_is_read_back_as_it_was_planned(folder):
    sheet, record = _write(folder)
    assert sheet.name.startswith("runs")
    assert record.name == "plan.json"
    plan = plan_runs(read_draft(folder))
    runs = read_draft(folder).runs
    assert not runs.filled
    assert runs.order == tuple(run.order for run in plan.runs)
    assert runs.numeric_actual[:, 0].tolist() == [run.setting["speed"] for run in plan.runs]
    levels = ["=A1", "plain"]
    assert [levels[i] for i in runs.levels[:, 0]] == [run.setting["lot"] for run in plan.runs]
    assert runs.kind == tuple(run.kind for run in plan.runs)


def test_a_sheet_without_results_is_planned_anew_and_one_with_results_never(folder):
    (sheet, _) = _write(folder)
    _write(folder)
    for cell in (
        {(2, "crumb [mm]"): 1.5},
        {(3, "speed as run [rpm]"): 21.0},
        {(2, "note"): "smelled odd"},
        {(2, "kind"): "failed"},
    ):
        sheet.unlink()
        _write(folder)
        _fill(folder, cell)
        before = sheet.read_bytes()
        with pytest.raises(InputError, match="never overwritten"):
            _write(folder)
        assert sheet.read_bytes() == before


def test_a_lot_entered_is_kept_too(tmp_path):
    text = STATEMENT.format(runs="runs.csv").replace("[factors.lot]", "[factors.flour]")
    (tmp_path / "study.toml").write_text(text, encoding="utf-8")
    _write(tmp_path)
    _fill(tmp_path, {(3, "lot"): "L7"})
    assert read_draft(tmp_path).runs.filled


def test_new_runs_are_added_below_and_filled_cells_stay(folder):
    _write(folder)
    n = len(read_draft(folder).runs.rows)
    _fill(folder, _results(n))
    before = read_study(folder).runs
    _write(folder, append=True)
    after = read_study(folder).runs
    assert len(after.rows) == 2 * n
    assert np.array_equal(after.measured[:n], before.measured)
    assert np.array_equal(after.numeric_actual[:n], before.numeric_actual)
    assert after.blocks == ("1", "2")
    assert after.order == tuple(range(1, 2 * n + 1))
    assert np.isnan(after.measured[n:]).all()


def test_settings_as_run_count_when_they_differ_by_more_than_the_reading_error(folder):
    _write(folder)
    runs = read_draft(folder).runs
    planned = runs.numeric_actual[:, 0]
    cells = _results(len(planned))
    cells[2, "speed as run [rpm]"] = planned[0] + 0.4
    cells[3, "speed as run [rpm]"] = planned[1] + 3.0
    _fill(folder, cells)
    study = read_study(folder)
    assert study.runs.numeric_actual[0, 0] == planned[0]
    assert study.runs.numeric_actual[1, 0] == planned[1] + 3.0
    texts = " ".join(note.text for note in study.notes)
    assert "speed: not run as planned in row 3 (up to 3 rpm off); fitted as run." in texts
    assert "1 settings as run lie within the reading error of 0.5 rpm" in texts


def test_the_sheet_is_not_written_when_it_changed_meanwhile(folder):
    (sheet, _) = _write(folder)
    plan = plan_runs(read_draft(folder))
    _fill(folder, {(2, "crumb [mm]"): 1.5})
    before = sheet.read_bytes()
    with pytest.raises(InputError, match="changed while it was planned"):
        write_plan(plan)
    assert sheet.read_bytes() == before


def test_the_same_plan_gives_the_same_bytes():
    plan = plan_of(3, blocks=2)
    assert workbook_bytes(plan) == workbook_bytes(plan_of(3, blocks=2))
    assert sheet_text(plan) == sheet_text(plan_of(3, blocks=2))


def test_runs_that_must_not_be_made_are_written_only_even_so_and_marked(tmp_path):
    plan = plan_of(2, stated={"allowed": {}})
    plan = replace(plan, study=replace(plan.study, directory=tmp_path))
    with pytest.raises(InputError) as caught:
        write_plan(plan)
    assert len(caught.value.faults) == 4
    assert list(tmp_path.iterdir()) == []
    write_plan(plan, even_so=True)
    lines = (tmp_path / "runs.csv").read_text(encoding="utf-8").splitlines()
    marked = [line for line in lines if "EVEN SO: f" in line]
    assert len(marked) == 4
    assert all(",axial," in line for line in marked)


def test_the_workbook_locks_the_plan_and_checks_what_is_entered():
    plan = plan_of(2)
    sheet = openpyxl.load_workbook(io.BytesIO(workbook_bytes(plan)))["runs"]
    heads = [cell.value for cell in sheet[1]]
    assert sheet.protection.sheet
    locked = {head: sheet.cell(2, i + 1).protection.locked for i, head in enumerate(heads)}
    assert locked["f0 [u]"]
    assert not locked["f0 as run [u]"]
    assert not locked["y [v]"]
    assert not locked["note"]
    ranges = {str(rule.sqref): rule.type for rule in sheet.data_validations.dataValidation}
    assert sorted(ranges.values()) == ["decimal", "decimal", "decimal", "list"]
    assert sheet.page_setup.orientation == "landscape"
    assert sheet.print_title_rows == "$1:$1"
    assert all(cell.data_type in ("s", "n") for row in sheet.iter_rows() for cell in row)


def _workbook(folder, change):
    (sheet, _) = _write(folder)
    _fill(folder, _results(len(read_draft(folder).runs.rows)))
    book = openpyxl.load_workbook(sheet)
    change(book.active, [cell.value for cell in book.active[1]])
    book.save(sheet)


def test_all_faults_of_a_workbook_are_named_by_their_cells(tmp_path):
    (tmp_path / "study.toml").write_text(STATEMENT.format(runs="runs.xlsx"), encoding="utf-8")

    def spoil(sheet, heads):
        crumb, as_run = heads.index("crumb [mm]") + 1, heads.index("speed as run [rpm]") + 1
        sheet.cell(2, crumb).value = "=B2*2"
        sheet.cell(3, crumb).value = "#DIV/0!"
        sheet.cell(3, crumb).data_type = "e"
        sheet.cell(4, crumb).value = "3,7"
        sheet.cell(5, crumb).value = date(2026, 3, 7)
        sheet.cell(6, as_run).value = "3,7"
        sheet.row_dimensions[7].hidden = True
        sheet.merge_cells(start_row=8, end_row=9, start_column=crumb, end_column=crumb)

    _workbook(tmp_path, spoil)
    with pytest.raises(InputError) as caught:
        read_study(tmp_path)
    found = {fault.where.split(",")[0]: fault.what for fault in caught.value.faults}
    for cell, what in {
        "runs.xlsx cell G2": "a formula without a saved value",
        "runs.xlsx cell G3": "the cell holds the error #DIV/0!",
        "runs.xlsx cell G4": "the measured value is '3,7'",
        "runs.xlsx cell G5": "a date where a number must stand",
        "runs.xlsx cell E6": "the setting as run is '3,7'",
        "runs.xlsx cell A7": "the row is hidden",
        "runs.xlsx cell G8": "part of the merged cells G8:G9",
        "runs.xlsx cell G9": "part of the merged cells G8:G9",
    }.items():
        assert what in found[cell], (cell, found)
    assert len(caught.value.faults) == 8
    assert any("decimal comma: type it as a number" in fault.mend for fault in caught.value.faults)


def test_a_workbook_with_formulas_or_charts_is_not_added_to(tmp_path):
    (tmp_path / "study.toml").write_text(STATEMENT.format(runs="runs.xlsx"), encoding="utf-8")

    def add(sheet, heads):
        sheet.cell(3, len(heads) + 1).value = "=SUM(A2:A3)"
        chart = openpyxl.chart.BarChart()
        chart.add_data(openpyxl.chart.Reference(sheet, min_col=1, min_row=1, max_row=4))
        sheet.add_chart(chart)

    _workbook(tmp_path, add)
    before = (tmp_path / "runs.xlsx").read_bytes()
    with pytest.raises(InputError) as caught:
        _write(tmp_path, append=True)
    said = " ".join(fault.what for fault in caught.value.faults)
    assert "1 formulas would lose their saved values" in said
    assert "charts or pictures would be lost" in said
    assert (tmp_path / "runs.xlsx").read_bytes() == before


def test_dates_and_formulas_in_columns_of_your_own_do_no_harm(tmp_path):
    (tmp_path / "study.toml").write_text(STATEMENT.format(runs="runs.xlsx"), encoding="utf-8")

    def add(sheet, heads):
        sheet.cell(1, len(heads) + 1).value = "made on"
        sheet.cell(2, len(heads) + 1).value = date(2026, 3, 7)
        sheet.cell(3, len(heads) + 1).value = "=TODAY()"
        sheet.cell(2, heads.index("note") + 1).value = date(2026, 3, 7)

    _workbook(tmp_path, add)
    assert len(read_study(tmp_path).runs.rows) == 8


def test_a_file_that_is_no_workbook_is_refused(tmp_path):
    (tmp_path / "study.toml").write_text(STATEMENT.format(runs="runs.xlsx"), encoding="utf-8")
    (tmp_path / "runs.xlsx").write_bytes(b"not a workbook")
    for read in (read_study, read_draft):
        with pytest.raises(InputError, match="not a workbook that can be read"):
            read(tmp_path)


def test_semicolon_sheets_get_decimal_commas(tmp_path):
    text = STATEMENT.format(runs="runs.csv").replace("settable_step = 1", "settable_step = 0.5")
    (tmp_path / "study.toml").write_text(text.replace("high = 40", "high = 41"), encoding="utf-8")
    sheet = tmp_path / "runs.csv"
    sheet.write_bytes(
        b"\xef\xbb\xbfblock;speed [rpm];lot;crumb [mm];note\r\n"
        b"1;20,0;plain;3,5;first\r\n1;41,0;'=A1;4,5;\r\n"
    )
    before = sheet.read_bytes()
    write_plan(plan_runs(read_draft(tmp_path), append=True), append=True)
    after = sheet.read_bytes()
    assert after.startswith(before)
    assert b"30,5;" in after
    assert b"\n" not in after.replace(b"\r\n", b"")
    runs = read_study(tmp_path).runs
    assert sorted(set(runs.numeric_actual[:, 0])) == [20.0, 30.5, 41.0]


def test_a_sheet_that_lacks_a_column_is_not_added_to(tmp_path):
    (tmp_path / "study.toml").write_text(STATEMENT.format(runs="runs.csv"), encoding="utf-8")
    sheet = tmp_path / "runs.csv"
    sheet.write_text("block,speed,crumb\n1,20,3\n1,40,4\n", encoding="utf-8")
    with pytest.raises(InputError, match="no column is called lot"):
        _write(tmp_path, append=True)
