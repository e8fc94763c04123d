"""Laying out a design with the settings that would be run, each checked.

Planning and its ways out are the same steps with another choice.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from wideberth.errors import Fault, InputError
from wideberth.plan.designs import axial_block, build_design
from wideberth.plan.model import with_runs
from wideberth.plan.optimal import optimal_design
from wideberth.plan.records import Certificate, Design
from wideberth.plan.safety import Earlier, offences
from wideberth.plan.settings import settable
from wideberth.study.records import FloatArray, PlanChoice, Study


@dataclass(frozen=True, slots=True, eq=False)
class Laid:
    """A design with its settings, before it is judged."""

    choice: PlanChoice
    design: Design
    certificate: Certificate | None
    blocks: tuple[str, ...]
    actual: FloatArray
    offences: tuple[tuple[str, ...], ...]
    fitted: Study


@dataclass(frozen=True, slots=True, eq=False)
class Builder:
    """Lays out one choice after another for the same study."""

    study: Study
    earlier: Earlier | None
    seed: int
    axial_only: bool

    def lay_out(self, choice: PlanChoice) -> Laid:
        """Build the design, round it to what can be set, and check every run.

        Raises
        ------
        InputError
            When there is no such design, or the settable steps swallow some of its settings.
        """
        study = self.study
        names = _block_names(study, choice.blocks)
        certificate = None
        if choice.design == "optimal":
            design, certificate = optimal_design(study, choice, self.earlier, names, seed=self.seed)
        elif self.axial_only:
            design = axial_block(study, choice)
        else:
            design = build_design(study, choice)
        actual = settable(study.numeric, design.coded)
        _check_steps(study, design, actual)
        fitted = with_runs(
            study, actual, design.levels, tuple(names[b] for b in design.block), design.kind
        )
        reasons = offences(study, self.earlier, actual, design.levels)
        return Laid(choice, design, certificate, names, actual, reasons, fitted)


def _block_names(study: Study, n: int) -> tuple[str, ...]:
    """Go on numbering from the blocks that the sheet has."""
    taken, number = set(study.runs.blocks), len(study.runs.blocks)
    names: list[str] = []
    while len(names) < n:
        number += 1
        if str(number) not in taken:
            names.append(str(number))
    return tuple(names)


def _check_steps(study: Study, design: Design, actual: FloatArray) -> None:
    faults = []
    for j, factor in enumerate(study.numeric):
        wanted = len(np.unique(np.round(design.coded[:, j], 9)))
        there = len(np.unique(actual[:, j]))
        if there < wanted:
            faults.append(
                Fault(
                    f"the step {factor.settable_step} {factor.unit} leaves {there} of"
                    f" {wanted} different settings of {factor.name}",
                    f"study.toml, factors.{factor.name}.settable_step",
                    "widen low to high, or state a smaller step",
                )
            )
        elif factor.scale == "log" and (actual[:, j] <= 0).any():
            what = f"a setting of {factor.name} would be 0 or less on a log scale"
            where = f"study.toml, factors.{factor.name}"
            faults.append(Fault(what, where, "state a smaller step"))
    if faults:
        raise InputError(faults)
