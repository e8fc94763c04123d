"""What ``[plan]`` says, checked against the rest of the study, and turned into a record."""

from __future__ import annotations

from collections.abc import Callable, Iterator

from wideberth.errors import Fault
from wideberth.study.naming import nearest
from wideberth.study.records import PlanChoice
from wideberth.study.schema import PlanTable, StudyFile


def plan_faults(tables: StudyFile, at: Callable[..., str]) -> Iterator[Fault]:
    """Check what ``[plan]`` says against factors and responses; ``at`` says where a key stands."""
    plan, responses = tables.plan, list(tables.responses)
    for key, names in (("hold", plan.hold or []), ("error_sd", list(plan.error_sd))):
        for name in names:
            table = tables.responses.get(name)
            if table is None:
                mend = nearest(name, responses, "use the names of responses")
                yield Fault(f"{key} names no response: {name}", at("plan", key), mend)
            elif key == "hold" and table.limit is None:
                mend = "state its limit, or take it out of hold"
                yield Fault(f"hold names {name}, which has no limit", at("plan", key), mend)
    yield from _unused_keys(plan, at)


def _unused_keys(plan: PlanTable, at: Callable[..., str]) -> Iterator[Fault]:
    """Name keys that the stated design does not take, so that none is silently passed over."""
    stated = plan.model_fields_set
    for key, designs in _TAKEN_BY.items():
        if key in stated and plan.design not in designs:
            mend = f"take {key} out; it goes with {' or '.join(designs)}"
            yield Fault(f"design '{plan.design}' takes no {key}", at("plan", key), mend)
    if isinstance(plan.centre_runs, list) and plan.design != "central composite":
        yield Fault(
            "centre_runs holds two numbers",
            at("plan", "centre_runs"),
            "only a central composite design takes [two-level blocks, axial block]",
        )


_TAKEN_BY = {
    "core": ("central composite", "two-level"),
    "axial": ("central composite",),
    "replicates": ("central composite", "box-behnken", "two-level"),
    "shrink": ("central composite", "box-behnken", "two-level"),
    "runs": ("optimal",),
    "criterion": ("optimal",),
    "order": ("optimal",),
}


def goes_with(key: str, design: str) -> bool:
    """Tell whether a key of ``[plan]`` has a meaning for a design."""
    return design in _TAKEN_BY.get(key, (design,))


def plan_choice(table: PlanTable) -> PlanChoice:
    """Give ``[plan]`` as a record."""
    centre = table.centre_runs
    return PlanChoice(
        design=table.design,
        core=table.core,
        axial=table.axial,
        shrink=table.shrink,
        centre_runs=None
        if centre is None
        else ((centre, centre) if isinstance(centre, int) else (centre[0], centre[1])),
        blocks=table.blocks,
        replicates=table.replicates,
        runs=table.runs,
        criterion=table.criterion,
        order=table.order,
        error_sd=dict(table.error_sd),
        hold=None if table.hold is None else tuple(table.hold),
    )
