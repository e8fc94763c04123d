"""Makes runs.csv from a stated truth and a seed. The data are invented."""

from __future__ import annotations

import csv
import io
import sys
from itertools import product
from pathlib import Path

import numpy as np

SEED = 3391
MIDDLE = np.array([2.4, 2.0, 40.0])
HALF = np.array([0.6, 0.6, 10.0])
ALPHA = 8**0.25
NOISE = {"flux": 1.6, "retention": 0.16}


def truth(x: np.ndarray) -> dict[str, float]:
    """The stated truth at coded pressure, crossflow and solids."""
    p, c, s = x
    return {
        "flux": 62.0
        + 4.0 * p
        + 11.0 * c
        - 6.5 * s
        - 3.0 * p * p
        - 0.9 * c * c
        - 0.6 * s * s
        + 2.4 * p * c
        - 0.8 * c * s,
        "retention": 98.7 - 0.25 * p + 0.05 * c - 0.10 * s - 0.06 * p * p - 0.05 * p * c,
    }


def design(random: np.random.Generator) -> list[tuple[str, np.ndarray]]:
    """A rotatable central composite design with six centre runs, shuffled."""
    runs = [("factorial", np.array(signs)) for signs in product((-1.0, 1.0), repeat=3)]
    runs += [("axial", sign * ALPHA * unit) for unit in np.eye(3) for sign in (-1.0, 1.0)]
    runs += [("centre", np.zeros(3))] * 6
    return [runs[i] for i in random.permutation(len(runs))]


def sheet() -> str:
    """Write the run sheet as text."""
    random = np.random.default_rng(SEED)
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    factors = ["pressure [bar]", "crossflow [m/s]", "solids [g/L]"]
    writer.writerow(["run", "kind", *factors, "flux [L/m2/h]", "retention [%]"])
    for number, (kind, x) in enumerate(design(random), start=1):
        actual = MIDDLE + HALF * x
        measured = {
            name: value + NOISE[name] * random.standard_normal() for name, value in truth(x).items()
        }
        settings = [f"{actual[0]:.2f}", f"{actual[1]:.2f}", f"{actual[2]:.1f}"]
        values = [f"{measured['flux']:.1f}", f"{measured['retention']:.2f}"]
        writer.writerow([number, kind, *settings, *values])
    return text.getvalue()


if __name__ == "__main__":
    target = Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).with_name("runs.csv")
    target.write_text(sheet(), encoding="utf-8")
