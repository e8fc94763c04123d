"""The evidence behind page one; each part opens with what it means."""

from __future__ import annotations

from wideberth.chain.record import Record
from wideberth.decide.priorities import FARTHEST
from wideberth.fit.records import LeftOutRun, Model
from wideberth.report.assurance import assurance
from wideberth.report.blocks import Block, Bullets, Drawing, Heading, PageBreak, Paragraph, Table
from wideberth.report.closing import closing
from wideberth.report.figures import draw_line, draw_map, draw_margins, draw_residuals
from wideberth.report.frontier_figure import draw_frontier
from wideberth.report.give_up_words import bound_words, step_words
from wideberth.report.left_out_words import every_run_sentences
from wideberth.report.numbers import format_range, format_value, named, with_unit
from wideberth.report.rows import frontier_row
from wideberth.report.style import to_svg
from wideberth.report.wording import (
    guard_sentence,
    promise,
    proof_sentence,
    setting_words,
)
from wideberth.surface.records import Shape

_FRONTIER_ROWS = 8
_METHODS = """
Coding and least squares: second-order models in coded units, by QR; PRESS after Allen (1974).
Lack of fit: against runs repeated at the same settings in the same block.
Geometry: canonical form after Box and Wilson (1951); ridge path after Hoerl (1959), Draper (1963).
Goals: desirabilities of Derringer and Suich, Journal of Quality Technology 12 (1980), 214-219.
Guards: confidence, prediction and one-sided tolerance bounds (noncentral t, Owen 1968), made \
simultaneous over the region by simulating the largest pivotal ratio.
Proof of the optimum: branch and bound with Lagrangian tangents (Horst and Tuy 1996).
Draws: exact posterior draws of a multivariate regression (Geisser 1965), each optimised anew.
Region of the optimum: an ellipsoid around the draws' optima, sized by their own quantile.
Conformance: posterior predictive probability of meeting all limits (Peterson 2004).
Window: worst places of quadratics by faces; guards bounded on ever smaller boxes until proven.
Wandering settings: exact mean and variance of a quadratic in normal errors.
Explored region: the box of the runs cut with their smallest ellipsoid (Khachiyan 1996).
Room: limits, constraints and bounds hold at the worst place of setpoint plus or minus tolerance.
"""


def evidence(record: Record) -> tuple[Block, ...]:
    """Write the blocks that follow page one."""
    return (
        PageBreak(),
        Heading(2, "Evidence"),
        *_limits(record),
        *_maps(record),
        *assurance(record),
        *_goals(record),
        *_models(record),
        *_left_out(record),
        *_geometry(record),
        *closing(record),
        Heading(3, "Methods and sources"),
        Bullets("", tuple(_METHODS.strip().splitlines())),
        *_provenance(record),
    )


def _limits(record: Record) -> list[Block]:
    choice = record.choice
    if not choice.limits:
        return []
    judged = [verdict for verdict in choice.limits if verdict.margin is not None]
    blocks: list[Block] = [
        Heading(3, "Limits and their margins"),
        Paragraph(
            "A margin is how far a guarded limit is from being broken anywhere in the room; the"
            " smallest names the limit that rules."
        ),
    ]
    if judged:
        alt = "; ".join(f"{v.response} {v.side} limit: margin {v.margin:.2f}" for v in judged)
        figure = to_svg(draw_margins(choice.limits), "margins")
        blocks.append(Drawing(figure, alt, "Margins of all limits."))
    blocked = any(v.block for v in choice.limits)
    rows = tuple(
        (
            f"{v.response} {v.side}",
            guard_sentence(v.guard, v.confidence, v.share),
            f"{v.factor:.3f}",
            "not judged" if v.guarded is None else with_unit(format_value(v.guarded), v.unit),
            *((v.block or "",) if blocked else ()),
        )
        for v in choice.limits
    )
    header = ("Limit", "What the guard asks", "Factor for the search", "Guarded value at worst")
    last = ("Worst block",) if blocked else ()
    blocks.append(Table("How each limit was judged", (*header, *last), rows))
    said = promise(choice)
    return [*blocks, Paragraph(said)] if said else blocks


