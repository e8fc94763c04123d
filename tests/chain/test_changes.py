"""What changed since an earlier record: every cause named, causes before answers."""

import copy
import json

import pytest

from wideberth.chain.as_json import dumps_record
from wideberth.chain.changes import changes, compared_with, read_earlier
from wideberth.errors import InputError
from wideberth.report.blocks import texts_of
from wideberth.report.memo import Aside, full_record, memo_of
from wideberth.report.since import since


@pytest.fixture(scope="module")
def now(small_record):
    return json.loads(dumps_record(full_record(small_record)))


def _earlier(now, change):
    record = copy.deepcopy(now)
    change(record)
    return record


def test_an_unchanged_record_has_no_changes(now):
    assert changes(now, now) == ()
    (heading, said) = since(compared_with(now, "ab" * 32, now), None)
    assert heading.text.startswith("What changed")
    assert said.text == "Held against the record abababababababab, nothing changed."


@pytest.mark.parametrize(
    ("change", "part", "what"),
    [
        (
            lambda r: r["study"]["responses"][0]["goal"].__setitem__("priority", 4.0),
            "goals and limits",
            "y.goal.priority",
        ),
        (
            lambda r: r["study"]["responses"][1].__setitem__("limit", None),
            "goals and limits",
            "z.limit",
        ),
        (
            lambda r: r["study"]["responses"].pop(0),
            "goals and limits",
            "y",
        ),
        (
            lambda r: r["study"]["factors"][1].__setitem__("tolerance", 0.2),
            "other statements",
            "factors.f1.tolerance",
        ),
        (
            lambda r: r["study"]["runs"]["measured"][2].__setitem__(1, 99.0),
            "data",
            "rows that read differently: 4",
        ),
        (
            lambda r: [
                column.pop()
                for column in r["study"]["runs"].values()
                if column and isinstance(column, list) and len(column) == 12
            ],
            "data",
            "number of runs",
        ),
        (lambda r: r["fit"]["y"].__setitem__("order", 1), "model", "y.order"),
        (lambda r: r.__setitem__("seed", 99), "how it was computed", "seed"),
        (
            lambda r: r["packages"].__setitem__("numpy", "1"),
            "how it was computed",
            "packages.numpy",
        ),
        (lambda r: r["recommend"].__setitem__("status", "conflict"), "answer", "status"),
        (lambda r: r["recommend"]["setpoint"].__setitem__("f0", 0.1), "answer", "setting.f0"),
        (
            lambda r: r["recommend"]["limits"][0].__setitem__("margin", 9.0),
            "answer",
            "margin.z high",
        ),
        (lambda r: r["window"]["settable"]["f0"].__setitem__(0, -9.0), "answer", "window.f0.low"),
    ],
)
def test_each_change_is_named_with_its_part(now, change, part, what):
    found = changes(_earlier(now, change), now)
    assert [(one.part, one.what) for one in found] == [(part, what)]


def test_titles_and_texts_are_no_change(now):
    def retitle(record):
        record["study"]["title"] = "another"
        record["study"]["context"]["revision"] = "Z"

    assert changes(_earlier(now, retitle), now) == ()


def test_the_memo_says_why_the_answer_changed(now, small_record):
    def differently(record):
        record["study"]["responses"][1]["limit"]["high"] = 12.5
        record["recommend"]["setpoint"]["f0"] = 0.5

    compared = compared_with(_earlier(now, differently), "0" * 64, now)
    aside = Aside(compared, 3)
    texts = list(texts_of(memo_of(small_record, aside).blocks))
    assert any("the answer changed, because of goals and limits." in text for text in texts)
    assert any("written with 3 different sets" in text for text in texts)
    at = texts.index("z limit high")
    assert texts[at - 1 : at + 3] == ["goals and limits", "z limit high", "12.5", "13"]
    assert full_record(small_record, aside)["compared"] == compared


def test_an_earlier_record_must_be_whole(now, tmp_path):
    path = tmp_path / "old.json"
    path.write_text(json.dumps(now), encoding="utf-8")
    assert read_earlier(path)[0] == now
    for part in ("fit", "recommend", "window"):
        for odd in (None, 3, {"y": 3}):
            broken = _earlier(now, lambda r, part=part, odd=odd: r.__setitem__(part, odd))
            path.write_text(json.dumps(broken), encoding="utf-8")
            with pytest.raises(InputError, match="no whole answer"):
                read_earlier(path)
