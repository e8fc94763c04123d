"""The step that plans runs: lay out, round to what can be set, check every run, judge the plan."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from wideberth.errors import Fault, InputError, refusal
from wideberth.plan.laying import Builder, Laid
from wideberth.plan.model import PlannedModel, planned_model
from wideberth.plan.quality import quality
from wideberth.plan.records import Plan, PlannedRun
from wideberth.plan.safety import earlier_models, judging_findings
from wideberth.plan.settings import settable
from wideberth.plan.ways_out import mean_variance, rounding_cost, ways_out
from wideberth.seeds import stream
from wideberth.study.coding import to_coded
from wideberth.study.records import Finding, Study
from wideberth.study.sheet import no_runs

_ROUNDED = 1e-3


def plan_runs(
    study: Study, *, append: bool = False, axial_only: bool = False, seed: int | None = None
) -> Plan:
    """Plan the runs that ``[plan]`` states and check every one of them.

    Parameters
    ----------
    study : Study
        From `read_draft`.
    append : bool
        Keep the runs that the sheet holds and add the new ones as new blocks; otherwise the sheet
        is planned anew, which is refused when it holds results.
    axial_only : bool
        Plan only the block of axial runs that makes the two-level runs of the sheet a central
        composite design; goes with ``append``.
    seed : int, optional
        Instead of the study's.

    Returns
    -------
    Plan
        With status ``refused``, and ways out, when a run must not be made.

    Raises
    ------
    InputError
        When there is no such design for the study, what it asks for is impossible, or results
        would be lost.
    """
    if not append:
        study = _anew(study)
    seed = study.seed if seed is None else seed
    earlier = earlier_models(study)
    _check_blocks(study)
    builder = Builder(study, earlier, seed, axial_only)
    laid = builder.lay_out(study.plan)
    refused = any(laid.offences)
    model = planned_model(laid.fitted, laid.choice.fitted_order)
    return Plan(
        status="refused" if refused else "ready",
        study=study,
        choice=study.plan,
        seed=seed,
        design=laid.design,
        runs=_in_run_order(study, laid, seed),
        fitted=laid.fitted,
        quality=quality(model, seed=seed),
        rounding=rounding_cost(study, laid, model),
        ways_out=ways_out(builder, laid, model) if refused else (),
        certificate=laid.certificate,
        findings=(
            *judging_findings(earlier, laid.actual),
            *_findings(study, laid, model),
        ),
    )


def _anew(study: Study) -> Study:
    if study.runs.filled:
        mend = "add the new runs below with --append, or move the sheet away"
        raise refusal("the sheet holds results and is never overwritten", study.runs.file, mend)
    return replace(study, runs=no_runs(study.runs.file, study.factors, study.responses))


def _check_blocks(study: Study) -> None:
    if study.runs.rows and not study.runs.blocks:
        what = "the runs already made stand in no block, so new ones could not be told from them"
        mend = "add a column block to the sheet, with one name for the runs already made"
        raise InputError([Fault(what, study.runs.file, mend)])


def _in_run_order(study: Study, laid: Laid, seed: int) -> tuple[PlannedRun, ...]:
    """Shuffle within each block; blocks follow one another."""
    runs: list[PlannedRun] = []
    first = 1 + max(study.runs.order or (len(study.runs.rows),), default=0)
    coded = to_coded(study.numeric, laid.actual)
    done = len(study.runs.blocks)
    for b in range(laid.design.n_blocks):
        places = np.flatnonzero(laid.design.block == b)
        for i in stream(seed, "run order", done + b).permutation(places).tolist():
            numbers = dict(
                zip((f.name for f in study.numeric), laid.actual[i].tolist(), strict=True)
            )
            level = {
                f.name: f.levels[laid.design.levels[i, c]] for c, f in enumerate(study.categorical)
            }
            setting = {f.name: (numbers | level)[f.name] for f in study.factors}
            runs.append(
                PlannedRun(
                    order=first + len(runs),
                    block=laid.blocks[b],
                    kind=laid.design.kind[i],
                    setting=setting,
                    coded=tuple(coded[i].tolist()),
                    offences=laid.offences[i],
                )
            )
    return tuple(runs)


def variance_over(plan: Plan, other: Plan) -> float | None:
    """Average another plan's prediction variance over the region that a plan covers.

    ``None`` where the other one cannot estimate all that the plan can.
    """
    models = [planned_model(p.fitted, p.choice.fitted_order) for p in (plan, other)]
    return mean_variance(models[0], models[1])


def _findings(study: Study, laid: Laid, model: PlannedModel) -> list[Finding]:
    found = [Finding("fine", text) for text in laid.design.said]
    n_blocks = len(laid.fitted.runs.blocks)
    if n_blocks > 1 and study.future_blocks is None:
        found.append(
            Finding(
                "look",
                "The sheet will have several blocks: state [blocks] future = 'recur' before the"
                " results are fitted.",
            )
        )
    open_runs = int((study.runs.fitted & ~np.isfinite(study.runs.measured).any(axis=1)).sum())
    if open_runs and study.measured:
        text = f"{open_runs} runs of the sheet have no result yet; they count as if they will."
        found.append(Finding("look", f"{text} Mark those that will never come as failed."))
    if model.df_lack + model.df_pure == 0:
        text = "As many terms as runs: no error can be estimated, so nothing can be guarded."
        found.append(Finding("do not use", text))
    elif model.df_pure == 0:
        text = "No run is repeated: lack of fit cannot be tested. Add centre runs."
        found.append(Finding("look", text))
    taken = set(laid.design.kind)
    if "centre" in taken and laid.choice.design != "optimal":
        x = np.zeros((1, len(study.numeric)))
        actual = settable(study.numeric, x)
        off = np.abs(to_coded(study.numeric, actual)).max(initial=0.0)
        if off > _ROUNDED:
            text = f"The settable centre lies {off:.2g} coded units off the middle of low and high."
            found.append(Finding("look", text))
    return found


def offence_faults(plan: Plan) -> list[Fault]:
    """Word each run that must not be made as a fault; the ways out stand beside them."""
    return [
        Fault(
            "; ".join(run.offences),
            f"planned run {run.order}" + (f" ({run.kind})" if run.kind else ""),
            "take one of the ways out, or state what may be run",
        )
        for run in plan.offending
    ]
