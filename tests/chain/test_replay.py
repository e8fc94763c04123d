"""A record read back and computed again; the published shape; files whole whatever happens."""

import copy
import json
import subprocess
import sys
import time
from pathlib import Path

import jsonschema
import numpy as np
import pytest

from wideberth.chain.as_json import dumps_record, study_json
from wideberth.chain.from_json import read_record, study_of
from wideberth.chain.record import build_record
from wideberth.chain.replay import compare
from wideberth.chain.schema import record_schema
from wideberth.errors import InputError
from wideberth.report.memo import full_record
from wideberth.study.reading import read_study

ROOT = Path(__file__).parents[2]
PUBLISHED = ROOT / "docs" / "record.schema.json"
STUDIES = sorted(path.parent for path in (ROOT / "studies" / "process").glob("*/study.toml"))


@pytest.fixture(scope="module")
def written(small_record):
    return json.loads(dumps_record(full_record(small_record)))


def test_a_record_computed_again_from_its_own_study_has_the_same_bits(written, tmp_path):
    path = tmp_path / "record.json"
    path.write_text(json.dumps(written), encoding="utf-8")
    record = read_record(path)
    again = build_record(study_of(record, path), seed=record["seed"], n_draws=record["draws"])
    assert dumps_record(full_record(again)) == dumps_record(record)
    assert compare(record, full_record(again), tmp_path).outcome == "same bits"


@pytest.mark.parametrize("folder", STUDIES, ids=lambda p: p.name)
def test_every_study_comes_back_as_it_was(folder):
    study = read_study(folder)
    stated = json.loads(dumps_record(_study_json(study)))
    back = study_of({"study": stated["study"], "sha256": study.sha256}, folder / "record.json")
    assert json.loads(dumps_record(_study_json(back))) == stated
    for name in ("factors", "responses", "constraints", "context", "today", "notes", "region"):
        assert getattr(back, name) == getattr(study, name)
    for name in ("numeric_actual", "levels", "measured", "block"):
        one, other = getattr(back.runs, name), getattr(study.runs, name)
        assert one.dtype == other.dtype
        np.testing.assert_array_equal(one, other)


def _study_json(study):

    return {"study": study_json(study)}


def _changed(record, change):
    other = copy.deepcopy(record)
    change(other)
    return other


def test_the_first_number_that_differs_is_named(written, tmp_path):
    def tamper(record):
        record["fit"]["y"]["coefficients"][1]["coded"] *= 1 + 1e-6
        record["window"]["relative_volume"] *= 1.5

    answer = compare(_changed(written, tamper), written, tmp_path)
    assert answer.outcome == "differs"
    assert answer.first.place == "fit.y.coefficients[1].coded"
    assert answer.first.now == written["fit"]["y"]["coefficients"][1]["coded"]


def test_other_last_bits_are_the_same_printed_digits(written, tmp_path):
    def nudge(record):
        record["fit"]["y"]["s"] *= 1 + 1e-13

    answer = compare(_changed(written, nudge), written, tmp_path)
    assert answer.outcome == "same printed digits"
    assert answer.first.place == "fit.y.s"


@pytest.mark.parametrize(
    ("change", "place"),
    [
        (lambda r: r["printed"].__setitem__(3, "another word"), "printed[3]"),
        (lambda r: r["recommend"].__setitem__("status", "conflict"), "recommend.status"),
        (lambda r: r["maps"].pop(), "maps"),
        (lambda r: r.__setitem__("window", None), "window"),
        (lambda r: r["study"]["runs"]["measured"][0].__setitem__(0, None), None),
    ],
)
def test_words_statuses_and_missing_parts_count_too(written, tmp_path, change, place):
    answer = compare(_changed(written, change), written, tmp_path)
    assert answer.outcome == "differs"
    assert answer.first.place == (place or "study.runs.measured[0][0]")


