"""Makes runs.csv from a stated truth and a seed. The data are invented."""

from __future__ import annotations

import csv
import io
import sys
from itertools import product
from pathlib import Path

import numpy as np

SEED = 20260
MIDDLE = np.array([1.20, 8.0, 140.0])
HALF = np.array([0.40, 3.0, 30.0])
ALPHA = 8**0.25
NOISE = {"yield": 0.55, "hydroxylamine": 0.045, "heat_rate": 0.75}
REACTOR = {
    "R1": {"yield": 0.2, "hydroxylamine": -0.01, "heat_rate": 0.3},
    "R2": {"yield": -0.2, "hydroxylamine": 0.01, "heat_rate": -0.3},
}


def truth(x: np.ndarray) -> dict[str, float]:
    """The stated truth at coded catalyst, pressure and substrate."""
    c, p, s = x
    return {
        "yield": 92.5
        + 2.3 * c
        + 2.0 * p
        - 1.1 * s
        - 1.5 * c * c
        - 1.2 * p * p
        - 0.8 * s * s
        - 0.6 * c * p
        + 0.4 * p * s,
        "hydroxylamine": 0.62
        - 0.16 * c
        - 0.10 * p
        + 0.15 * s
        + 0.05 * c * c
        + 0.05 * p * p
        + 0.03 * s * s
        + 0.03 * c * s,
        "heat_rate": 33.0
        + 4.6 * c
        + 4.2 * p
        + 5.4 * s
        + 0.8 * c * c
        + 0.6 * p * p
        + 0.5 * s * s
        + 0.9 * c * p
        + 0.8 * c * s
        + 0.6 * p * s,
    }


def design(random: np.random.Generator) -> list[tuple[str, str, np.ndarray]]:
    """A rotatable central composite design, its two parts made in two reactors by halves."""
    corners = [np.array(signs) for signs in product((-1.0, 1.0), repeat=3)]
    # the three-factor product splits the corners into halves that leave every effect clear
    halves = {
        "R1": [x for x in corners if x.prod() > 0],
        "R2": [x for x in corners if x.prod() < 0],
    }
    axial = [sign * ALPHA * unit for unit in np.eye(3) for sign in (-1.0, 1.0)]
    runs = []
    for reactor, half in halves.items():
        block = [("factorial", x) for x in half] + [("axial", x) for x in axial]
        block += [("centre", np.zeros(3))] * 4
        order = random.permutation(len(block))
        runs += [(reactor, *block[i]) for i in order]
    return runs


def sheet() -> str:
    """Write the run sheet as text."""
    random = np.random.default_rng(SEED)
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(
        [
            "run",
            "block",
            "kind",
            "catalyst [wt%]",
            "pressure [bar]",
            "substrate [g/L]",
            "yield [%]",
            "hydroxylamine [%]",
            "heat_rate [W/kg]",
            "note",
        ]
    )
    for number, (reactor, kind, x) in enumerate(design(random), start=1):
        actual = MIDDLE + HALF * x
        measured = {
            name: value + REACTOR[reactor][name] + NOISE[name] * random.standard_normal()
            for name, value in truth(x).items()
        }
        missing = number == 17
        writer.writerow(
            [
                number,
                reactor,
                kind,
                f"{actual[0]:.3f}",
                f"{actual[1]:.2f}",
                f"{actual[2]:.1f}",
                f"{measured['yield']:.2f}",
                "" if missing else f"{measured['hydroxylamine']:.3f}",
                f"{measured['heat_rate']:.1f}",
                "sample vial broken" if missing else "",
            ]
        )
    return text.getvalue()


if __name__ == "__main__":
    target = Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).with_name("runs.csv")
    target.write_text(sheet(), encoding="utf-8")
