"""Reading a study folder: every fault with what, where and how to mend; nothing but such faults."""

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from support.folders import SHEET, STATEMENT, write_study
from wideberth.errors import InputError
from wideberth.study.reading import read_study
from wideberth.study.records import NumericFactor


def _faults(folder):
    with pytest.raises(InputError) as caught:
        read_study(folder)
    return caught.value.faults


def _one(folder):
    (fault,) = _faults(folder)
    return fault


def test_a_sound_study(tmp_path):
    study = read_study(write_study(tmp_path))
    assert study.title == "Coating"
    assert [f.name for f in study.factors] == ["drum speed", "Sprührate"]
    speed = study.numeric[0]
    assert isinstance(speed, NumericFactor)
    assert str(speed.settable_step) == "0.5"
    assert study.responses[0].limit.guard == "batch"
    assert study.responses[2].formula.terms == {
        (): 5.0,
        ("drum speed",): 0.5,
        ("Sprührate", "Sprührate"): 0.1,
        ("Sprührate", "drum speed"): 0.2,
    }
    assert study.responses[2].limit.guard == "none"
    assert study.runs.rows == (2, 3, 4, 5, 6, 7, 8)
    assert study.runs.measured.shape == (7, 2)
    assert [note.text for note in study.notes] == [
        "gloss: no value in row 5; left out of its model."
    ]
    assert len(study.sha256["study"]) == 64


@pytest.mark.parametrize(
    ("old", "new", "what", "where", "mend"),
    [
        ("high = 12", "hihg = 12", "unknown key 'hihg'", "line 8", "did you mean 'high'"),
        ("high = 12", "high = 'ten'", "'high' is 'ten'", "line 8", "a number without quotes"),
        ("high = 12", "high = inf", "'high' is inf", "line 8", "finite"),
        ("high = 12", "high = 7", "low 8 is not below high 7", "factors.drum speed", "swap"),
        ("high = 12", "", "drum speed has no high", "factors.drum speed", "state high"),
        (
            "allowed = [7, 13]",
            "allowed = [13, 7]",
            "allowed runs from 13 to 7",
            "allowed",
            "smaller",
        ),
        ("allowed = [7, 13]", "allowed = [7]", "'allowed' is [7]", "line", "at least 2 items"),
        (
            "[today]",
            '[memo]\nstage = "signed"\n[today]',
            "'stage' is 'signed'",
            "line",
            "'draft' or 'final'",
        ),
        (
            "[today]",
            '[memo]\nstage = "final"\n[today]',
            "[context] states no revision",
            "memo.stage",
            "leave the memo a draft",
        ),
        (
            "settable_step = 0.5",
            "settable_step = 40",
            "no whole multiple",
            "settable_step",
            "smaller",
        ),
        ("tolerance = 0.2", "tolerance = 0", "'tolerance' is 0", "line 9", "above 0"),
        ('unit = "%"', "", "key 'unit' is missing", "responses.defects", "state 'unit'"),
        (
            'want = "less"',
            'want = "fewer"',
            "'want' is 'fewer'",
            "line",
            "'more', 'less' or 'near'",
        ),
        ("poor = 9, ideal = 2", "poor = 2, ideal = 9", "is not below poor", "defects.goal", "swap"),
        ("poor = 9", "poor = [9, 10]", "poor of defects holds two numbers", "goal", "takes one"),
        (
            "limit = { high = 10 }",
            "limit = {}",
            "neither low nor high",
            "defects.limit",
            "state one",
        ),
        (
            "limit = { high = 10 }",
            "limit = { low = 11, high = 10 }",
            "runs from 11 to 10",
            "limit",
            "low must lie below high",
        ),
        (
            "limit = { high = 10 }",
            "limit = { high = 10, share = 1.2 }",
            "'share' is 1.2",
            "line",
            "below 1",
        ),
        (
            "limit = { high = 10 }",
            'limit = { high = 10, guard = "all" }',
            "'guard' is 'all'",
            "line",
            "'none', 'mean', 'batch' or 'share'",
        ),
        (
            "limit = { high = 99 }",
            'limit = { high = 99, guard = "batch" }',
            "known exactly",
            "cost",
            "leave guard out",
        ),
        (
            '"drum speed" = 0.5',
            '"drum sped" = 0.5',
            "names no factor",
            "cost.formula",
            "did you mean 'drum speed'",
        ),
        (
            '"drum speed" = 0.5',
            '"drum speed*drum speed*drum speed" = 0.5',
            "degree 3",
            "formula",
            "degree 2 at most",
        ),
        ('"drum speed" = 1.0', '"speed" = 1.0', "no numeric factor: speed", "constraints", "drum"),
        ("at_most = 30", "", "bounds nothing", "constraints", "at_most or at_least"),
        ('keep = "explored"', 'keep = "everything"', "'keep'", "line", "'explored' or 'allowed'"),
        ("[today]", "[today]\nspeed = 1", "[today] names no factor: speed", "today", "drum speed"),
        (
            'runs = "runs.csv"',
            'runs = "../runs.csv"',
            "outside the study folder",
            "study.runs",
            "move it in",
        ),
        (
            'runs = "runs.csv"',
            'runs = "runs.ods"',
            "neither .csv nor .xlsx",
            "study.runs",
            "save it as one",
        ),
        ('runs = "runs.csv"', 'runs = "other.csv"', "no such file", "", "put the run sheet there"),
        ("seed = 4", "seed = -4", "'seed' is -4", "line 4", "at least 0"),
        ("[responses.gloss]", '[responses."a*b"]', "'a*b' cannot be a name", "responses", "letter"),
        (
            "[responses.gloss]",
            "[responses.block]",
            "meaning of its own",
            "responses.block",
            "another",
        ),
        ("[study]", "[study", "not valid TOML", "study.toml", "mend the line"),
    ],
)
def test_faults_of_the_statement(tmp_path, old, new, what, where, mend):
    assert old in STATEMENT
    folder = write_study(tmp_path, STATEMENT.replace(old, new, 1))
    found = _faults(folder)
    assert any(what in f.what and where in f.where and mend in f.mend for f in found), found


