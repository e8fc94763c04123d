"""The shell door: exit codes, JSON, refusals in words, the whole journey, the same bytes."""

import json
import shutil
from pathlib import Path

import jsonschema
import pytest
from click.testing import CliRunner

from support.folders import STATEMENT, write_study
from wideberth.cli import main

DEMO = str(Path(__file__).parents[2] / "studies" / "process" / "hydrogenation")
SCHEMA = json.loads(
    (Path(__file__).parents[2] / "docs" / "record.schema.json").read_text(encoding="utf-8")
)


def _run(*arguments):
    return CliRunner().invoke(main, [str(a) for a in arguments])


@pytest.mark.parametrize("command", ["check", "fit", "shape", "recommend"])
def test_json_is_json_and_nothing_else(command):
    result = _run(command, DEMO, "--json")
    assert result.exit_code == 0
    content = json.loads(result.stdout)
    assert content["command"] == command
    assert "NaN" not in result.stdout
    assert _run(command, DEMO, "--json").stdout == result.stdout


def test_json_of_fit_and_recommend_hold_what_is_promised():
    fitted = json.loads(_run("fit", DEMO, "--json").stdout)["responses"]["yield"]
    for key in (
        "n",
        "df_residual",
        "coefficients",
        "s",
        "r2",
        "r2_adjusted",
        "press",
        "r2_press",
        "lack_of_fit",
        "runs",
        "findings",
    ):
        assert key in fitted
    assert set(fitted["coefficients"][0]) == {"term", "coded", "se", "t", "p"}
    assert set(fitted["runs"][0]) >= {
        "row",
        "fitted",
        "residual",
        "leverage",
        "studentized",
        "cook",
    }
    shaped = json.loads(_run("shape", DEMO, "--json", "--radii", "0.5,1").stdout)
    assert [p["radius"] for p in shaped["responses"]["yield"]["ridge"]] == [0.5, 1.0]
    choice = json.loads(_run("recommend", DEMO, "--json").stdout)
    for key in (
        "version",
        "study_sha256",
        "seed",
        "status",
        "setpoint",
        "desirability",
        "proof_gap",
        "unrounded",
        "predictions",
        "limits",
        "conflicts",
        "findings",
    ):
        assert key in choice
    assert set(choice["predictions"]["yield"]) >= {
        "mean",
        "mean_interval",
        "batch_interval",
        "desirability",
    }


def test_recommend_in_words():
    result = _run("recommend", DEMO, "--quiet")
    assert result.exit_code == 0
    for words in (
        "Setpoint",
        "catalyst [wt%]",
        "The limit that rules: heat_rate",
        "at most 5 of 100",
        "no hazard review",
    ):
        assert words in result.stdout


def test_own_setting_and_bare_optimum():
    at = "catalyst=1.0,pressure=6,substrate=130"
    today = _run("recommend", DEMO, "--at", at, "--quiet")
    assert today.exit_code == 3
    assert "hydroxylamine at most 0.95 %: NOT MET" in today.stdout
    assert "Confirmation: " in today.stdout
    best = "catalyst=1.38,pressure=9.8,substrate=144"
    assert _run("recommend", DEMO, "--at", best, "--quiet").exit_code == 0
    high = "catalyst=1.6,pressure=11,substrate=170"
    assert _run("recommend", DEMO, "--at", high, "--quiet").exit_code == 3
    assert _run("recommend", DEMO, "--room", "none", "--quiet").exit_code == 0
    for wrong in ("catalyst=1", "catalyst", "catalyst=x,pressure=1,substrate=1", "a=1,a=2"):
        result = _run("recommend", DEMO, "--at", wrong)
        assert result.exit_code == 2
        assert "wrong" in result.stderr


def test_refusals_name_everything_at_once(tmp_path):
    folder = write_study(tmp_path, STATEMENT.replace("high = 12", "hihg = 12"))
    result = _run("check", folder)
    assert result.exit_code == 2
    assert "did you mean 'high'" in result.stderr
    as_json = _run("check", folder, "--json")
    assert as_json.exit_code == 2
    content = json.loads(as_json.stdout)
    assert content["status"] == "refused"
    assert set(content["errors"][0]) == {"what", "where", "mend"}
    assert _run("fit", tmp_path / "nowhere").exit_code == 2
    assert _run("fti", DEMO).exit_code == 2
    assert _run("shape", DEMO, "--radii", "a,b").exit_code == 2


