"""Invented data of the emulsion study: the sheets that `plan` and `next` write, filled in.

python studies/process/emulsion/make_data.py writes runs.csv (the two-level stage) and
both-stages.csv (the axial runs as well).
"""

import csv
import io
import shutil
import tempfile
from pathlib import Path

import numpy as np

from wideberth.chain.plan_files import write_plan
from wideberth.plan.plan import plan_runs
from wideberth.study.reading import read_draft

FOLDER = Path(__file__).parent
MIDDLE = np.array([300.0, 3.0, 20.0])
HALF = np.array([100.0, 1.0, 5.0])
NOISE = {"droplet": 0.06, "free_oil": 0.15, "seal": 0.8}
STAGE = {"2": {"droplet": 0.05, "free_oil": 0.1, "seal": 0.5}}
DIGITS = {"droplet": 2, "free_oil": 2, "seal": 1}
AXIAL = {"design": "central composite", "axial": 1.7}
"""How stage two was run: drawn in, because of the seal."""


def truth(x):
    """Means at coded settings, shape (3,)."""
    p, e, o = x
    return {
        "droplet": 1.15
        - 0.22 * p
        - 0.16 * e
        + 0.12 * o
        + 0.20 * p * p
        + 0.10 * e * e
        + 0.05 * p * e,
        "free_oil": 2.0
        - 0.25 * p
        - 0.30 * e
        + 0.45 * o
        + 0.35 * p * p
        + 0.15 * e * e
        + 0.10 * o * o,
        "seal": 60.0 + 9.0 * p + 2.0 * o + 1.0 * p * p,
    }


def filled(text, random):
    """Fill the empty cells of a sheet with the truth plus noise."""
    rows = list(csv.reader(io.StringIO(text)))
    heads = [heading.split(" [")[0] for heading in rows[0]]
    for row in rows[1:]:
        if row[heads.index("droplet")]:
            continue
        setting = [float(row[heads.index(name)]) for name in ("pressure", "emulsifier", "oil")]
        means = truth((np.array(setting) - MIDDLE) / HALF)
        off = STAGE.get(row[heads.index("block")], {})
        for name, mean in means.items():
            value = mean + off.get(name, 0.0) + NOISE[name] * random.standard_normal()
            row[heads.index(name)] = f"{value:.{DIGITS[name]}f}"
    target = io.StringIO()
    csv.writer(target, lineterminator="\n").writerows(rows)
    return target.getvalue()


def sheets():
    """Give the finished two-level stage and the sheet with both stages, as texts."""
    random = np.random.default_rng(20)
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        shutil.copy(FOLDER / "study.toml", folder)
        write_plan(plan_runs(read_draft(folder)))
        sheet = folder / "runs.csv"
        first = filled(sheet.read_text(encoding="utf-8"), random)
        sheet.write_text(first, encoding="utf-8")
        write_plan(plan_runs(read_draft(folder, AXIAL), append=True, axial_only=True), append=True)
        return first, filled(sheet.read_text(encoding="utf-8"), random)


if __name__ == "__main__":
    for file, text in zip(("runs.csv", "both-stages.csv"), sheets(), strict=True):
        (FOLDER / file).write_text(text, encoding="utf-8")
