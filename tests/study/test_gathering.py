"""From rows to runs: leave_out, weight, sample and known_sd as a person writes them."""

import numpy as np
import pytest

from support.folders import write_study
from wideberth.errors import InputError
from wideberth.fit.models import fit
from wideberth.study.reading import read_study

HEAD = """\
[factors.speed]
unit = "rpm"
low = 8
high = 12
[responses.gloss]
unit = "GU"
[responses.haze]
unit = "%"
"""
SHEET = """\
speed,gloss,haze,lot
8,60,1.0,a
8,62,1.2,a
10,66,1.4,b
10,65,1.6,b
12,70,1.8,a
12,71,2.1,c
"""


def _read(tmp_path, statement=HEAD, sheet=SHEET):
    return read_study(write_study(tmp_path / "study", statement, sheet))


def _faults(tmp_path, statement=HEAD, sheet=SHEET):
    with pytest.raises(InputError) as caught:
        _read(tmp_path, statement, sheet)
    return " | ".join(str(fault) for fault in caught.value.faults)


def _leave(rows, reason='"spilled"', more=""):
    return f"{HEAD}[[leave_out]]\nrows = {rows}\nreason = {reason}\n{more}"


def test_a_row_is_left_out_of_every_model_and_remembered(tmp_path):
    study = _read(tmp_path, _leave("[3]"))
    assert np.isnan(study.runs.measured[1]).all()
    assert not study.runs.fitted[1]
    assert study.every_run.measured[1].tolist() == [62.0, 1.2]
    assert study.every_run.fitted.all()
    assert study.left_out[0].words() == "Row 3 is left out: spilled."
    assert not any("no value" in note.text for note in study.notes)
    models = fit(study)
    assert [model.n_runs for model in models.models] == [5, 5]
    (run,) = models["gloss"].left_out
    assert (run.row, run.observed, run.reason) == (3, 62.0, "spilled")


def test_a_row_is_left_out_of_one_model_alone(tmp_path):
    study = _read(tmp_path, _leave("[3, 4]", more='responses = ["haze"]\n'))
    assert study.runs.fitted.all()
    assert np.isfinite(study.runs.measured[:, 0]).all()
    assert np.isnan(study.runs.measured[1:3, 1]).all()
    assert study.left_out[0].words() == "Rows 3, 4 are left out of haze: spilled."
    assert [model.n_runs for model in fit(study).models] == [6, 4]


@pytest.mark.parametrize(
    ("statement", "said"),
    [
        (_leave("[9]"), "row 9, which holds no run"),
        (_leave("[3]", reason='""'), "'reason' is ''"),
        (_leave("[]"), "at least 1 items"),
        (_leave("[3.5]"), "'rows'|whole number"),
        (_leave("[3]", more='responses = ["gloos"]\n'), "did you mean 'gloss'"),
        (_leave("[3]", more='why = "x"\n'), "known keys: reason, responses, rows"),
        (HEAD + "[[leave_out]]\nrows = [3]\n", "key 'reason' is missing"),
        (_leave("[2, 3, 4, 5, 6]"), "fewer than two different settings"),
        (_leave("[2, 3, 4, 5, 6, 7]", more='responses = ["haze"]\n'), "no run has a value of haze"),
    ],
)
def test_a_wrong_leave_out_is_refused_in_plain_words(tmp_path, statement, said):
    found = _faults(tmp_path, statement)
    assert all(part in found for part in said.split("|"))


def test_a_row_that_is_never_fitted_need_not_be_left_out(tmp_path):
    sheet = SHEET.replace("speed,", "kind,speed,").replace("\n8", "\n,8").replace("\n1", "\n,1")
    sheet = sheet.replace(",8,62", "failed,8,62")
    assert "never fitted (failed)" in _faults(tmp_path, _leave("[3]"), sheet)


def test_weights_are_read_and_bad_ones_named(tmp_path):
    sheet = SHEET.replace("lot", "weight").replace(",a", ",2").replace(",b", ",1")
    study = _read(tmp_path, sheet=sheet.replace(",c", ",0.5"))
    assert study.runs.weight.tolist() == [2, 2, 1, 1, 2, 0.5]
    assert [run.weight for run in fit(study)["gloss"].runs] == [2, 2, 1, 1, 2, 0.5]
    for bad in ("0", "-1", "x", ""):
        assert "row 7, column weight" in _faults(tmp_path, sheet=sheet.replace(",c", f",{bad}"))


def test_other_columns_are_kept(tmp_path):
    assert _read(tmp_path).runs.others == {"lot": ("a", "a", "b", "b", "a", "c")}


def test_repeated_assays_are_one_run_and_never_replicates(tmp_path):
    sheet = "sample,speed,gloss,haze\n" + "".join(
        f"{name},{speed},{gloss},{haze}\n"
        for name, speed, gloss, haze in (
            ("s1", 8, 60, 1.0),
            ("s1", 8, 62, 1.2),
            ("s2", 8, 64, ""),
            ("s2", 8, 65, 1.3),
            ("s3", 10, 66, 1.4),
            ("s4", 12, 70, 1.8),
            ("s4", 12, 71, 2.1),
            ("", 12, 69, 1.9),
        )
    )
    study = _read(tmp_path, sheet=sheet)
    assert study.runs.rows == (2, 4, 6, 7, 9)
    assert study.runs.measured[:, 0].tolist() == [61, 64.5, 66, 70.5, 69]
    assert study.runs.measured[1, 1] == 1.3
    gloss = study.assays["gloss"]
    assert gloss.counts == (1, 2)
    assert gloss.df == 3
    assert gloss.sd == pytest.approx(np.sqrt((2 + 0.5 + 0.5) / 3))
    model = fit(study)["gloss"]
    assert model.n_runs == 5
    # s1 and s2 are two batches at one setting, s4 and the last row two at another
    assert model.lack_of_fit is None
    assert model.df_residual == 2
    assert any("mean of 1 or 2 assays" in finding.text for finding in model.findings)


def test_an_assay_that_is_left_out_leaves_its_batch(tmp_path):
    sheet = SHEET.replace("lot", "sample").replace("12,71,2.1,c", "12,71,2.1,a2")
    sheet = sheet.replace("12,70,1.8,a\n", "12,70,1.8,a2\n")
    study = _read(tmp_path, _leave("[3]"), sheet)
    assert study.runs.measured[:, 0].tolist() == [60, 65.5, 70.5]
    assert study.every_run.measured[:, 0].tolist() == [61, 65.5, 70.5]
    assert study.assays["gloss"].df == 2
    assert fit(study)["gloss"].left_out == ()


def test_assays_of_one_sample_must_be_one_batch(tmp_path):
    found = _faults(tmp_path, sheet=SHEET.replace("lot", "sample"))
    assert "the assays of sample a have different settings" in found
    assert "rows 2, 3, 6" in found


def test_known_sd_is_read(tmp_path):
    known = HEAD.replace('unit = "GU"', 'unit = "GU"\nknown_sd = { value = 0.7, df = 12 }')
    model = fit(_read(tmp_path, known))["gloss"]
    assert model.df_error == model.df_residual + 12
    for bad in ("{ value = 0, df = 12 }", "{ value = 1, df = 0 }", "{ value = 1 }", "0.7"):
        stated = known.replace("{ value = 0.7, df = 12 }", bad)
        assert "known_sd" in _faults(tmp_path, stated)
