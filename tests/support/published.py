"""Published reference values: each check with its source, value and tolerance.

``checks.toml`` names for every item where its figures come from; ``tol`` follows from the printed
digits.
"""

from __future__ import annotations

import csv
import tomllib
from pathlib import Path

import numpy as np

FOLDER = Path(__file__).parents[1] / "published"


def item(name: str) -> dict:
    """Give one item of the reference file."""
    content = tomllib.loads((FOLDER / "checks.toml").read_text(encoding="utf-8"))
    return next(entry for entry in content["item"] if entry["id"] == name)


def checks(name: str) -> dict[str, dict]:
    """Give the checks of one item by their names."""
    return {check["name"]: check for check in item(name)["check"]}


def columns(file: str) -> dict[str, np.ndarray]:
    """Read a data file as columns of numbers."""
    with (FOLDER / file).open(encoding="utf-8") as handle:
        rows = list(csv.DictReader(handle))
    return {key: np.array([float(row[key]) for row in rows]) for key in rows[0]}


def agrees(value: float, check: dict, *, spoiled: bool = False) -> bool:
    """Tell whether a value agrees with a check, or with the check spoiled by 3 tolerances."""
    tolerance = check["tol"] if "tol" in check else check["rel_tol"] * abs(check["value"])
    target = check["value"] + (3 * tolerance if spoiled else 0.0)
    return abs(value - target) <= tolerance
