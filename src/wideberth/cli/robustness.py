"""``wideberth robustness``."""

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
    from wideberth.operate.records import Robustness
    from wideberth.study.records import Study


@click.command("robustness")
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
    """Say what happens when the settings wander within their tolerances.

    Example: wideberth robustness my-study
    """
    from wideberth.chain.as_json import dumps, robustness_json
    from wideberth.cli.progress import ProgressLine
    from wideberth.decide.recommend import solve
    from wideberth.fit.models import fit
    from wideberth.operate.robustness import wander
    from wideberth.study.reading import read_study
    from wideberth.uncertainty.assess import draws_for

    study = read_study(study_dir)
    progress = ProgressLine(quiet=quiet or as_json)
    problem, choice = solve(fit(study), seed=seed, at=read_at(study, at), progress=progress)
    draws = draws_for(problem, choice, n_draws)
    answer = wander(problem, choice, draws, progress=progress)
    progress.close()
    if as_json:
        click.echo(dumps(robustness_json(answer, study)), nl=False)
    else:
        print_robustness(answer, study)
    return 0 if choice.status == "met" else 3


def print_robustness(answer: Robustness, study: Study) -> None:
    """Print what setting error does to every response."""
    from wideberth.report.drift_words import (
        DRIFT_HEADER,
        correction_sentence,
        drift_row,
        looser_sentence,
    )
    from wideberth.report.rows import wander_row
    from wideberth.report.wording import CAUTIONS, conformance_words, setting_words

    if answer.setting is None:
        click.echo(answer.advice)
        return
    click.echo(f"Setting: {setting_words(study, answer.setting)}.")
    print_findings(answer.findings)
    rows = [wander_row(name, one) for name, one in answer.responses.items()]
    header = ("response", "shift", "sd setting", "sd batch", "room", "makes it")
    click.echo("")
    print_table(header, rows)
    if answer.conformance is not None:
        click.echo(
            f"\nAll limits together, settings wandering: {conformance_words(answer.conformance)}."
        )
    click.echo(answer.advice)
    if answer.drifts:
        click.echo(f"{looser_sentence(answer)}")
        click.echo("\nOne factor drifts by tolerances: batches of 100 inside all limits")
        print_table(DRIFT_HEADER, [drift_row(one, study) for one in answer.drifts])
    if answer.corrections:
        click.echo("\nOff and cannot be brought back")
    for one in answer.corrections:
        click.echo(f"  {correction_sentence(one, study)}")
    click.echo("Cautions: " + " ".join(CAUTIONS))
