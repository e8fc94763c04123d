"""The memo: one file, nothing from outside, nothing interpreted, every status readable."""

import json
import re
from dataclasses import replace

import jsonschema
import numpy as np
import pytest
from scipy import stats

from support.build import central_composite, less, make_study, more, small_composite
from wideberth.chain.as_json import dumps_record
from wideberth.chain.files import write_all
from wideberth.chain.record import build_record
from wideberth.chain.schema import record_schema
from wideberth.errors import InputError
from wideberth.report.memo import full_record, memo_html
from wideberth.report.numbers import format_range, format_value
from wideberth.study.records import Limit


def _record(study):
    return build_record(study)


def _study(k=2, limits=None, goals=None, **kwargs):
    x = small_composite(k) if k > 5 else central_composite(k)
    rng = np.random.default_rng(1)
    y = 20 + 3 * x[:, 0] - (x**2).sum(axis=1) + 0.2 * rng.standard_normal(len(x))
    z = 10 + 2 * x[:, 0] + 0.2 * rng.standard_normal(len(x))
    return make_study(x, {"y": y, "z": z}, goals=goals, limits=limits, **kwargs)


GOALS = {"y": more(10.0, 25.0)}


@pytest.mark.parametrize(
    ("status", "study"),
    [
        ("met", _study(limits={"z": Limit(None, 13.0, "share")}, goals=GOALS, tolerance=0.1)),
        ("conflict", _study(limits={"z": Limit(None, 1.0, "none")}, goals=GOALS)),
        ("unproven", _study(limits={"z": Limit(None, 7.4, "share")}, goals=GOALS)),
        ("unreached", _study(goals={"y": more(90.0, 99.0)})),
        ("met", _study(k=1, limits={"z": Limit(None, 13.0, "batch")}, goals=GOALS)),
        ("met", _study(k=8, limits={"z": Limit(None, 13.0, "batch")}, goals=GOALS)),
        ("met", _study(limits={"z": Limit(8.0, 13.0, "none")})),
        ("met", _study(goals={"z": less(None, None)})),
    ],
)
def test_every_kind_of_answer_makes_a_whole_memo(status, study):
    record = _record(study)
    assert record.choice.status == status
    text = memo_html(record)
    assert text.count("<h1>") == 1
    for words in (
        "Question and verdict",
        "Settings",
        "What is not known",
        "Confirm" if status == "met" else "There is no setting",
        "hazard review",
        "Approved",
        "Provenance",
    ):
        assert words in text
    assert ("Not supported" in text) == (status != "met")
    assert "nan" not in re.sub(r"<svg.*?</svg>", "", text, flags=re.DOTALL).split()
    jsonschema.validate(json.loads(dumps_record(full_record(record))), record_schema())


def test_nothing_comes_from_outside_and_nothing_is_interpreted():
    x = central_composite(2)
    y = x[:, 0] + 0.1 * np.random.default_rng(0).standard_normal(12)
    study = make_study(
        x,
        {"Größe": y},
        names=("a b.c", "ß-d"),
        goals={"Größe": more(-2, 2)},
        limits={"Größe": Limit(-9.0, None, "batch")},
        units={"Größe": "<b>µm$x$</b>"},
    )
    study = replace(study, title="<script>alert(1)</script> & more {{ 1 }}")
    text = memo_html(_record(study))
    assert "<script" not in text
    assert "&lt;script&gt;" in text
    assert "<b>µm" not in text
    outside = re.findall(r'(?:src|href)="(?!#)[^"]*"|url\((?!#)', text)
    assert [link for link in outside if "xlink:href" not in link] == []
    assert "@import" not in text


def test_figures_have_names_and_tables_have_heads():
    text = memo_html(_record(_study(limits={"z": Limit(None, 13.0, "batch")}, goals=GOALS)))
    assert text.count('role="img" aria-label="') == text.count("<figure") > 2
    assert text.count("<caption>") == text.count("<thead>")
    assert 'scope="col"' in text
    assert 'scope="row"' in text