def _maps(record: Record) -> list[Block]:
    if not record.maps:
        return []
    several = len(record.study.numeric) > 3
    blocks: list[Block] = [
        Heading(3, "Where the limits run"),
        Paragraph(
            "Each map shows two factors through the setpoint, the others held there:"
            f" {_shading(record)}. Lines are where a guarded limit is just met, named; dots are"
            " runs, the dotted line bounds what was explored. The small box is the room, the"
            " dashed box the window, the dash-dotted line the region of the optimum seen along"
            " the other factors."
            + (" The three factors that move the margins most are shown." if several else "")
        ),
    ]
    for view in record.maps:
        figure = (
            draw_map(
                record.study,
                record.choice,
                view,
                window=record.window,
                region=record.uncertainty.region,
            )
            if view.up
            else draw_line(record.study, record.choice, view)
        )
        names = f"{view.across} and {view.up}" if view.up else view.across
        limits = ", ".join(f"{limit.response} {limit.side}" for limit in view.margins) or "none"
        blocks.append(
            Drawing(
                to_svg(figure, f"map {view.across} {view.up}"),
                f"Map of {names} through the setpoint; limits: {limits}.",
                f"{names} through the setpoint.",
                half=bool(view.up),
            )
        )
    return blocks


def _shading(record: Record) -> str:
    view = record.maps[0]
    if view.conformance is not None:
        return "the darker, the more batches meet every limit, settings wandering"
    if view.margins:
        return "the darker, the farther from every limit"
    return "the darker, the better the goals are met"


def _goals(record: Record) -> list[Block]:
    choice = record.choice
    if not choice.goals:
        return []
    rows = []
    for goal in choice.goals:
        reached = choice.predictions[goal.response].desirability
        rows.append(
            (
                f"{goal.response} [{goal.unit}]" if goal.unit else goal.response,
                goal.want,
                " and ".join(f"{value:.5g}" for value in goal.poor),
                " to ".join(f"{value:.5g}" for value in dict.fromkeys(goal.ideal)),
                f"{goal.priority:g}",
                "" if reached is None else f"{reached:.2f}",
                goal.defaulted or "both stated",
            )
        )
    header = ("Response", "Wanted", "Poor", "Ideal", "Priority", "Desirability", "Bounds")
    total = "" if choice.desirability is None else f"{choice.desirability:.3f}"
    lead = "The best compromise of these goals inside the limits reaches"
    if choice.status != "met":
        lead = "On these goals the setting shown reaches"
    return [
        Heading(3, "Goals"),
        Paragraph(
            f"{lead} an overall desirability of {total}, between 0 (useless) and 1 (ideal)."
            f" {proof_sentence(choice)}".rstrip()
        ),
        Table("Goals as stated and reached", header, tuple(rows)),
        *([Bullets("Bounds that the setting leans on", choice.edge)] if choice.edge else []),
        *_priorities(record),
        *_give_ups(record),
        *_frontier(record),
    ]


def _priorities(record: Record) -> list[Block]:
    answer, study = record.priorities, record.study
    if answer is None:
        return []
    rows = tuple(
        (
            sway.response,
            f"{sway.priority:g}",
            f"below {sway.priority / FARTHEST:.2g}" if sway.down is None else f"{sway.down:.2g}",
            f"above {sway.priority * FARTHEST:.2g}" if sway.up is None else f"{sway.up:.2g}",
            setting_words(study, sway.doubled),
        )
        for sway in answer.sways
    )
    header = ("Response", "Priority", "Leaves at less than", "Leaves at more than", "If doubled")
    return [
        Table("How far a priority may move before the setpoint leaves its tolerance", header, rows),
        Paragraph(f"With all priorities equal: {setting_words(study, answer.equal)}."),
    ]


