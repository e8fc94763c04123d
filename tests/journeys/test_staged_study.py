"""A study from an empty folder through its stages, as a person types it, mistakes included."""

import csv
import json
import shutil
from pathlib import Path

import pytest
from click.testing import CliRunner

from wideberth.cli import main

STUDIES = Path(__file__).parents[2] / "studies" / "process"


def _run(*arguments):
    result = CliRunner().invoke(main, [str(a) for a in arguments])
    assert "Traceback" not in result.output
    assert result.exit_code != 1, result.output
    return result


@pytest.fixture
def emulsion(tmp_path):
    folder = tmp_path / "emulsion"
    folder.mkdir()
    shutil.copy(STUDIES / "emulsion" / "study.toml", folder)
    return folder


def test_from_an_empty_folder_through_two_stages(emulsion):
    done = _run("plan", emulsion)
    assert done.exit_code == 0, done.output
    assert "wrote" in done.output
    assert _run("check", emulsion).exit_code == 2
    shutil.copy(STUDIES / "emulsion" / "runs.csv", emulsion)
    before = (emulsion / "runs.csv").read_bytes()
    again = _run("plan", emulsion)
    assert again.exit_code == 2
    assert "never overwritten" in again.output
    decided = _run("next", emulsion)
    assert decided.exit_code == 0
    assert "AXIAL: Curvature is seen" in decided.output
    refused = _run("next", emulsion, "--axial")
    assert refused.exit_code == 2
    assert "seal could reach" in refused.output
    assert "--distance 1.7" in refused.output
    assert (emulsion / "runs.csv").read_bytes() == before
    added = _run("next", emulsion, "--axial", "--distance", "1.7")
    assert added.exit_code == 0, added.output
    after = (emulsion / "runs.csv").read_bytes()
    assert after.startswith(before)
    stages = json.loads((emulsion / "plan.json").read_text(encoding="utf-8"))["stages"]
    assert [stage["plan"]["design"] for stage in stages] == ["two-level", "central composite"]
    assert _run("check", emulsion).exit_code == 0
    shutil.copy(STUDIES / "emulsion" / "both-stages.csv", emulsion / "runs.csv")
    assert "two-level stage, or go beyond one" in _run("next", emulsion).output
    assert _run("fit", emulsion).exit_code == 0


def test_the_whole_journey_in_a_workbook(emulsion):
    text = (emulsion / "study.toml").read_text(encoding="utf-8")
    (emulsion / "study.toml").write_text(
        text.replace("seed  = 3", 'seed = 3\nruns = "sheet.xlsx"'), encoding="utf-8"
    )
    first = _run("plan", emulsion, "--figure")
    assert first.exit_code == 0
    assert {path.name for path in emulsion.iterdir()} == {
        "study.toml",
        "sheet.xlsx",
        "plan.json",
        "plan.svg",
    }
    raw = (emulsion / "sheet.xlsx").read_bytes(), (emulsion / "plan.svg").read_bytes()
    assert _run("plan", emulsion, "--figure").exit_code == 0
    assert raw == ((emulsion / "sheet.xlsx").read_bytes(), (emulsion / "plan.svg").read_bytes())


def test_json_is_json_and_nothing_else(emulsion):
    done = _run("plan", emulsion, "--json", "--show", "--beside", "design=optimal,runs=14")
    content = json.loads(done.stdout)
    assert content["status"] == "ready"
    assert content["beside"]["certificate"]["efficiency"] > 0.5
    assert "NaN" not in done.stdout
    assert (
        done.stdout
        == _run("plan", emulsion, "--json", "--show", "--beside", "design=optimal,runs=14").stdout
    )
    refused = _run("plan", emulsion, "--design", "central composite", "--axial", "3", "--json")
    assert refused.exit_code == 2
    content = json.loads(refused.stdout)
    assert content["status"] == "refused"
    assert {"what", "where", "mend"} == set(content["errors"][0])
    assert content["ways_out"]
    shutil.copy(STUDIES / "emulsion" / "runs.csv", emulsion)
    stage = json.loads(_run("next", emulsion, "--json").stdout)
    assert stage["status"] == "axial"
    assert stage["responses"][0]["curvature"]["df"] == 3


def test_what_must_not_be_run_is_written_only_even_so(emulsion):
    options = ("--design", "central composite", "--axial", "3")
    assert _run("plan", emulsion, *options).exit_code == 2
    assert not (emulsion / "runs.csv").exists()
    done = _run("plan", emulsion, *options, "--even-so")
    assert done.exit_code == 0
    with (emulsion / "runs.csv").open(encoding="utf-8") as handle:
        rows = list(csv.DictReader(handle))
    marked = [row for row in rows if row["note"].startswith("EVEN SO: ")]
    assert 0 < len(marked) < len(rows)
    assert {row["kind"] for row in marked} == {"axial"}


@pytest.mark.parametrize(
    ("options", "said"),
    [
        (("--design", "composite"), "--design: 'design' is 'composite'"),
        (("--axial", "fce"), "or a number above 0"),
        (("--design", "central composite", "--axial", "0"), "or a number above 0"),
        (("--blocks", "two"), "--blocks: 'blocks' is 'two'"),
        (("--centre-runs", "-1"), "--centre-runs"),
        (("--runs", "12"), "design 'two-level' takes no runs"),
        (("--design", "optimal", "--runs", "4"), "4 runs cannot estimate the 10 terms"),
        (("--design", "optimal", "--runs", "11", "--centre-runs", "12"), "12 centre runs are more"),
        (("--core", "sixteenth"), "no sixteenth fraction"),
        (("--beside", "nonsense"), "'nonsense' is no KEY=VALUE"),
        (("--beside", "axal=face"), "did you mean 'axial'?"),
        (("--shrink", "1.5"), "at most 1"),
    ],
)
def test_mistakes_are_named_and_nothing_is_written(emulsion, options, said):
    done = _run("plan", emulsion, *options)
    assert done.exit_code == 2
    assert said in done.output
    assert [path.name for path in emulsion.iterdir()] == ["study.toml"]


@pytest.mark.parametrize(
    ("line", "said"),
    [
        ('axal = "face"', "did you mean 'axial'?"),
        ("hold = ['seel']", "did you mean 'seal'?"),
        ("hold = ['droplet']", "which has no limit"),
        ("runs = 12", "takes no runs"),
        ("blocks = 1.5", "'blocks' is 1.5"),
    ],
)
def test_the_table_is_checked_with_its_line(emulsion, line, said):
    text = (emulsion / "study.toml").read_text(encoding="utf-8")
    (emulsion / "study.toml").write_text(
        text.replace('design      = "two-level"', f'design = "two-level"\n{line}'), encoding="utf-8"
    )
    done = _run("plan", emulsion)
    assert done.exit_code == 2
    assert said in done.output
    assert "study.toml line " in done.output


def test_a_sheet_of_other_factors_can_be_moved_away(emulsion):
    assert _run("plan", emulsion).exit_code == 0
    text = (emulsion / "study.toml").read_text(encoding="utf-8")
    (emulsion / "study.toml").write_text(
        text.replace("[factors.oil]", "[factors.fat]").replace("oil = 9.6", "fat = 9.6")
    )
    done = _run("plan", emulsion)
    assert done.exit_code == 2
    assert "move it away to plan a new one" in done.output


def test_the_templates_sheet_gives_way_to_a_plan(tmp_path):
    assert _run("start", tmp_path / "new").exit_code == 0
    done = _run("plan", tmp_path / "new", "--design", "two-level")
    assert done.exit_code == 0, done.output
    assert _run("plan", tmp_path / "new", "--axial", "face").exit_code == 0
