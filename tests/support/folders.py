"""Study folders on disk for tests of reading and of the doors."""

from __future__ import annotations

from pathlib import Path

STATEMENT = """\
[study]
title = "Coating"
runs = "runs.csv"
seed = 4
[factors."drum speed"]
unit = "rpm"
low = 8
high = 12
tolerance = 0.2
allowed = [7, 13]
settable_step = 0.5
[factors."Sprührate"]
unit = "g/min"
low = 20
high = 30
[responses.defects]
unit = "%"
goal = { want = "less", poor = 9, ideal = 2 }
limit = { high = 10 }
[responses.gloss]
unit = "GU"
goal = { want = "near", poor = [50, 70], ideal = [60, 62], exponent = [1, 2] }
[responses.cost]
unit = "EUR"
formula = { constant = 5, "drum speed" = 0.5, "Sprührate^2" = 0.1, "drum speed*Sprührate" = 0.2 }
limit = { high = 99 }
[[constraints]]
name = "load"
sum = { "drum speed" = 1.0, "Sprührate" = 0.5 }
at_most = 30
[region]
keep = "explored"
[today]
"drum speed" = 9
"""

SHEET = """\
drum speed [rpm],Sprührate,kind,defects,gloss
8,20,factorial,4.1,60
12,20,factorial,5.2,61
8,30,factorial,6.0,59
12,30,factorial,7.1,
10,25,centre,5.0,62
10,25,centre,5.1,61.5
10,25,confirm,,
"""


def write_study(folder: Path, statement: str = STATEMENT, sheet: str = SHEET) -> Path:
    """Write a study folder and give it back."""
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "study.toml").write_text(statement, encoding="utf-8", newline="")
    (folder / "runs.csv").write_text(sheet, encoding="utf-8", newline="")
    return folder