@pytest.mark.parametrize(
    ("old", "new", "what", "where", "mend"),
    [
        (
            "8,20,factorial,4.1",
            "x,20,factorial,4.1",
            "the setting is 'x'",
            "row 2, column drum",
            "number",
        ),
        ("8,20,factorial,4.1", ",20,factorial,4.1", "the setting is empty", "row 2", "in rpm"),
        ("8,20,factorial,4.1", "nan,20,factorial,4.1", "'nan'", "row 2", "number"),
        (
            "factorial,4.1",
            "factorial,n.d.",
            "the measured value is 'n.d.'",
            "row 2, column defects",
            "leave the cell empty",
        ),
        (
            "factorial,4.1",
            "factoral,4.1",
            "'factoral' is no kind of run",
            "column kind",
            "factorial",
        ),
        ("drum speed [rpm]", "drum speed [rps]", "is in [rps]", "row 1", "same unit"),
        ("gloss", "glos", "no column is called gloss", "row 1", "did you mean 'glos'"),
        ("drum speed [rpm],", "drum speed [rpm],drum speed,", "two columns", "row 1", "rename"),
        ("8,20,factorial,4.1,60", '"8,5","20,0",factorial,4.1,60', "'8,5'", "row 2", "semicolons"),
        (
            "8,20,factorial,4.1,60",
            "8,20,factorial,4,1,60,7",
            "7 cells under 5",
            "row 2",
            "semicolon",
        ),
    ],
)
def test_faults_of_the_sheet(tmp_path, old, new, what, where, mend):
    assert old in SHEET
    found = _faults(write_study(tmp_path, sheet=SHEET.replace(old, new, 1)))
    assert any(what in f.what and where in f.where and mend in f.mend for f in found), found


def test_all_faults_at_once(tmp_path):
    statement = STATEMENT.replace("high = 12", "high = 7").replace("at_most = 30", "")
    sheet = SHEET.replace("factorial,4.1", "factorial,n.d.")
    found = _faults(write_study(tmp_path, statement, sheet))
    assert len(found) == 3


def test_an_empty_sheet_and_all_runs_alike(tmp_path):
    header = SHEET.split("\n", maxsplit=1)[0] + "\n"
    assert "holds no run" in _one(write_study(tmp_path, sheet=header)).what
    alike = header + "10,25,centre,5,62\n" * 4
    assert "two different settings" in _one(write_study(tmp_path, sheet=alike)).what
    unfilled = header + "8,20,,,\n12,30,,,\n"
    found = _faults(write_study(tmp_path, sheet=unfilled))
    assert {f.what for f in found} == {
        "no run has a value of defects",
        "no run has a value of gloss",
    }


