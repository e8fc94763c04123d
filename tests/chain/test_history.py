"""The history file: every set kept once in a row, every change by hand seen."""

from dataclasses import replace

import numpy as np
import pytest

from support.build import central_composite, make_study, more
from wideberth.chain.history import read_history, tried_with
from wideberth.errors import InputError
from wideberth.study.records import Limit


def _study(**changes):
    x = central_composite(2)
    study = make_study(x, {"y": np.arange(12.0)}, goals={"y": more(0.0, 9.0)})
    return replace(study, **changes)


def _with(study, **changes):
    return replace(study, responses=(replace(study.responses[0], **changes),))


def test_an_unchanged_rerun_adds_nothing():
    n, lines = tried_with(_study(), 1, b"")
    assert n == 1
    assert tried_with(_study(title="other words"), 1, lines) == (1, lines)


def test_every_goal_limit_order_run_and_seed_counts_and_going_back_does_not():
    study, past, count = _study(), b"", 0
    runs = study.runs
    failed = replace(runs, kind=("failed", *runs.kind[1:]))
    for changed, seed in (
        (study, 1),
        (_with(study, goal=more(0.0, 8.0)), 1),
        (_with(study, limit=Limit(1.0, None, "batch")), 1),
        (_with(study, order=1), 1),
        (replace(study, runs=failed), 1),
        (replace(study, sha256={"runs.csv": "0" * 64}), 1),
        (study, 2),
    ):
        n, longer = tried_with(changed, seed, past)
        count += 1
        assert n == count
        assert longer.startswith(past)
        assert longer.count(b"\n") == count
        past = longer
    n, longer = tried_with(study, 1, past)
    assert n == count
    assert longer.count(b"\n") == count + 1


@pytest.mark.parametrize(
    "spoil",
    [
        lambda lines: [lines[0].replace(b"8.0", b"7.0"), *lines[1:]],
        lambda lines: [*lines[:2], lines[2].replace(b"7.0", b"6.0")],
        lambda lines: lines[1:],
        lambda lines: [lines[0], *lines[2:]],
        lambda lines: [lines[1], lines[0], *lines[2:]],
        lambda lines: [*lines[:2], b"not JSON\n"],
        lambda lines: [*lines[:2], b"[]\n"],
        lambda lines: [*lines[:2], lines[2].rstrip()],
    ],
)
def test_a_line_changed_moved_or_taken_out_is_seen(spoil):
    past = b""
    for ideal in (8.0, 7.5, 7.0):
        _, past = tried_with(_with(_study(), goal=more(0.0, ideal)), 1, past)
    lines = past.splitlines(keepends=True)
    with pytest.raises(InputError, match=r"history\.jsonl line"):
        tried_with(_study(), 1, b"".join(spoil(lines)))


def test_a_folder_without_history_has_none(tmp_path):
    assert read_history(tmp_path) == b""
