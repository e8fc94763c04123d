"""``wideberth plan``."""

from __future__ import annotations

from typing import TYPE_CHECKING

import click

from wideberth.cli.frame import (
    guarded,
    json_option,
    print_findings,
    print_table,
    seed_option,
    study_argument,
)

if TYPE_CHECKING:
    from wideberth.plan.records import Plan

_KEYS = (
    "design",
    "core",
    "axial",
    "shrink",
    "centre_runs",
    "blocks",
    "replicates",
    "runs",
    "criterion",
    "order",
)
_MOST_ALIASES = 8


@click.command("plan")
@study_argument
@click.option("--design", help="central composite, box-behnken, two-level or optimal.")
@click.option("--core", help="Two-level runs: full, half, quarter, eighth or sixteenth.")
@click.option("--axial", help="rotatable, spherical, face, orthogonal-blocks, or a coded distance.")
@click.option("--shrink", help="Draw the whole design in toward its centre, like 0.8.")
@click.option("--centre-runs", help="Centre runs in each block; 4+2: two-level and axial block.")
@click.option("--blocks", help="Number of blocks.")
@click.option("--replicates", help="How often each run but the centre runs is made.")
@click.option("--runs", help="Size of an optimal plan.")
@click.option("--criterion", help="What an optimal plan is best in: D (coefficients) or I.")
@click.option("--order", help="Order of the model of an optimal plan: 1 or 2.")
@click.option("--beside", help="Show a second plan beside it: KEY=VALUE,KEY=VALUE,...")
@click.option(
    "--append", is_flag=True, help="Add the runs below those of the sheet, as new blocks."
)
@click.option("--even-so", is_flag=True, help="Write runs that must not be made, marked.")
@click.option("--show", is_flag=True, help="Show the plan and write nothing.")
@click.option("--figure", is_flag=True, help="Also write plan.svg.")
@seed_option
@json_option
@guarded
def command(
    study_dir: str,
    *,
    beside: str | None,
    append: bool,
    even_so: bool,
    show: bool,
    figure: bool,
    seed: int | None,
    as_json: bool,
    **stated: str | None,
) -> int:
    """Plan the runs of [plan], check every one of them, and write the run sheet.

    Example: wideberth plan my-study --axial face
    """
    from wideberth.plan.plan import plan_runs
    from wideberth.study.plan_statement import goes_with
    from wideberth.study.reading import read_draft

    overrides = {key: read_value(text) for key in _KEYS if (text := stated[key]) is not None}
    plan = plan_runs(read_draft(study_dir, overrides), append=append, seed=seed)
    other = None
    if beside is not None:
        pairs = _pairs(beside)
        design = str(pairs.get("design", plan.choice.design))
        common = {key: value for key, value in overrides.items() if goes_with(key, design)}
        changed = read_draft(study_dir, common | pairs)
        other = plan_runs(changed, append=append, seed=seed)
    writes = not show and (even_so or not plan.offending)
    return show_plan(
        plan,
        other,
        append=append,
        even_so=even_so,
        writes=writes,
        figure=figure,
        as_json=as_json,
    )


def show_plan(
    plan: Plan,
    other: Plan | None = None,
    *,
    append: bool,
    even_so: bool,
    writes: bool,
    figure: bool = False,
    as_json: bool,
) -> int:
    """Write a plan where that is asked for, print it, and give the exit code."""
    from wideberth.chain.as_json import dumps, plan_json
    from wideberth.chain.plan_files import write_plan

    files = {"plan.svg": _figure(plan, other)} if writes and figure else {}
    paths = write_plan(plan, append=append, even_so=even_so, beside=files) if writes else ()
    if as_json:
        content = plan_json(plan)
        if other is not None:
            content["beside"] = plan_json(other)
        click.echo(dumps(content), nl=False)
    else:
        _print(plan, other, even_so=even_so)
        for path in paths:
            click.echo(f"wrote {path}")
        if not paths:
            click.echo("Nothing was written.")
    return 2 if plan.offending and not even_so else 0


def read_value(text: str) -> object:
    """Read an option as a whole number, a number, two whole numbers, or a word."""
    parts = [part.strip() for part in text.split("+")]
    if len(parts) == 2 and all(part.isdigit() for part in parts):
        return [int(part) for part in parts]
    for kind in (int, float):
        try:
            return kind(text)
        except ValueError:
            continue
    return text


def _pairs(text: str) -> dict[str, object]:
    from wideberth.errors import refusal

    pairs: dict[str, object] = {}
    for part in text.split(","):
        key, equals, value = (piece.strip() for piece in part.partition("="))
        if not equals or not value:
            raise refusal(f"'{part}' is no KEY=VALUE", "--beside", "write axial=face,blocks=2")
        pairs[key.replace("-", "_")] = read_value(value)
    return pairs


def _figure(plan: Plan, other: Plan | None) -> bytes:
    from wideberth.report.plan_figure import draw_plan
    from wideberth.report.style import to_svg

    return to_svg(draw_plan(plan, other), "plan").encode()


def _print(plan: Plan, other: Plan | None, *, even_so: bool) -> None:
    from wideberth.report.numbers import named
    from wideberth.report.plan_rows import (
        PLAN_CAUTION,
        quality_rows,
        run_row,
        side_by_side,
        way_out_row,
    )

    study = plan.study
    click.echo(f"{study.title}: {len(plan.runs)} runs, {plan.choice.design}, seed {plan.seed}")
    header = ["run", "block", "kind", *(named(f.name, f.unit) for f in study.factors)]
    print_table(header, [run_row(study, run) for run in plan.runs])
    if plan.offending:
        n = len(plan.offending)
        click.echo(f"{n} {'run' if n == 1 else 'runs'} must not be made:")
        for run in plan.offending:
            click.echo(f"  run {run.order} ({run.kind or 'chosen'}): {'; '.join(run.offences)}")
        if not even_so:
            _print_ways_out(plan, [way_out_row(way) for way in plan.ways_out])
    click.echo("What the plan is worth:" if other is None else "The two plans side by side:")
    if other is None:
        print_table(["measure", "value"], quality_rows(plan))
    else:
        print_table(["measure", "this plan", "beside"], side_by_side(plan, other))
    if plan.quality.aliases:
        click.echo("The runs cannot tell apart:")
        for names in plan.quality.aliases[:_MOST_ALIASES]:
            click.echo(f"  {names}")
        if len(plan.quality.aliases) > _MOST_ALIASES:
            click.echo(f"  and {len(plan.quality.aliases) - _MOST_ALIASES} more; see --json")
    print_findings(plan.findings)
    click.echo(f"Cautions: {PLAN_CAUTION}")


def _print_ways_out(plan: Plan, rows: list[tuple[str, ...]]) -> None:
    if not rows:
        click.echo("No smaller design and no other plan keeps inside; state what may be run.")
        return
    own = plan.quality.mean_variance
    click.echo("Ways out, with the average prediction variance where the stated plan would reach:")
    header = ["", "option", "runs", "variance", "stated plan" if own is None else "of the stated"]
    print_table(header, rows)
    unstated = sorted(
        {f.name for f in plan.study.numeric if f.allowed is None}
        & {
            f.name
            for f in plan.study.numeric
            for run in plan.offending
            if any(reason.startswith(f"{f.name} at") for reason in run.offences)
        }
    )
    if unstated:
        click.echo(f"  Or state allowed for {', '.join(unstated)}, if these settings may be run.")
