"""A stated list of terms: what is fitted, what is said, what is refused."""

from dataclasses import replace

import numpy as np
import pytest

from support.build import central_composite, make_study, more
from support.folders import write_study
from wideberth.decide.recommend import recommend
from wideberth.errors import InputError, RefusedError
from wideberth.fit.models import fit
from wideberth.study.reading import read_study

X = central_composite(3, n_centre=4)
LEVEL = np.arange(len(X)) % 2
Y = 4 + X @ [1.0, -1.0, 0.2] - X[:, 0] ** 2 + np.random.default_rng(3).standard_normal(len(X))


def _listing(*terms, **extra):
    study = make_study(X, {"y": Y}, **extra)
    return replace(study, responses=(replace(study.responses[0], terms=terms),))


def test_only_the_listed_terms_are_fitted():
    model = fit(_listing(("f0",), ("f1",), ("f0", "f0"), ("f0", "f1")))["y"]
    assert [term.name for term in model.terms] == ["1", "f0", "f1", "f0^2", "f0*f1"]
    x = X
    matrix = np.column_stack([np.ones(len(x)), x[:, 0], x[:, 1], x[:, 0] ** 2, x[:, 0] * x[:, 1]])
    expected = np.linalg.lstsq(matrix, Y, rcond=None)[0]
    assert model.coefficients == pytest.approx(expected, rel=1e-9)
    (finding,) = [f for f in model.findings if "only the listed terms" in f.text]
    assert finding.grade == "look"


def test_blocks_stay_in_a_listed_model():
    blocks = ["a", "a", "b"] * (len(X) // 3)
    model = fit(_listing(("f0",), blocks=blocks))["y"]
    assert [term.name for term in model.terms] == ["1", "f0", "block[a]"]


def test_levels_are_listed_by_their_factor():
    extra = {"categorical": {"colour": (("red", "green"), np.repeat([0, 1], len(X) // 2))}}
    model = fit(_listing(("f0",), ("colour",), ("colour", "f0"), **extra))["y"]
    assert [term.name for term in model.terms] == ["1", "f0", "colour[red]", "f0*colour[red]"]


def test_a_listed_model_that_the_runs_cannot_support_is_refused():
    two_levels = np.vstack([X[:8], X[-4:]])
    study = make_study(two_levels, {"y": Y[:12]})
    terms = (("f0",), ("f1",), ("f0", "f0"), ("f1", "f1"))
    with pytest.raises(RefusedError, match="the listed model has terms"):
        fit(replace(study, responses=(replace(study.responses[0], terms=terms),)))


def test_a_shorter_model_serves_the_setpoint():
    goals = {"y": more(0, 8)}
    choice = recommend(fit(_listing(("f0",), ("f1",), ("f0", "f0"), goals=goals)))
    assert choice.status == "met"
    model = fit(_listing(("f0",), ("f1",), ("f0", "f0"), goals=goals))["y"]
    by_name = dict(zip([t.name for t in model.terms], model.coefficients, strict=True))
    x = choice.setpoint["f0"], choice.setpoint["f1"]
    # no run of the explored region does better on the fitted equation
    best = by_name["f0"] * X[:, 0] + by_name["f1"] * X[:, 1] + by_name["f0^2"] * X[:, 0] ** 2
    here = by_name["f0"] * x[0] + by_name["f1"] * x[1] + by_name["f0^2"] * x[0] ** 2
    assert here >= best.max() - 1e-9


STATEMENT = """\
[factors.speed]
unit = "rpm"
low = 8
high = 12
[factors.dose]
unit = "g"
low = 1
high = 3
[factors.colour]
levels = ["red", "green"]
[responses.gloss]
unit = "GU"
model = { terms = TERMS }
"""
SHEET = "speed,dose,colour,gloss\n" + "".join(
    f"{8 + 2 * (i % 3)},{1 + i // 3 % 3},{('red', 'green')[i % 2]},{60 + i % 7}\n"
    for i in range(18)
)


def _read(tmp_path, terms):
    return read_study(write_study(tmp_path / "s", STATEMENT.replace("TERMS", terms), SHEET))


def test_a_list_is_read_in_any_order_and_spelling(tmp_path):
    study = _read(tmp_path, '["speed", "dose", "dose * speed", "speed^2", "colour", "colour*dose"]')
    assert [term.name for term in fit(study)["gloss"].terms] == [
        "1", "speed", "dose", "speed^2", "speed*dose", "colour[red]", "dose*colour[red]",
    ]  # fmt: skip
    assert _read(tmp_path, '"all"').responses[0].terms is None


@pytest.mark.parametrize(
    ("terms", "said"),
    [
        ('"auto"', "terms are not chosen from the data"),
        ("3", "'terms' is 3"),
        ("[]", "at least 1 items"),
        ('["speed", "spede*dose", "dose"]', "did you mean 'speed'"),
        ('["speed^2"]', "speed^2 is listed without speed"),
        ('["speed*dose"]', "listed without dose and speed"),
        ('["speed", "speed^3"]', "beyond a second-order model"),
        ('["colour", "colour^2"]', "beyond a second-order model"),
        ('["speed"], order = 2', "an order and a list of terms"),
    ],
)
def test_a_wrong_list_is_refused_in_plain_words(tmp_path, terms, said):
    with pytest.raises(InputError) as caught:
        _read(tmp_path, terms)
    assert said in str(caught.value)
