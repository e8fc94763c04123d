"""The step that plans runs: lay out, round to what can be set, check every run, judge the plan."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from wideberth.errors import Fault, InputError, refusal
from wideberth.plan.designs import axial_block, build_design
from wideberth.plan.model import PlannedModel, planned_model, with_runs
from wideberth.plan.optimal import optimal_design
from wideberth.plan.quality import even_settings, plan_region, quality, region_variance
from wideberth.plan.records import Certificate, Design, Plan, PlannedRun, Rounding, WayOut
from wideberth.plan.safety import Earlier, earlier_models, judging_findings, offences
from wideberth.plan.settings import settable
from wideberth.seeds import stream
from wideberth.study.coding import to_actual, to_coded
from wideberth.study.records import Finding, FloatArray, PlanChoice, Study
from wideberth.study.sheet import no_runs

_SHRINKS = np.round(np.arange(0.99, 0.195, -0.01), 2)
_COUPLED = 1e-6
_ROUNDED = 1e-3


@dataclass(frozen=True, slots=True, eq=False)
class _Laid:
    """A design with its settings, before it is judged."""

    choice: PlanChoice
    design: Design
    certificate: Certificate | None
    blocks: tuple[str, ...]
    actual: FloatArray
    offences: tuple[tuple[str, ...], ...]
    fitted: Study

    @property
    def order(self) -> int:
        return self.choice.order if self.choice.design == "optimal" else 2


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
    builder = _Builder(study, earlier, seed, axial_only)
    laid = builder.lay_out(study.plan)
    refused = any(laid.offences)
    model = planned_model(laid.fitted, laid.order)
    return Plan(
        status="refused" if refused else "ready",
        study=study,
        choice=study.plan,
        seed=seed,
        design=laid.design,
        runs=_in_run_order(study, laid, seed),
        fitted=laid.fitted,
        quality=quality(model, seed=seed),
        rounding=_rounding(study, laid, model),
        ways_out=_ways_out(builder, laid, model) if refused else (),
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


@dataclass(frozen=True, slots=True, eq=False)
class _Builder:
    """Lays out one choice after another for the same study."""

    study: Study
    earlier: Earlier | None
    seed: int
    axial_only: bool

    def lay_out(self, choice: PlanChoice) -> _Laid:
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
        return _Laid(choice, design, certificate, names, actual, reasons, fitted)


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


def _in_run_order(study: Study, laid: _Laid, seed: int) -> tuple[PlannedRun, ...]:
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


def _rounding(study: Study, laid: _Laid, model: PlannedModel) -> Rounding:
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
        ratio = _ratio(planned_model(exact, laid.order), model)
    return Rounding(moved, float(off.max(initial=0.0)), ratio)


def _ratio(stated: PlannedModel, other: PlannedModel) -> float | None:
    """Give the average prediction variance of another plan over that of the stated one.

    ``None`` where the two do not fit the same terms.
    """
    means = _mean_variance(stated, stated), _mean_variance(stated, other)
    return None if means[0] is None or means[1] is None else means[1] / means[0]


def variance_over(plan: Plan, other: Plan) -> float | None:
    """Average another plan's prediction variance over the region that a plan covers.

    ``None`` where the other one cannot estimate all that the plan can.
    """
    models = [
        planned_model(p.fitted, p.choice.order if p.choice.design == "optimal" else 2)
        for p in (plan, other)
    ]
    return _mean_variance(models[0], models[1])


def _mean_variance(stated: PlannedModel, other: PlannedModel) -> float | None:
    """Average another plan's prediction variance over the region that the stated one covers."""
    names = [{t.name for t in model.terms if t.block is None} for model in (stated, other)]
    region = plan_region(stated.study)
    if region is None or not names[0] <= names[1]:
        return None
    return float(region_variance(other, even_settings(region)).mean())


def _ways_out(builder: _Builder, laid: _Laid, model: PlannedModel) -> tuple[WayOut, ...]:
    """Try the face distance, a smaller design and an optimal plan; give those that keep inside."""
    choice = laid.choice
    ways: list[WayOut] = []
    own = _mean_variance(model, model)

    def offer(what: str, options: str, other: PlanChoice) -> bool:
        try:
            found = builder.lay_out(other)
        except InputError:
            return False
        if any(found.offences):
            return False
        mean = _mean_variance(model, planned_model(found.fitted, found.order))
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
    choice: PlanChoice, laid: _Laid, offer: Callable[[str, str, PlanChoice], bool]
) -> None:
    """Try axial runs nearer to the centre, a twentieth of a coded unit at a time."""
    distance = laid.design.axial_distance or 1.0
    for nearer in np.arange(np.ceil(distance * 20 - 1) / 20, 0.45, -0.05).round(2).tolist():
        if offer("axial runs nearer", f"--distance {nearer:g}", replace(choice, axial=nearer)):
            return


def _findings(study: Study, laid: _Laid, model: PlannedModel) -> list[Finding]:
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
    if model.df_lack + model.df_pure == 0:
        text = "As many terms as runs: no error can be estimated, so nothing can be guarded."
        found.append(Finding("do not use", text))
    elif model.df_pure == 0:
        text = "No run is repeated: lack of fit cannot be tested. Add centre runs."
        found.append(Finding("look", text))
    taken = set(laid.design.kind)
    if "centre" in taken and not study.runs.rows:
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
