"""``wideberth frontier``."""

from __future__ import annotations

from typing import TYPE_CHECKING

import click

from wideberth.cli.frame import (
    guarded,
    json_option,
    print_table,
    quiet_option,
    seed_option,
    study_argument,
)

if TYPE_CHECKING:
    from wideberth.decide.frontier import Frontier
    from wideberth.study.records import Study


@click.command("frontier")
@study_argument
@click.option(
    "--points",
    "n_points",
    type=click.IntRange(min=3, max=100),
    default=24,
    show_default=True,
    help="Most settings to list.",
)
@click.option(
    "--pick", type=click.IntRange(min=1), help="Judge the setting with this number as a setpoint."
)
@seed_option
@json_option
@quiet_option
@guarded
def command(
    study_dir: str,
    *,
    n_points: int,
    pick: int | None,
    seed: int | None,
    as_json: bool,
    quiet: bool,
) -> int:
    """Show the trade-off: settings at which no goal improves without another getting worse.

    Example: wideberth frontier my-study --pick 3
    """
    from wideberth.chain.as_json import dumps, frontier_json, recommend_json
    from wideberth.cli.progress import ProgressLine
    from wideberth.cli.recommend import print_choice
    from wideberth.decide.frontier import frontier
    from wideberth.decide.recommend import recommend
    from wideberth.decide.settable import nearest_settable
    from wideberth.errors import refusal
    from wideberth.fit.models import fit
    from wideberth.study.reading import read_study

    study = read_study(study_dir)
    models = fit(study)
    progress = ProgressLine(quiet=quiet or as_json)
    answer = frontier(models, seed=seed, n_points=n_points, progress=progress)
    progress.close()
    if pick is not None:
        if pick > len(answer.points):
            raise refusal(
                f"there is no setting {pick}",
                "--pick",
                f"the frontier has {len(answer.points)} settings",
            )
        setting = nearest_settable(study, answer.points[pick - 1].setting)
        choice = recommend(models, seed=seed, at=setting)
        if as_json:
            click.echo(dumps(recommend_json(choice, study)), nl=False)
        else:
            print_choice(choice, study)
        return 0 if choice.status == "met" else 3
    if as_json:
        click.echo(dumps(frontier_json(answer, study)), nl=False)
    else:
        print_frontier(answer, study)
    return 0 if answer.points else 3


def print_frontier(answer: Frontier, study: Study) -> None:
    """Print the frontier, best overall desirability first."""
    from wideberth.report.numbers import named
    from wideberth.report.rows import frontier_row
    from wideberth.report.wording import CAUTIONS

    if answer.reason:
        click.echo(f"No frontier: {answer.reason}.")
        return
    units = {model.name: model.unit for model in study.responses}
    header = [
        "no.",
        *(named(f.name, f.unit) for f in study.factors),
        *(named(goal.response, units[goal.response]) for goal in answer.goals),
        "D",
    ]
    rows = [
        (str(i), *frontier_row(answer, point, study))
        for i, point in enumerate(answer.points, start=1)
    ]
    for word, point in (("set", answer.setpoint), ("today", answer.today)):
        if point is not None:
            rows.append((word, *frontier_row(answer, point, study)))
    print_table(header, rows)
    click.echo(
        "\nNo goal improves along this list without another getting worse; every setting holds"
        " every limit with its guard over its room. Settings are before rounding to steps:"
        " --pick judges one as a setpoint."
    )
    click.echo("Cautions: " + " ".join(CAUTIONS))
