"""The memo: one file, nothing from outside, nothing interpreted, every status readable."""

import re
from dataclasses import replace

import numpy as np
import pytest

from support.build import central_composite, less, make_study, more, small_composite
from wideberth.chain.as_json import dumps_record, record_json
from wideberth.chain.files import write_all
from wideberth.chain.record import build_record
from wideberth.errors import InputError
from wideberth.report.memo import memo_html
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
    dumps_record(record_json(record))


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
    assert text.count('role="img" aria-label="') == text.count("<figure>") > 2
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
