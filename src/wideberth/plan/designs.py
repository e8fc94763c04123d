"""From what ``[plan]`` states to a design in coded units.

References
----------
Box and Wilson (1951), J. Royal Statistical Society B 13, 1-45 (central composite designs); Box and
Hunter (1957), Annals of Mathematical Statistics 28, 195-241 (rotatable distance, orthogonal
blocks). Both from memory. Three to five centre runs, looked at for curvature before axial runs are
added, is common practice.
"""

from __future__ import annotations

from itertools import product
from math import ceil, sqrt

import numpy as np

from wideberth.errors import Fault, InputError
from wideberth.plan.box_behnken import BLOCKS, CENTRE_RUNS, box_behnken
from wideberth.plan.quality import centre_and_corners
from wideberth.plan.records import Core, Design
from wideberth.plan.two_level import (
    ENOUGH,
    FRACTIONS,
    block_of_runs,
    core_runs,
    smallest_core,
    two_level_core,
)
from wideberth.study.records import CategoricalFactor, FloatArray, IntArray, PlanChoice, Study

_MOST_FACTORS = 8
_WHERE = "study.toml, plan"
_ENOUGH_CENTRE = 5


def build_design(study: Study, choice: PlanChoice) -> Design:
    """Lay out the stated design; optimal plans are built elsewhere.

    Raises
    ------
    InputError
        When there is no such design for the study's factors.
    """
    k = len(study.numeric)
    least, most = (3, 7) if choice.design == "box-behnken" else (1, _MOST_FACTORS)
    if not least <= k <= most:
        raise _no_design(
            f"a {choice.design} design is for {least} to {most} numeric factors; the study has {k}",
            "factors",
            "design = 'optimal' takes any number up to 8" if k else "use design = 'optimal'",
        )
    if choice.design == "box-behnken":
        built = _box_behnken(k, choice)
    elif choice.design == "two-level":
        built = _two_level(k, choice)
    else:
        built = _central_composite(k, choice)
    return _per_level(_shrunk(built, choice.shrink), study.categorical)


def _no_design(what: str, key: str, mend: str) -> InputError:
    return InputError([Fault(what, f"{_WHERE}.{key}" if key != "factors" else "study.toml", mend)])


def _shrunk(design: Design, shrink: float) -> Design:
    if shrink == 1.0:
        return design
    return _with(design, coded=design.coded * shrink)


def axial_block(study: Study, choice: PlanChoice) -> Design:
    """Lay out the axial runs that complete the two-level runs of a study's sheet, as one block.

    Raises
    ------
    InputError
        When the sheet holds no two-level runs, or axial runs already.
    """
    k, runs = len(study.numeric), study.runs
    centre, corner = (places[runs.fitted] for places in centre_and_corners(study))
    if k == 0 or not corner.any() or not (corner | centre).all():
        what = "the sheet does not hold two-level and centre runs alone"
        mend = "axial runs complete a two-level stage: plan one with design = 'two-level' first"
        raise InputError([Fault(what, runs.file, mend)])
    said: list[str] = []
    combinations = max(1, len(np.unique(runs.levels[runs.fitted], axis=0)))
    count = choice.centre_runs[1] if choice.centre_runs else _default_centre(2, said)
    axial = axial_distance(
        choice.axial,
        k,
        n_core=int(corner.sum()),
        n_axial=2 * k * combinations,
        centre_core=int(centre.sum()),
        centre_axial=count * combinations,
    )
    axial *= choice.shrink
    said.append(
        f"The axial distance is {axial:.3f} coded units for the {int(corner.sum())} two-level and"
        f" {int(centre.sum())} centre runs of the sheet."
    )
    parts = [(_arms(k, axial), "axial", 0), (np.zeros((count, k)), "centre", 0)]
    return _per_level(_stacked(parts, axial, None, said), study.categorical)


def _arms(k: int, axial: float) -> FloatArray:
    return np.concatenate([axial * np.eye(k)[j] * np.array([[-1.0], [1.0]]) for j in range(k)])


def _with(design: Design, **changes: FloatArray) -> Design:
    return Design(
        changes.get("coded", design.coded),
        design.levels,
        design.kind,
        design.block,
        design.n_blocks,
        design.axial_distance,
        design.core,
        design.said,
    )