def test_other_packages_are_said_but_are_no_difference(written, tmp_path):
    def elsewhere(record):
        record["packages"]["numpy"] = "1.0"

    answer = compare(_changed(written, elsewhere), written, tmp_path)
    assert answer.outcome == "same bits"
    assert [one.place for one in answer.made_elsewhere] == ["packages.numpy"]


def test_inputs_beside_the_record_are_held_against_their_hashes(written, tmp_path):
    record = {**written, "sha256": {"study.toml": "0" * 64, "../runs.csv": "0" * 64, "study": "x"}}
    (tmp_path / "study.toml").write_text("changed", encoding="utf-8")
    found = compare(record, record, tmp_path).inputs
    assert found == {"study.toml": "differs", "../runs.csv": "not found"}


@pytest.mark.parametrize("key", ["factors", "runs", "responses", "region"])
def test_a_study_that_is_not_whole_is_refused(written, key):
    for broken in (None, 3, [[]], {"name": 1}):
        record = _changed(written, lambda r, broken=broken: r["study"].__setitem__(key, broken))
        with pytest.raises(InputError, match="not whole"):
            study_of(record, Path("record.json"))
    record = _changed(written, lambda r: r["study"].pop(key))
    with pytest.raises(InputError, match="not whole"):
        study_of(record, Path("record.json"))


@pytest.mark.parametrize(
    ("change", "word"),
    [
        (lambda s: s["factors"][0].__setitem__("low", "x"), "float"),
        (lambda s: s["factors"][0].__setitem__("low", True), "float"),
        (lambda s: s["responses"][0]["goal"].__setitem__("want", "much"), "none of more"),
        (lambda s: s["runs"].__setitem__("numeric_actual", [[1.0], [1.0, 2.0]]), "shape"),
        (lambda s: s.__setitem__("seed", 1.5), "int"),
        (lambda s: s.__setitem__("colour", "red"), "colour"),
    ],
)
def test_a_value_of_the_wrong_kind_is_refused_with_its_kind(written, change, word):
    with pytest.raises(InputError, match=word):
        study_of(_changed(written, lambda r: change(r["study"])), Path("record.json"))


def test_the_published_schema_is_the_one_that_is_written():
    published = json.loads(PUBLISHED.read_text(encoding="utf-8"))
    jsonschema.Draft202012Validator.check_schema(published)
    again = "python -m wideberth.chain.schema > docs/record.schema.json"
    assert published == record_schema(), f"write it anew: {again}"


def test_records_have_the_published_shape_and_strangers_have_not(written, nasty_record):
    schema = json.loads(PUBLISHED.read_text(encoding="utf-8"))
    validator = jsonschema.Draft202012Validator(schema)
    assert validator.is_valid(written)
    assert validator.is_valid(json.loads(dumps_record(full_record(nasty_record))))
    for change in (
        lambda r: r.__setitem__("more", 1),
        lambda r: r["recommend"].__setitem__("status", "perfect"),
        lambda r: r["fit"]["y"].pop("s"),
        lambda r: r["robustness"]["responses"]["y"].__setitem__("shift", "small"),
    ):
        assert not validator.is_valid(_changed(written, change))


def test_a_kill_at_any_moment_leaves_every_file_whole(tmp_path):
    size = 200_000
    code = (
        "from pathlib import Path\nfrom wideberth.chain.files import write_all\n"
        f"folder = Path({str(tmp_path)!r})\n"
        "for letter in 'ab' * 100000:\n"
        f"    write_all({{folder / name: letter.encode() * {size} for name in ('one', 'two')}})\n"
    )
    for attempt in range(8):
        child = subprocess.Popen([sys.executable, "-c", code])
        until = time.monotonic() + 20
        while attempt == 0 and not (tmp_path / "two").exists() and time.monotonic() < until:
            time.sleep(0.01)
        time.sleep(0.15 + 0.013 * attempt)
        child.kill()
        child.wait()
        for name in ("one", "two"):
            content = (tmp_path / name).read_bytes()
            assert len(content) == size
            assert len(set(content)) == 1