def test_either_all_files_are_replaced_or_none(tmp_path, monkeypatch):
    one, other = tmp_path / "a.txt", tmp_path / "b.txt"
    write_all({one: b"old", other: b"old"})

    def fail(handle):
        raise OSError(28, "no space left")

    monkeypatch.setattr("wideberth.chain.files.os.fsync", fail)
    with pytest.raises(InputError, match="no space left"):
        write_all({one: b"new", other: b"new"})
    assert [path.read_bytes() for path in (one, other)] == [b"old", b"old"]
    assert sorted(path.name for path in tmp_path.iterdir()) == ["a.txt", "b.txt"]


@pytest.mark.parametrize(
    ("value", "uncertainty", "text"),
    [
        (93.84083, 0.316, "93.84"),
        (1559.2, None, "1559"),
        (0.0000123456, None, "0.00001235"),
        (0.0, None, "0"),
        (-0.0001, 0.5, "0.00"),
        (123456.0, 3000.0, "123500"),
        (5.0, None, "5"),
    ],
)
def test_numbers_are_rounded_to_what_they_are_worth(value, uncertainty, text):
    assert format_value(value, uncertainty).lstrip("-") == text


def test_ranges_share_their_digits():
    assert format_range(93.5247, 94.1569, 0.316) == "93.52 to 94.16"


def test_page_one_carries_window_conformance_location_and_confirmation():
    record = _record(_study(limits={"z": Limit(None, 13.0, "share")}, goals=GOALS, tolerance=0.1))
    first = memo_html(record).split("Evidence")[0]
    for words in (
        "Proven window",
        "All limits together",
        "of 100 batches",
        "95 % sure",
        "One run; mean of 3",
        "all responses together",
    ):
        assert words in first
    low, high = record.window.settable["f0"]
    assert f"{np.ceil(low * 100 - 1e-5) / 100:.2f} to" in first
    assert high > record.choice.setpoint["f0"]


def test_a_setting_on_the_edge_gets_runs_to_try_and_a_figure():
    x = central_composite(2)
    rng = np.random.default_rng(1)
    y = 20 + 3 * x[:, 0] + x[:, 1] + 0.2 * rng.standard_normal(len(x))
    study = make_study(
        x, {"y": y}, goals={"y": more(5.0, 40.0)}, allowed={"f0": (-4, 4), "f1": (-4, 4)}
    )
    text = memo_html(_record(study))
    assert "Runs to try beyond what was explored" in text
    assert "never settings to use" in text
    assert "Conditions" in text.split("Evidence")[0]


def test_a_study_without_degrees_of_freedom_says_so_instead_of_numbers():
    x = central_composite(2, n_centre=1)[[0, 1, 2, 3, 4, 8]]
    y = np.array([1.0, 2.0, 3.0, 5.0, 4.0, 2.5])
    record = _record(make_study(x, {"y": y}, goals={"y": more(0.0, 6.0)}))
    text = memo_html(record)
    assert "Nothing can be said" in text
    assert "degrees of freedom" in text.split("Evidence")[0]


def test_confirmation_ranges_are_joint_prediction_intervals():
    study = _study(limits={"z": Limit(None, 13.0, "batch")}, goals=GOALS)
    record = _record(study)
    place = np.array(list(record.choice.setpoint.values()))
    f = np.r_[1.0, place, place**2, place[0] * place[1]]
    for name in ("y", "z"):
        model = record.models[name]
        h = f @ model.covariance @ f
        t = stats.t.ppf(1 - 0.05 / 4, model.df_residual)
        for n_runs, ends in (
            (1, record.choice.confirm[name].one),
            (3, record.choice.confirm[name].three),
        ):
            half = t * model.s * np.sqrt(h + 1 / n_runs)
            mean = f @ model.coefficients
            assert ends == pytest.approx((mean - half, mean + half), rel=1e-9)
