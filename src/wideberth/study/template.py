"""A new study folder: a commented ``study.toml`` and a run sheet to be filled in."""

from __future__ import annotations

from itertools import product
from pathlib import Path

from wideberth.errors import Fault, InputError, refusal

_STATEMENT = """\
# What you state. Lines that begin with # are remarks; take the # away to use a key.

[study]
title = "Wet granulation, first campaign"
runs  = "runs.csv"          # the run sheet beside this file

[context]                   # texts for the memo, all optional
product        = "Granulate G-1"
equipment      = "10 L high-shear mixer"
scale_run      = "2 kg"
scale_intended = "2 kg"
held_constant  = "one lot of lactose, chopper off"

# One table a factor. low and high are the two levels of the two-level part of your design
# (coded -1 and +1). allowed: never leave this range. tolerance: how tightly you hold it.
[factors.impeller]
unit          = "rpm"
low           = 250
high          = 450
allowed       = [200, 500]
tolerance     = 10
settable_step = 5

[factors.binder]
unit          = "g/min"
low           = 40
high          = 80
allowed       = [30, 90]
tolerance     = 2
settable_step = 1

# One table a response. A goal says what is wanted: desirability 0 at poor, 1 at ideal.
# A limit must hold, as surely as its guard says: "mean", "batch", "share" or "none".
[responses.fines]
unit  = "%"
goal  = { want = "less", poor = 20, ideal = 6 }
limit = { high = 18, guard = "batch" }

[responses.size]
unit  = "um"
goal  = { want = "near", poor = [250, 450], ideal = 350 }

# [responses.power]         # known exactly, not measured
# unit    = "W"
# formula = { constant = 20, impeller = 0.4 }
# goal    = { want = "less", poor = 230, ideal = 120 }

# [[constraints]]           # several factors together
# name    = "drive load"
# sum     = { impeller = 1.0, binder = 2.0 }
# at_most = 640

# [plan]                    # another design than the one in runs.csv: wideberth plan
# design   = "central composite"
# axial    = "face"
# error_sd = { fines = 0.8 }

# [blocks]                  # when the sheet has a block column
# future = "recur"

# [today]                   # where the plant runs now
# impeller = 300
# binder   = 50
"""


def start_study(directory: Path | str) -> tuple[Path, ...]:
    """Write a new study folder and return the files written.

    Raises
    ------
    RefusedError
        When the folder already holds a study; nothing is touched then.
    InputError
        When the folder cannot be written.
    """
    folder = Path(directory)
    files = {folder / "study.toml": _STATEMENT, folder / "runs.csv": template_sheet()}
    for path in files:
        if path.exists():
            raise refusal(f"{path.name} is already there", str(folder), "choose an empty folder")
    written: list[Path] = []
    try:
        folder.mkdir(parents=True, exist_ok=True)
        for path, text in files.items():
            with path.open("x", encoding="utf-8", newline="") as handle:
                written.append(path)
                handle.write(text)
    except OSError as error:
        for path in written:
            path.unlink(missing_ok=True)
        reason = (error.strerror or "cannot be written").lower()
        raise InputError(
            [Fault(f"the folder cannot be written: {reason}", str(folder), "choose another")]
        ) from error
    return tuple(files)


def template_sheet() -> str:
    """Lay out a two-factor central composite design with empty results."""
    corners = [(a, b, "factorial") for a, b in product((250, 450), (40, 80))]
    axial = [(210, 60, "axial"), (490, 60, "axial"), (350, 32, "axial"), (350, 88, "axial")]
    centre = [(350, 60, "centre")] * 5
    # an order drawn once, so that drift over the campaign does not look like an effect
    order = (9, 2, 6, 0, 11, 4, 3, 8, 7, 12, 1, 5, 10)
    runs = [(*corners, *axial, *centre)[place] for place in order]
    lines = ["run,impeller [rpm],binder [g/min],fines [%],size [um],kind,note"]
    lines += [f"{i},{a},{b},,,{kind}," for i, (a, b, kind) in enumerate(runs, start=1)]
    return "\n".join(lines) + "\n"