def _stacked(
    parts: list[tuple[FloatArray, str, int]],
    axial: float | None,
    core: Core | None,
    said: list[str],
) -> Design:
    """Join (settings, kind, block) parts; within a block, in the order given."""
    coded = np.concatenate([rows for rows, _, _ in parts])
    block = np.concatenate([np.full(len(rows), b) for rows, _, b in parts]).astype(np.int64)
    kind = [k for rows, k, _ in parts for _ in range(len(rows))]
    order = np.argsort(block, kind="stable")
    return Design(
        coded=coded[order],
        levels=np.zeros((len(coded), 0), dtype=np.int64),
        kind=tuple(kind[i] for i in order),
        block=block[order],
        n_blocks=int(block.max()) + 1,
        axial_distance=axial,
        core=core,
        said=tuple(said),
    )


def _default_centre(n_blocks: int, said: list[str]) -> int:
    """Choose the centre runs of each block."""
    count = max(2, ceil(_ENOUGH_CENTRE / n_blocks)) if n_blocks > 1 else _ENOUGH_CENTRE
    why = (
        "five or more in the whole, at least two in each block, so that every block measures pure"
        " error"
        if n_blocks > 1
        else "so that pure error has four degrees of freedom and the variance at the centre is low"
    )
    said.append(f"{count} centre runs{' in each block' if n_blocks > 1 else ''} by default: {why}.")
    return count


def _core(k: int, choice: PlanChoice, said: list[str]) -> Core:
    if choice.core is None:
        core = smallest_core(k)
        if core.words:
            said.append(
                f"{len(core_runs(core))} of {2**k} two-level runs by default: the smallest fraction"
                f" of resolution V or better (here {_roman(core.resolution)}), which mixes up no"
                " two factors or products of two."
            )
        return core
    found = two_level_core(k, FRACTIONS[choice.core])
    if found is None or len(core_runs(found)) <= k:
        raise _no_design(
            f"{k} factors have no {choice.core} fraction that tells them apart",
            "core",
            "take a larger core",
        )
    weak = found.resolution is not None and found.resolution < ENOUGH
    if weak and choice.design == "central composite":
        smallest = smallest_core(k)
        names = {1 << i: name for name, i in FRACTIONS.items()}
        raise _no_design(
            f"the {choice.core} fraction of {k} factors has resolution {_roman(found.resolution)}:"
            " products of two factors would be mixed up",
            "core",
            f"a second-order model needs core = '{names[2**k // len(core_runs(smallest))]}'"
            " or larger",
        )
    return found


def _roman(resolution: int | None) -> str:
    return {None: "full", 3: "III", 4: "IV", 5: "V", 6: "VI", 7: "VII", 8: "VIII"}[resolution]


def _two_level_blocks(core: Core, n_blocks: int, least: int, extra: int) -> IntArray:
    """Divide the core into blocks, or say which numbers of blocks there are."""
    halvings = n_blocks.bit_length() - 1
    if n_blocks == 1 << halvings:
        found = block_of_runs(core, halvings, least=least)
        if found is not None:
            return found
    possible = [
        str((1 << h) + extra) for h in range(5) if block_of_runs(core, h, least=least) is not None
    ]
    raise _no_design(
        f"the design does not divide into {n_blocks + extra} blocks that leave"
        f" {'factors and products of two' if least == 3 else 'the factors'} alone",
        "blocks",
        f"use {' or '.join(possible[:4])}" + (", or 1 without blocks" if extra else ""),
    )


def _two_level(k: int, choice: PlanChoice) -> Design:
    said: list[str] = []
    core = _core(k, choice, said)
    runs = np.repeat(core_runs(core), choice.replicates, axis=0)
    block = np.repeat(
        _two_level_blocks(core, choice.blocks, 2 if choice.blocks > 1 else 1, 0), choice.replicates
    )
    count = choice.centre_runs[0] if choice.centre_runs else _default_centre(choice.blocks, said)
    parts = [(runs[block == b], "factorial", b) for b in range(choice.blocks)]
    parts += [(np.zeros((count, k)), "centre", b) for b in range(choice.blocks)]
    return _stacked(parts, None, core, said)


