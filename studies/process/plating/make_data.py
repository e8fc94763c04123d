"""Makes runs.csv from a stated truth and a seed. The data are invented."""

from __future__ import annotations

import csv
import io
import sys
from itertools import product
from pathlib import Path

import numpy as np

SEED = 7104
MIDDLE = np.array([2.5, 28.0, 6.0, 9.0])
HALF = np.array([1.0, 8.0, 0.6, 4.0])
NOISE = {"nickel_content": 0.22, "spread": 0.9, "stress": 4.0, "thickness": 0.25}


def truth(x: np.ndarray) -> dict[str, float]:
    """The stated truth at coded current density, nickel, pH and brightener."""
    i, n, p, b = x
    return {
        "nickel_content": 13.4
        - 0.9 * i
        + 1.6 * n
        + 0.7 * p
        - 0.3 * b
        + 0.5 * i * i
        - 0.4 * n * n
        + 0.3 * i * n,
        "spread": 17.0
        + 3.2 * i
        - 0.8 * n
        + 0.6 * p
        - 3.0 * b
        + 1.2 * i * i
        + 1.0 * b * b
        + 0.9 * i * b,
        "stress": 118.0
        + 10.0 * i
        + 6.0 * n
        - 4.0 * p
        + 15.0 * b
        + 3.5 * i * i
        + 4.0 * b * b
        + 2.5 * n * b,
        "thickness": 8.6 + 2.4 * i + 0.3 * n - 0.35 * i * i - 0.25 * b,
    }


def design(random: np.random.Generator) -> list[tuple[str, np.ndarray]]:
    """A face-centred central composite design in four factors with six centre runs, shuffled."""
    runs = [("factorial", np.array(signs)) for signs in product((-1.0, 1.0), repeat=4)]
    runs += [("axial", sign * unit) for unit in np.eye(4) for sign in (-1.0, 1.0)]
    runs += [("centre", np.zeros(4))] * 6
    return [runs[i] for i in random.permutation(len(runs))]


def sheet() -> str:
    """Write the run sheet as text."""
    random = np.random.default_rng(SEED)
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    factors = ["current_density [A/dm2]", "nickel [g/L]", "pH", "brightener [mL/L]"]
    responses = ["nickel_content [%]", "spread [%]", "stress [MPa]", "thickness [um]"]
    writer.writerow(["run", "kind", *factors, *responses])
    for number, (kind, x) in enumerate(design(random), start=1):
        actual = MIDDLE + HALF * x
        measured = {
            name: value + NOISE[name] * random.standard_normal() for name, value in truth(x).items()
        }
        settings = [f"{actual[0]:.1f}", f"{actual[1]:.0f}", f"{actual[2]:.1f}", f"{actual[3]:.0f}"]
        values = [
            f"{measured['nickel_content']:.2f}",
            f"{measured['spread']:.1f}",
            f"{measured['stress']:.0f}",
            f"{measured['thickness']:.2f}",
        ]
        writer.writerow([number, kind, *settings, *values])
    return text.getvalue()


if __name__ == "__main__":
    target = Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).with_name("runs.csv")
    target.write_text(sheet(), encoding="utf-8")