def test_semicolons_decimal_commas_bom_and_quotes(tmp_path):
    sheet = SHEET.replace(",", ";").replace(".", ",")
    folder = write_study(tmp_path, sheet="\ufeff" + sheet)
    assert read_study(folder).runs.measured[0, 0] == 4.1
    plain = read_study(write_study(tmp_path / "other"))
    assert (read_study(folder).runs.numeric_actual == plain.runs.numeric_actual).all()


def test_not_utf8_is_said(tmp_path):
    folder = write_study(tmp_path)
    (folder / "runs.csv").write_bytes(SHEET.encode("latin-1").replace(b"rpm", b"r\xfcm", 1))
    assert "UTF-8" in _faults(folder)[0].what
    (folder / "study.toml").write_bytes(b"title = '\xff'")
    assert "UTF-8" in _one(folder).what


def test_missing_folder_and_file(tmp_path):
    assert "no such file" in _one(tmp_path / "nowhere").what
    (tmp_path / "study.toml").mkdir()
    assert "directory" in _one(tmp_path).what


def test_blocks_must_be_stated(tmp_path):
    lines = SHEET.strip().split("\n")
    sheet = "\n".join(
        [lines[0] + ",block", *(line + f",{'ab'[i % 2]}" for i, line in enumerate(lines[1:]))]
    )
    assert "[blocks] is not stated" in _one(write_study(tmp_path, sheet=sheet)).what
    recur = STATEMENT + '\n[blocks]\nfuture = "recur"\n'
    assert read_study(write_study(tmp_path, recur, sheet)).runs.blocks == ("a", "b")
    sample = recur.replace("recur", "sample")
    assert read_study(write_study(tmp_path, sample, sheet)).future_blocks == "sample"
    share = sample.replace("{ high = 10 }", '{ high = 10, guard = "share" }')
    assert "share of batches" in _one(write_study(tmp_path, share, sheet)).what
    for future in ("", "recur"):
        stated = (recur if future else STATEMENT).replace(
            'unit = "GU"', 'unit = "GU"\nblock_sd = 1'
        )
        found = _faults(write_study(tmp_path, stated, sheet if future else SHEET))
        assert any("the blocks are not a sample" in fault.what for fault in found)
    assert "no block column" in _one(write_study(tmp_path, recur)).what
    gap = sheet.replace("4.1,60,a", "4.1,60,")
    assert "the block is empty" in _one(write_study(tmp_path, recur, gap)).what


def test_categorical_and_log_factors(tmp_path):
    statement = (
        "[factors.flow]\nunit='L/h'\nlow=1\nhigh=100\nscale='log'\ntolerance=0.1\n"
        "[factors.lot]\nlevels=['A','B']\n[responses.y]\nunit='g'\n"
    )
    sheet = "flow,lot,y\n1,A,3\n100,B,4\n10,A,5\n"
    study = read_study(write_study(tmp_path, statement, sheet))
    assert study.runs.levels[:, 0].tolist() == [0, 1, 0]
    wrong = _one(write_study(tmp_path, statement, sheet.replace("B", "b")))
    assert "'b' is no level of lot" in wrong.what
    assert "A, B" in wrong.mend or "did you mean" in wrong.mend
    assert "log scale" in _one(write_study(tmp_path, statement, sheet.replace("1,A", "0,A"))).what
    relative = statement.replace("tolerance=0.1", "tolerance=1.5")
    assert "relative" in _one(write_study(tmp_path, relative, sheet)).mend


@settings(
    max_examples=150, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture]
)
@given(
    where=st.integers(0, len(STATEMENT) + len(SHEET) - 1),
    length=st.integers(0, 12),
    put=st.text(max_size=8),
)
def test_mangled_files_are_read_or_refused_in_words(tmp_path, where, length, put):
    text = STATEMENT + SHEET
    mangled = text[:where] + put + text[where + length :]
    cut = len(STATEMENT) + (len(put) - length if where < len(STATEMENT) else 0)
    folder = write_study(tmp_path, mangled[: max(cut, 0)], mangled[max(cut, 0) :])
    try:
        read_study(folder)
    except InputError as error:
        for fault in error.faults:
            assert fault.what
            assert fault.mend
            assert "pydantic" not in str(fault)
