"""Line numbers of keys, doubtful statements, and the template of a new study."""

import tomllib

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from support.build import central_composite, make_study, more
from wideberth.errors import InputError, RefusedError
from wideberth.study.checking import check_study
from wideberth.study.coding import to_actual, to_coded
from wideberth.study.lines import key_lines
from wideberth.study.reading import read_study
from wideberth.study.records import Limit, NumericFactor
from wideberth.study.template import start_study

TEXT = '''\
# remark
a = 1
"b c".d = [1,
  { e = 2 },  # more
]
[t.u]
v = """
x = 3
"""
w = { x = "}", y = [ "[" ] }
[[list]]
n = 1
[[list]]
n = 2
[list.sub]
o = 'it\\'
'''


def test_lines_of_every_kind_of_key():
    tomllib.loads(TEXT)
    lines = key_lines(TEXT)
    expected = {
        ("a",): 2,
        ("b c", "d"): 3,
        ("b c", "d", 1, "e"): 4,
        ("t", "u"): 6,
        ("t", "u", "v"): 7,
        ("t", "u", "w", "y"): 10,
        ("list", 0, "n"): 12,
        ("list", 1, "n"): 14,
        ("list", 1, "sub", "o"): 16,
    }
    assert {path: lines[path] for path in expected} == expected


KEYS = st.text("ab_-1", min_size=1, max_size=3)
VALUES = st.recursive(
    st.one_of(st.integers(), st.sampled_from(['"x # ["', "'='", '"""\ny\n"""', "1.5", "true"])),
    lambda inner: st.one_of(
        st.lists(inner, max_size=3).map(lambda v: "[" + ", ".join(map(str, v)) + "]"),
        st.dictionaries(KEYS, inner, max_size=3).map(
            lambda d: (
                "{" + ", ".join(f"{k} = {v}" for k, v in d.items() if "\n" not in str(v)) + "}"
            )
        ),
    ),
    max_leaves=6,
)


@settings(max_examples=150, deadline=None)
@given(tables=st.dictionaries(KEYS, st.dictionaries(KEYS, VALUES, max_size=4), max_size=4))
def test_lines_of_generated_documents(tables):
    text, expected = "", {}
    for table, pairs in tables.items():
        text += f"[{table}]\n"
        for key, value in pairs.items():
            expected[(table, key)] = text.count("\n") + 1
            text += f"{key} = {value}  # remark [x]\n"
    tomllib.loads(text)
    lines = key_lines(text)
    assert {path: lines[path] for path in expected} == expected


def _doubts(study):
    return " ".join(finding.text for finding in check_study(study))


def _values():
    return {"y": np.linspace(10, 20, 12)}


def test_a_clean_study_has_no_doubts():
    assert check_study(make_study(central_composite(2), _values())) == ()


@pytest.mark.parametrize(
    ("kwargs", "said"),
    [
        ({"limits": {"y": Limit(50.0, None, "batch")}}, "above every measured value"),
        ({"limits": {"y": Limit(None, 2.0, "batch")}}, "below every measured value"),
        (
            {"limits": {"y": Limit(None, 12.0, "batch")}, "goals": {"y": more(5.0, 30.0)}},
            "breaks its own limit",
        ),
        ({"tolerance": 1.5}, "spans all of"),
        ({"low": (90, 90), "high": (110, 110)}, "look coded"),
        ({"allowed": {"f0": (-9.0, 9.0)}}, "far beyond"),
    ],
)
def test_doubtful_statements(kwargs, said):
    assert said in _doubts(make_study(central_composite(2), _values(), **kwargs))


def test_doubtful_runs():
    x = central_composite(2)
    together = np.column_stack([x, x[:, 0] * 2])
    assert "always moved together" in _doubts(make_study(together, _values()))
    still = np.column_stack([x, np.ones(12)])
    assert "every run was made at 1" in _doubts(make_study(still, _values()))
    parts = np.abs(np.random.default_rng(0).standard_normal((12, 3)))
    parts /= parts.sum(axis=1)[:, None]
    assert "always sum to 1" in _doubts(make_study(parts, _values()))
    far = x + np.arange(12)[:, None] * 0.01
    far[3, 0] = 9.0
    assert "reaches out alone at the highest" in _doubts(make_study(far, _values()))


def test_template_passes_once_runs_are_filled_in(tmp_path):
    files = start_study(tmp_path / "new")
    assert [path.name for path in files] == ["study.toml", "runs.csv"]
    with pytest.raises(InputError, match="no run has a value of fines"):
        read_study(tmp_path / "new")
    sheet = files[1].read_text()
    rng = np.random.default_rng(0)
    filled = []
    for line in sheet.strip().split("\n")[1:]:
        cells = line.split(",")
        cells[3:5] = [f"{10 + rng.normal():.1f}", f"{350 + 20 * rng.normal():.0f}"]
        filled.append(",".join(cells))
    files[1].write_text(sheet.split("\n", maxsplit=1)[0] + "\n" + "\n".join(filled))
    assert check_study(read_study(tmp_path / "new")) == ()
    with pytest.raises(RefusedError, match="already there"):
        start_study(tmp_path / "new")
    (tmp_path / "file").write_text("")
    with pytest.raises(InputError, match="cannot be written"):
        start_study(tmp_path / "file" / "below")


def test_coding_there_and_back():
    factors = (
        NumericFactor("a", "u", 2.0, 6.0),
        NumericFactor("b", "u", 1.0, 100.0, scale="log"),
    )
    assert to_coded(factors, [[2.0, 1.0], [4.0, 10.0], [6.0, 100.0]]) == pytest.approx(
        np.array([[-1, -1], [0, 0], [1, 1]])
    )
    x = np.random.default_rng(0).standard_normal((5, 2))
    assert to_coded(factors, to_actual(factors, x)) == pytest.approx(x)