def _central_composite(k: int, choice: PlanChoice) -> Design:
    said: list[str] = []
    core = _core(k, choice, said)
    corners = core_runs(core)
    parts_of_core = max(choice.blocks - 1, 1)
    block = _two_level_blocks(core, parts_of_core, 3, 1 if choice.blocks > 1 else 0)
    count, count_axial = choice.centre_runs or (_default_centre(choice.blocks, said),) * 2
    n_core = len(corners) * choice.replicates
    axial = axial_distance(
        choice.axial,
        k,
        n_core=n_core,
        n_axial=2 * k * choice.replicates,
        centre_core=count * parts_of_core,
        centre_axial=count_axial if choice.blocks > 1 else None,
    )
    arms = _arms(k, axial)
    parts: list[tuple[FloatArray, str, int]] = []
    for b in range(parts_of_core):
        parts.append((np.repeat(corners[block == b], choice.replicates, axis=0), "factorial", b))
        parts.append((np.zeros((count, k)), "centre", b))
    last = parts_of_core if choice.blocks > 1 else 0
    parts.append((np.repeat(arms, choice.replicates, axis=0), "axial", last))
    if choice.blocks > 1:
        parts.append((np.zeros((count_axial, k)), "centre", last))
        if choice.axial != "orthogonal-blocks":
            said.append(
                "The axial distance was not chosen for the blocks; axial = 'orthogonal-blocks'"
                " makes block differences and factor effects independent."
            )
    return _stacked(parts, axial, core, said)


def axial_distance(
    stated: str | float,
    n_factors: int,
    *,
    n_core: int,
    n_axial: int,
    centre_core: int = 0,
    centre_axial: int | None = None,
) -> float:
    """Give the coded distance of the axial runs.

    Parameters
    ----------
    stated : str or float
        ``rotatable``: fourth root of the two-level runs for each run on an axis, ``spherical``:
        the corners' distance, ``face``: 1, ``orthogonal-blocks``: the sums of squares in proportion
        to the block sizes, or a number.
    n_core, n_axial : int
        Two-level and axial runs, replicates included.
    centre_core, centre_axial : int
        Centre runs in all two-level blocks together and in the axial block (``None``: one block).

    Raises
    ------
    InputError
        When orthogonal blocks are asked for in a single block.
    """
    if not isinstance(stated, str):
        return float(stated)
    # replicates count on both sides: sum of x^4 is 3 times that of x^2 y^2
    per_arm = n_axial / (2 * n_factors)
    if stated == "rotatable":
        return float((n_core / per_arm) ** 0.25)
    if stated == "spherical":
        return sqrt(n_factors)
    if stated == "face":
        return 1.0
    if centre_axial is None:
        raise _no_design(
            "orthogonal blocks are asked for, but the design stands in one block",
            "axial",
            "state blocks = 2 (two-level runs, then axial runs) or more",
        )
    share = (n_axial + centre_axial) / (n_core + centre_core)
    return sqrt(n_core * share / (2 * per_arm))


def _box_behnken(k: int, choice: PlanChoice) -> Design:
    said: list[str] = []
    if choice.blocks not in (1, BLOCKS[k]):
        raise _no_design(
            f"a box-behnken design for {k} factors does not divide into {choice.blocks} blocks",
            "blocks",
            f"use {' or '.join(str(b) for b in sorted({1, BLOCKS[k]}))}",
        )
    edges, block = box_behnken(k, choice.blocks)
    if choice.centre_runs:
        count = choice.centre_runs[0]
    else:
        count = max(CENTRE_RUNS[k] // choice.blocks, 2 if choice.blocks > 1 else 1)
        said.append(
            f"{count} centre runs{' in each block' if choice.blocks > 1 else ''} by default:"
            " as published, but at least two where a block must measure pure error."
        )
    parts: list[tuple[FloatArray, str, int]] = []
    for b in range(choice.blocks):
        parts.append((np.repeat(edges[block == b], choice.replicates, axis=0), "factorial", b))
        parts.append((np.zeros((count, k)), "centre", b))
    return _stacked(parts, None, None, said)


def _per_level(design: Design, categorical: tuple[CategoricalFactor, ...]) -> Design:
    """Repeat the whole design at every combination of levels, inside each block."""
    if not categorical:
        return design
    combinations = np.array(list(product(*(range(len(f.levels)) for f in categorical))))
    m, n = len(combinations), len(design.coded)
    levels = np.tile(combinations, (n, 1)).astype(np.int64)
    said = f"The whole design at each of {m} combinations of levels; an optimal plan needs fewer."
    return Design(
        coded=np.repeat(design.coded, m, axis=0),
        levels=levels,
        kind=tuple(kind for kind in design.kind for _ in range(m)),
        block=np.repeat(design.block, m),
        n_blocks=design.n_blocks,
        axial_distance=design.axial_distance,
        core=design.core,
        said=(*design.said, said),
    )
