"""``wideberth next``."""

from __future__ import annotations

from typing import TYPE_CHECKING

import click

from wideberth.cli.frame import (
    guarded,
    json_option,
    print_table,
    seed_option,
    study_argument,
)

if TYPE_CHECKING:
    from wideberth.plan.records import Stage
    from wideberth.study.records import Study


@click.command("next")
@study_argument
@click.option("--response", help="The response whose path to follow; by default the first goal's.")
@click.option("--axial", is_flag=True, help="Add the axial runs to the sheet as a further block.")
@click.option(
    "--distance",
    default="orthogonal-blocks",
    show_default=True,
    help="With --axial: orthogonal-blocks, rotatable, spherical, face, or a coded distance.",
)
@click.option("--centre-runs", type=click.IntRange(min=0), help="With --axial: centre runs.")
@click.option("--even-so", is_flag=True, help="Write runs that must not be made, marked.")
@click.option("--show", is_flag=True, help="With --axial: show the runs and write nothing.")
@seed_option
@json_option
@guarded
def command(
    study_dir: str,
    *,
    response: str | None,
    axial: bool,
    distance: str,
    centre_runs: int | None,
    even_so: bool,
    show: bool,
    seed: int | None,
    as_json: bool,
) -> int:
    """Say what to do after a finished two-level stage, or add its axial runs.

    Example: wideberth next my-study --axial
    """
    from wideberth.chain.as_json import dumps, stage_json
    from wideberth.cli.plan import read_value, show_plan
    from wideberth.plan.plan import plan_runs
    from wideberth.plan.stage import finished_stage
    from wideberth.study.reading import read_draft, read_study

    if axial:
        overrides = {"design": "central composite", "axial": read_value(distance), "blocks": 1}
        if centre_runs is not None:
            overrides["centre_runs"] = centre_runs
        plan = plan_runs(read_draft(study_dir, overrides), append=True, axial_only=True, seed=seed)
        writes = not show and (even_so or not plan.offending)
        return show_plan(plan, append=True, even_so=even_so, writes=writes, as_json=as_json)
    study = read_study(study_dir)
    stage = finished_stage(study, response=response)
    if as_json:
        click.echo(dumps(stage_json(stage, study)), nl=False)
        return 0
    _print(stage, study)
    return 0


def _print(stage: Stage, study: Study) -> None:
    from wideberth.report.numbers import named
    from wideberth.report.plan_rows import PLAN_CAUTION
    from wideberth.report.stage_rows import curvature_words, effect_row, path_row

    for one in stage.responses:
        noise = "no spare runs" if one.s is None else f"s = {one.s:.3g} with {one.df} df"
        click.echo(f"{named(one.response, one.unit)}: {one.n_runs} runs, {noise}")
        print_table(
            ["change from low to high", "size", "95 % interval", "p"],
            [effect_row(effect) for effect in one.effects],
        )
        click.echo(f"  {curvature_words(one)}")
        for names in one.aliases:
            click.echo(f"  cannot be told apart: {names}")
    click.echo(f"{stage.decision.do.upper()}: {stage.decision.why}")
    path = stage.path
    if path is not None and stage.decision.do == "path":
        straight = f"{named(path.response, path.unit)} if it stayed straight"
        header = ["step", *(named(f.name, f.unit) for f in study.factors), straight]
        print_table(header, [path_row(study, path, step) for step in path.steps])
        click.echo(f"  {path.stopped}")
        click.echo(f"Cautions: {PLAN_CAUTION}")
    if stage.decision.do == "axial":
        click.echo("Add them with: wideberth next --axial")
