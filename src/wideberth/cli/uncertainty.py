"""``wideberth uncertainty``."""

from __future__ import annotations

from typing import TYPE_CHECKING

import click

from wideberth.cli.frame import (
    at_option,
    draws_option,
    guarded,
    json_option,
    print_findings,
    print_table,
    quiet_option,
    read_at,
    seed_option,
    study_argument,
)

if TYPE_CHECKING:
    from wideberth.decide.records import Choice
    from wideberth.study.records import Study
    from wideberth.uncertainty.records import Uncertainty


@click.command("uncertainty")
@study_argument
@at_option
@draws_option
@seed_option
@json_option
@quiet_option
@guarded
def command(
    study_dir: str, *, at: str | None, n_draws: int, seed: int | None, as_json: bool, quiet: bool
) -> int:
    """Say how sure the setpoint is: where the optimum may lie, what may be lost, conformance.

    Example: wideberth uncertainty my-study --draws 2000
    """
    from wideberth.chain.as_json import dumps, uncertainty_json
    from wideberth.cli.progress import ProgressLine
    from wideberth.decide.recommend import solve
    from wideberth.fit.models import fit
    from wideberth.study.reading import read_study
    from wideberth.uncertainty.assess import assess, draws_for

    study = read_study(study_dir)
    progress = ProgressLine(quiet=quiet or as_json)
    problem, choice = solve(fit(study), seed=seed, at=read_at(study, at), progress=progress)
    sure = assess(problem, choice, draws_for(problem, choice, n_draws), progress=progress)
    progress.close()
    if as_json:
        click.echo(dumps(uncertainty_json(sure, study)), nl=False)
    else:
        print_uncertainty(sure, choice, study)
    return 0 if choice.status == "met" and not sure.reason else 3


def print_uncertainty(sure: Uncertainty, choice: Choice, study: Study) -> None:
    """Print how sure a choice is, on one screen."""
    from wideberth.report.numbers import named
    from wideberth.report.rows import region_header, region_row
    from wideberth.report.wording import (
        CAUTIONS,
        difference_words,
        location_sentence,
        loss_sentence,
        lost_sentences,
        setting_words,
        status_sentence,
        today_sentences,
        together_sentences,
    )

    click.echo(f"{choice.status}: {status_sentence(choice)}")
    if choice.setpoint is not None:
        click.echo(f"Setting judged: {setting_words(study, choice.setpoint)}.")
    if sure.reason:
        click.echo(f"Nothing can be said about how sure it is: {sure.reason}.")
        return
    print_findings(sure.findings)
    click.echo("\nWhere the optimum may lie")
    click.echo(f"  {location_sentence(sure)}")
    if sure.region is not None:
        rows = [region_row(sure, factor, study) for factor in study.numeric]
        print_table(region_header(sure), rows)
    for name, share in sure.level_shares.items():
        click.echo(f"  {name}: best in {100 * share:.0f} of 100 draws.")
    click.echo("\nWhat the setting is worth")
    for sentence in (
        *together_sentences(sure),
        *lost_sentences(sure),
        *loss_sentence(sure, choice),
    ):
        click.echo(f"  {sentence}")
    if sure.today is not None:
        click.echo(f"\nAgainst today ({setting_words(study, sure.today.setting)})")
        rows = [
            (named(name, sure.today.predictions[name].unit), difference_words(one))
            for name, one in sure.today.differences.items()
        ]
        print_table(("response", "change, 95 %"), rows)
        for sentence in today_sentences(sure):
            click.echo(f"  {sentence}")
    click.echo(f"\n{sure.draws} draws, seed {sure.seed}.")
    click.echo("Cautions: " + " ".join(CAUTIONS))
