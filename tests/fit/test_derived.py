"""Responses derived from measured ones: the sum of the models, with their doubt."""

import json

import numpy as np
import pytest

from support.build import central_composite
from support.folders import write_study
from wideberth.chain import as_json
from wideberth.decide.recommend import recommend
from wideberth.errors import InputError
from wideberth.fit.draws import draw_coefficients
from wideberth.fit.models import fit
from wideberth.study.reading import read_study

STATEMENT = """\
[factors.speed]
unit = "rpm"
low = 8
high = 12
[factors.dose]
unit = "g"
low = 1
high = 3
[responses.dimer]
unit = "%"
[responses.colour]
unit = "%"
[responses.total]
unit = "%"
formula = { constant = 0.5, dimer = 1, colour = 2, dose = 0.1, "speed*dose" = 0.01 }
goal = { want = "less", poor = 9, ideal = 2 }
limit = { high = 8 }
"""
X = central_composite(2, n_centre=4) * [2, 1] + [10, 2]


def _sheet(missing=()):
    rng = np.random.default_rng(6)
    lines = ["speed,dose,dimer,colour"]
    for i, (speed, dose) in enumerate(X):
        dimer = 1 + 0.1 * (speed - 9) ** 2 + 0.2 * rng.standard_normal()
        colour = 1 + 0.3 * dose + 0.1 * rng.standard_normal()
        cells = [
            f"{speed:.4f}",
            f"{dose:.4f}",
            f"{dimer:.3f}",
            "" if i in missing else f"{colour:.3f}",
        ]
        lines.append(",".join(cells))
    return "\n".join(lines) + "\n"


def _study(tmp_path, statement=STATEMENT, missing=()):
    return read_study(write_study(tmp_path / "s", statement, _sheet(missing)))


def _exact(x):
    return 0.5 + 0.1 * x[:, 1] + 0.01 * x[:, 0] * x[:, 1]


def test_the_model_is_the_sum_of_its_parts(tmp_path):
    study = _study(tmp_path)
    dimer, colour, total = study.runs.measured.T
    assert total == pytest.approx(dimer + 2 * colour + _exact(X), abs=1e-3)
    models = fit(study)
    fitted = {m.response: np.array([run.fitted for run in m.runs]) for m in models.models}
    expected = fitted["dimer"] + 2 * fitted["colour"] + _exact(study.runs.numeric_actual)
    assert fitted["total"] == pytest.approx(expected, rel=1e-10)
    assert models["total"].df_residual == models["dimer"].df_residual
    assert "computed from dimer and colour" in " ".join(f.text for f in models["total"].findings)


def test_every_draw_keeps_the_sum(tmp_path):
    models = fit(_study(tmp_path))
    draws = draw_coefficients(models, 500, seed=1)
    dimer, colour, total = (draws.of(models[name]) - models[name].coefficients
                            for name in ("dimer", "colour", "total"))  # fmt: skip
    assert total == pytest.approx(dimer + 2 * colour, abs=1e-9)
    noise = draws.noise
    assert noise[:, 2] == pytest.approx(noise[:, 0] + 2 * noise[:, 1], abs=1e-9)


def test_it_is_guarded_like_a_measured_response(tmp_path):
    choice = recommend(fit(_study(tmp_path)))
    (verdict,) = choice.limits
    assert (verdict.response, verdict.guard, choice.status) == ("total", "batch", "met")
    low, high = choice.predictions["total"].batch_interval
    assert low < choice.predictions["total"].mean < high


def test_a_missing_or_left_out_part_is_missing_in_it(tmp_path):
    study = _study(tmp_path, missing=(3,))
    assert np.isnan(study.runs.measured[3, 2])
    assert any(note.text.startswith("total: no value in row 5") for note in study.notes)
    left = STATEMENT + '[[leave_out]]\nrows = [4]\nreason = "spilled"\nresponses = ["dimer"]\n'
    study = _study(tmp_path, left)
    assert np.isnan(study.runs.measured[2]).tolist() == [True, False, True]
    assert study.left_out[0].responses == ("dimer", "total")


def test_the_record_keeps_the_formula(tmp_path):
    stated = as_json.study_json(_study(tmp_path))["responses"][2]
    assert stated["derived"] == {
        "constant": 0.5, "dimer": 1, "colour": 2, "dose": 0.1, "dose*speed": 0.01,
    }  # fmt: skip
    json.dumps(stated)


@pytest.mark.parametrize(
    ("formula", "said"),
    [
        ("{ dimer = 1, per = 2 }", "a denominator is not served"),
        ('{ "dimer*dose" = 1 }', "multiplies a measured response"),
        ('{ "dimer^2" = 1 }', "multiplies a measured response"),
        ("{ dimer = 1, cost = 1 }", "cost, which has a formula itself"),
        ("{ dimmer = 1 }", "did you mean 'dimer'"),
    ],
)
def test_what_cannot_be_derived_is_refused(tmp_path, formula, said):
    lines = STATEMENT.split("\n")
    start = next(i for i, line in enumerate(lines) if line.startswith("formula"))
    lines[start] = f"formula = {formula}"
    cost = '[responses.cost]\nunit = "EUR"\nformula = { speed = 1 }\n'
    with pytest.raises(InputError) as caught:
        _study(tmp_path, "\n".join(lines) + cost)
    assert said in str(caught.value)