def _frontier(record: Record) -> list[Block]:
    answer, study = record.frontier, record.study
    if answer is None or len(answer.points) < 3:
        return []
    shown = list(answer.points[:: max(1, len(answer.points) // _FRONTIER_ROWS)])
    units = {model.response: model.unit for model in record.models.models}
    header = (
        "",
        *(named(f.name, f.unit) for f in study.factors),
        *(named(goal.response, units[goal.response]) for goal in answer.goals),
        "D",
    )
    rows = [("frontier", *frontier_row(answer, point, study)) for point in shown]
    if answer.setpoint is not None:
        rows.append(("setpoint", *frontier_row(answer, answer.setpoint, study)))
    if answer.today is not None:
        rows.append(("today", *frontier_row(answer, answer.today, study)))
    names = ", ".join(goal.response for goal in answer.goals)
    return [
        Heading(3, "The trade-off"),
        Paragraph(
            "Settings at which no goal can be met better without another getting worse, all of"
            " them inside every guarded limit with their room, before rounding to steps."
        ),
        Drawing(
            to_svg(draw_frontier(answer), "frontier"),
            f"Frontier settings, setpoint and today's setting for pairs of {names}.",
            "The pairs of responses that trade most against each other.",
        ),
        Table("Settings along the frontier", header, tuple(rows)),
    ]


def _give_ups(record: Record) -> list[Block]:
    rows = tuple(
        (
            bound_words(one),
            with_unit(f"{one.step:g}", one.unit),
            step_words(one, tighter=True),
            step_words(one, tighter=False),
        )
        for one in record.give_ups
    )
    if not rows:
        return []
    return [
        Heading(3, "What each limit and goal costs"),
        Paragraph(
            "Each bound is moved by one step, the settings are sought anew (before rounding to"
            " steps), everything else is kept. D is the overall desirability."
        ),
        Table("Give-ups", ("Bound", "Step", "Tightened by a step", "Loosened by a step"), rows),
    ]


def _models(record: Record) -> list[Block]:
    blocks: list[Block] = [
        Heading(3, "Models"),
        Paragraph(
            "Each measured response is a second-order equation in the coded factors; residuals"
            " should scatter without pattern and stay within about plus or minus 3."
        ),
    ]
    if any(model.runs for model in record.models.models):
        alt = "Studentized residuals against fitted values of each measured response."
        blocks.append(Drawing(to_svg(draw_residuals(record.models), "residuals"), alt, alt))
    blocks += [_summary(record), *_checks(record)]
    for model in record.models.models:
        if model.exact:
            blocks.append(Paragraph(f"{model.response} is known exactly by its formula."))
            continue
        blocks.append(_coefficients(model))
        remarks = tuple(f.text for f in model.findings if f.grade != "fine")
        if remarks:
            blocks.append(Bullets("", remarks, tone="doubt"))
    return blocks


def _summary(record: Record) -> Table:
    rows = []
    for model in record.models.models:
        if model.exact:
            rows.append((model.response, "exact", "", "", "", "", ""))
            continue
        lack = model.lack_of_fit
        rows.append(
            (
                f"{model.response} [{model.unit}]" if model.unit else model.response,
                str(model.n_runs),
                str(model.df_residual),
                "" if model.s is None else format_value(model.s, model.s or None),
                _share(model.r2_adjusted),
                _share(model.r2_press),
                model.reasons.get("lack_of_fit", "") if lack is None else f"p {lack.p:.2g}",
            )
        )
    header = ("Response", "Runs", "Residual df", "s", "Adjusted R2", "PRESS R2", "Lack of fit")
    return Table("How well the models describe the runs", header, tuple(rows))


def _checks(record: Record) -> list[Block]:
    models = [model for model in record.models.models if model.checks]
    kinds = list(dict.fromkeys(check.kind for model in models for check in model.checks))
    if not kinds:
        return []
    rows = []
    for model in models:
        found = {check.kind: f"p {check.p:.2g}" for check in model.checks}
        rows.append((model.response, *(found.get(kind, "") for kind in kinds)))
    rows.insert(0, ("Response", *(kind.capitalize() for kind in kinds)))
    if len(kinds) > max(len(models), 4):
        # the sheet's own columns can be many; then each check has a line
        rows = list(zip(*rows, strict=True))
    title = "Checks of the residuals (below 0.01 deserves a look)"
    return [Table(title, rows[0], tuple(rows[1:]))]


def _share(value: float | None) -> str:
    return "" if value is None else f"{value:.3f}"


def _coefficients(model: Model) -> Table:
    rows = tuple(
        (
            row.term,
            format_value(row.coded, row.se),
            "" if row.se is None else format_value(row.se, row.se),
            "" if row.t is None else f"{row.t:.2f}",
            "" if row.p is None else ("<0.001" if row.p < 0.001 else f"{row.p:.3f}"),
        )
        for row in model.table
    )
    unit = f" [{model.unit}]" if model.unit else ""
    return Table(
        f"{model.response}{unit}: coefficients in coded units",
        ("Term", "Coefficient", "Standard error", "t", "p"),
        rows,
    )


def _left_out(record: Record) -> list[Block]:
    study = record.study
    if not study.left_out:
        return []
    rows = tuple(
        (str(run.row), model.response, *_left_out_cells(run, model.unit), run.reason)
        for model in record.models.models
        for run in model.left_out
    )
    header = ("Row", "Response", "Measured", "Expected without it", "95 % of single values")
    said = [one.words() for one in study.left_out]
    if record.every_run is not None:
        said += every_run_sentences(record.every_run, record.choice, study)
    blocks: list[Block] = [
        Heading(3, "Runs left out"),
        Paragraph(
            "These rows were measured but not fitted, for the reasons stated; beside them stands"
            " what the answer would be with every run."
        ),
        Bullets("", tuple(said)),
    ]
    if rows:
        blocks.append(Table("What the other runs expect of them", (*header, "Reason"), rows))
    return blocks


def _left_out_cells(run: LeftOutRun, unit: str) -> tuple[str, str, str]:
    half = (run.interval[1] - run.interval[0]) / 2 if run.interval else None
    return (
        with_unit(format_value(run.observed, half), unit),
        with_unit(format_value(run.expected, half), unit),
        "" if run.interval is None else format_range(*run.interval, half),
    )


def _geometry(record: Record) -> list[Block]:
    if not record.shapes:
        return []
    return [
        Heading(3, "Geometry of each response"),
        Paragraph("Whether a response has its best inside what was tried, and how it bends there."),
        Table(
            "Canonical analysis",
            ("Response", "Nature", "Stationary point", "Fitted mean there", "Curvatures"),
            tuple(_geometry_row(one) for one in record.shapes),
        ),
    ]


def _geometry_row(one: Shape) -> tuple[str, ...]:
    levels = ", ".join(one.levels.values())
    name = f"{one.response} ({levels})" if levels else one.response
    place, mean = f"none: {one.reason}", ""
    if one.stationary is not None:
        place = ", ".join(
            f"{factor} {format_value(value)}"
            for factor, value in one.stationary.setting.items()
            if isinstance(value, float)
        )
        place += "" if one.stationary.explored else " (not explored)"
        mean = with_unit(format_value(one.stationary.mean), one.unit)
    curvatures = ", ".join(format_value(e.value) for e in one.eigenvalues)
    return (name, one.nature, place, mean, curvatures)


def _provenance(record: Record) -> list[Block]:
    study = record.study
    rows = [(name, digest) for name, digest in study.sha256.items()]
    rows += [("wideberth", record.version), ("seed", str(record.seed))]
    rows += list(record.packages.items())
    return [
        Heading(3, "Provenance"),
        Paragraph(
            "The same study, seed and version give the same bytes; record.json beside this memo"
            " carries every number at full precision, the study as it was read, and these words."
            " Its hash stands at the foot of every page. 'wideberth replay record.json' computes"
            " everything again and names the first number that differs."
        ),
        Table("Inputs and versions", ("Item", "Hash or version"), tuple(rows)),
    ]
