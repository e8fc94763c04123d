"""What else could be run, and what it costs: rounding, and the ways out of a refused plan.

Costs are held against the stated plan, as the average prediction variance over the region that the
stated plan was to cover.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np

from wideberth.errors import InputError
from wideberth.plan.laying import Builder, Laid
from wideberth.plan.model import PlannedModel, planned_model, with_runs
from wideberth.plan.quality import even_settings, plan_region, region_variance
from wideberth.plan.records import Rounding, WayOut
from wideberth.study.coding import to_actual, to_coded
from wideberth.study.records import PlanChoice, Study

_SHRINKS = np.round(np.arange(0.99, 0.195, -0.01), 2)
_ROUNDED = 1e-3


def mean_variance(stated: PlannedModel, other: PlannedModel) -> float | None:
    """Average another plan's prediction variance over the region that the stated one covers."""
    names = [{t.name for t in model.terms if t.block is None} for model in (stated, other)]
    region = plan_region(stated.study)
    if region is None or not names[0] <= names[1]:
        return None
    return float(region_variance(other, even_settings(region)).mean())


def ways_out(builder: Builder, laid: Laid, model: PlannedModel) -> tuple[WayOut, ...]:
    """Try the face distance, a smaller design and an optimal plan; give those that keep inside."""
    choice = laid.choice
    ways: list[WayOut] = []
    own = mean_variance(model, model)

    def offer(what: str, options: str, other: PlanChoice) -> bool:
        try:
            found = builder.lay_out(other)
        except InputError:
            return False
        if any(found.offences):
            return False
        mean = mean_variance(model, planned_model(found.fitted, found.choice.fitted_order))
        ratio = None if mean is None or not own else mean / own
        ways.append(WayOut(what, options, len(found.design.coded), mean, ratio))
        return True

    if choice.design == "central composite" and choice.axial != "face":
        option = "--distance face" if builder.axial_only else "--axial face"
        offer("axial runs on the faces", option, replace(choice, axial="face"))
    if builder.axial_only:
        _nearer_axial(choice, laid, offer)
        return tuple(ways)
    if choice.design != "optimal":
        for shrink in _SHRINKS[choice.shrink > _SHRINKS].tolist():
            what = f"the whole design drawn in to {shrink:g} of its size"
            if offer(what, f"--shrink {shrink:g}", replace(choice, shrink=shrink)):
                break
        n, centre = len(laid.design.coded), choice.centre_runs
        optimal = PlanChoice(
            design="optimal",
            runs=n,
            blocks=choice.blocks,
            centre_runs=centre if centre and centre[0] == centre[1] else None,
            hold=choice.hold,
        )
        what = "an optimal plan of as many runs for what may be run"
        option = f"--design optimal --runs {n}"
        if not offer(what, option, optimal):
            offer(f"{what}, first order", f"{option} --order 1", replace(optimal, order=1))
    return tuple(ways)


def _nearer_axial(
    choice: PlanChoice, laid: Laid, offer: Callable[[str, str, PlanChoice], bool]
) -> None:
    """Try axial runs nearer to the centre, a twentieth of a coded unit at a time."""
    distance = laid.design.axial_distance or 1.0
    for nearer in np.arange(np.ceil(distance * 20 - 1) / 20, 0.45, -0.05).round(2).tolist():
        if offer("axial runs nearer", f"--distance {nearer:g}", replace(choice, axial=nearer)):
            return


def rounding_cost(study: Study, laid: Laid, model: PlannedModel) -> Rounding:
    """Hold the settable plan against the exact one, on the exact one's region."""
    off = np.abs(to_coded(study.numeric, laid.actual) - laid.design.coded)
    moved = int((off > _ROUNDED).sum())
    ratio = None
    if moved:
        exact = with_runs(
            study,
            to_actual(study.numeric, laid.design.coded),
            laid.design.levels,
            tuple(laid.blocks[b] for b in laid.design.block),
            laid.design.kind,
        )
        stated = planned_model(exact, laid.choice.fitted_order)
        means = mean_variance(stated, stated), mean_variance(stated, model)
        ratio = None if not means[0] or means[1] is None else means[1] / means[0]
    return Rounding(moved, float(off.max(initial=0.0)), ratio)