def test_an_answer_that_is_not_met_exits_3(tmp_path):
    statement = STATEMENT.replace("limit = { high = 10 }", 'limit = { high = 1, guard = "none" }')
    result = _run("recommend", write_study(tmp_path, statement), "--quiet")
    assert result.exit_code == 3
    assert "holds nowhere in the region" in result.stdout


def test_the_memo_in_all_formats_and_its_record_computed_again(tmp_path):
    study, out = shutil.copytree(DEMO, tmp_path / "study"), tmp_path / "out"
    made = _run("memo", study, "--out", out, "--format", "docx,pdf, HTML", "--quiet")
    assert made.exit_code == 0
    names = ("memo.html", "memo.pdf", "memo.docx", "record.json")
    assert sorted(path.name for path in out.iterdir()) == sorted(names)
    assert (study / "history.jsonl").read_text(encoding="utf-8").count("\n") == 1
    record = json.loads((out / "record.json").read_text(encoding="utf-8"))
    assert record["tried"] == 1
    assert record["recommend"]["status"] == "met"
    jsonschema.validate(record, SCHEMA)
    again = _run("replay", out / "record.json", "--study", study, "--quiet")
    assert again.exit_code == 0
    assert "The same bits" in again.stdout
    assert "Input runs.csv: as recorded" in again.stdout


def test_an_unknown_format_is_said_before_anything_is_computed(tmp_path):
    result = _run("memo", DEMO, "--out", tmp_path, "--format", "html,odt")
    assert result.exit_code == 2
    assert "choose from html, pdf, docx" in result.stderr
    assert list(tmp_path.iterdir()) == []


def test_a_history_changed_by_hand_is_said_before_anything_is_computed(tmp_path):
    folder = write_study(tmp_path / "study")
    (folder / "history.jsonl").write_text("{}\n", encoding="utf-8")
    result = _run("memo", folder, "--quiet")
    assert result.exit_code == 2
    assert "history.jsonl line 1" in result.stderr
    assert not (folder / "memo.html").exists()


@pytest.mark.parametrize("text", [None, "", "[]", "{}", '{"study": 1}', "\xff"])
def test_what_is_no_record_is_not_replayed(tmp_path, text):
    path = tmp_path / "record.json"
    if text is not None:
        path.write_text(text, encoding="latin-1")
    result = _run("replay", path)
    assert result.exit_code == 2
    assert "record.json" in result.stderr
    assert "Traceback" not in result.stderr


def test_an_unwritable_folder_is_said(tmp_path):
    (tmp_path / "file").write_text("x")
    result = _run("memo", DEMO, "--out", tmp_path / "file", "--quiet")
    assert result.exit_code == 2
    assert "cannot be written" in result.stderr


def test_a_fault_of_ours_is_one_line(monkeypatch):
    def broken(directory):
        raise ZeroDivisionError

    monkeypatch.setattr("wideberth.study.reading.read_study", broken)
    result = _run("check", DEMO)
    assert result.exit_code == 1
    assert "fault of wideberth" in result.stderr
    assert "Traceback" not in result.stderr


def test_the_journey_from_an_empty_folder(tmp_path):
    folder = tmp_path / "mine"
    assert _run("start", folder).exit_code == 0
    assert _run("start", folder).exit_code == 2
    assert _run("check", folder).exit_code == 2
    sheet = folder / "runs.csv"
    header, *lines = sheet.read_text().strip().split("\n")
    filled = [header]
    for i, line in enumerate(lines):
        cells = line.split(",")
        speed, binder = (float(cells[1]) - 350) / 100, (float(cells[2]) - 60) / 20
        wobble = (-1) ** i * 0.1
        fines = 12 - 2 * speed - 1.5 * binder + 1.2 * speed**2 + wobble
        size = 340 + 30 * speed + 25 * binder - 8 * binder**2 + 20 * wobble
        cells[3:5] = [f"{fines:.2f}", f"{size:.0f}"]
        filled.append(",".join(cells))
    sheet.write_text("\n".join(filled) + "\n")
    for command in ("check", "fit", "shape"):
        assert _run(command, folder).exit_code == 0
    assert _run("recommend", folder, "--quiet").exit_code == 0
    assert _run("memo", folder, "--quiet").exit_code == 0
    assert (folder / "memo.html").exists()
