"""Studies whose records the tests of memo and replay read: small, and as nasty as names can be."""

from dataclasses import replace

import numpy as np

from support.build import central_composite, less, make_study, more
from wideberth.chain.record import build_record
from wideberth.study.records import Context, Limit

NASTY = (
    "a b.c",
    "Größe-ß ΔΨ µ",
    "<b>x & y</b>",
    "$sum_(i=1)^n$ *strong* _it_",
    '#let x = "1"; #panic() \\ @ref <label>',
    "{{ 7 + 7 }} {% raw %}",
    "粘度 粘着力 점도",
    "W" * 70,
    "-- - + = 1. /* c */ // d",
    "'single' \"double\" `tick`",
    "x²₃ ≤ 5 °C",
    "😀 emoji",
)


def nasty_record():
    """Twelve responses whose names look like markup, two factors alike, a title that attacks."""
    x = central_composite(2)
    rng = np.random.default_rng(1)
    base = 20 + 3 * x[:, 0] - (x**2).sum(axis=1)
    values = {name: base + 0.2 * rng.standard_normal(len(x)) for name in NASTY}
    study = make_study(
        x,
        values,
        names=("#eval(1) Ω*_", "]] 温度"),
        goals={NASTY[0]: more(10.0, 25.0), NASTY[1]: less(25.0, 10.0)},
        limits={NASTY[2]: Limit(12.0, None, "batch"), NASTY[6]: Limit(11.0, None, "batch")},
        units={NASTY[2]: "<i>µm</i>", NASTY[3]: "#x[y]"},
        tolerance=0.05,
    )
    context = Context(document='D-7 #1 "q" \x07 </style>', revision="B", date="2026-03-04")
    study = replace(study, title="<script>alert(1)</script> #panic() {{ 1 }}", context=context)
    return build_record(study, n_draws=300)


def small_record():
    """Two factors, two measured responses and an exact one, today's setting, tolerances, steps."""
    x = central_composite(2)
    rng = np.random.default_rng(3)
    y = 20 + 3 * x[:, 0] - (x**2).sum(axis=1) + 0.2 * rng.standard_normal(len(x))
    z = 10 + 2 * x[:, 0] + 0.2 * rng.standard_normal(len(x))
    study = make_study(
        x,
        {"y": y, "z": z},
        goals={"y": more(10.0, 25.0)},
        limits={"z": Limit(None, 13.0, "share")},
        formulas={"cost": {(): 5.0, ("f0",): 0.5}},
        tolerance=0.1,
        step="0.05",
    )
    today = {"f0": 0.0, "f1": 0.0}
    return build_record(replace(study, today=today), n_draws=300)
