"""``wideberth window``."""

from __future__ import annotations

from typing import TYPE_CHECKING

import click

from wideberth.cli.frame import (
    at_option,
    guarded,
    json_option,
    print_table,
    quiet_option,
    read_at,
    read_ranges,
    seed_option,
    study_argument,
)

if TYPE_CHECKING:
    from wideberth.operate.records import Window
    from wideberth.study.records import Study


@click.command("window")
@study_argument
@at_option
@click.option("--hold", help="Prove or refute ranges: NAME=LOW:HIGH,...")
@seed_option
@json_option
@quiet_option
@guarded
def command(
    study_dir: str,
    *,
    at: str | None,
    hold: str | None,
    seed: int | None,
    as_json: bool,
    quiet: bool,
) -> int:
    """Give the operating window: the box around the setpoint in all of which every limit holds.

    Example: wideberth window my-study
    """
    from wideberth.chain.as_json import dumps, window_json
    from wideberth.cli.progress import ProgressLine
    from wideberth.fit.models import fit
    from wideberth.operate.window import window
    from wideberth.study.reading import read_study

    study = read_study(study_dir)
    progress = ProgressLine(quiet=quiet or as_json)
    box = window(
        fit(study),
        seed=seed,
        at=read_at(study, at),
        hold=read_ranges(hold, "--hold"),
        progress=progress,
    )
    progress.close()
    if as_json:
        click.echo(dumps(window_json(box, study)), nl=False)
    else:
        print_window(box, study)
    return 0 if box.status == "proven" else 3


def print_window(box: Window, study: Study) -> None:
    """Print a window, or what stands against one."""
    from wideberth.report.rows import WINDOW_HEADER, window_row
    from wideberth.report.wording import (
        CAUTIONS,
        SINGLY_WARNING,
        setting_words,
        window_sentence,
    )

    if box.setting is not None:
        click.echo(f"Setting: {setting_words(study, box.setting)}.")
    click.echo(window_sentence(box))
    for sentence in box.must_give:
        click.echo(f"  {sentence}")
    if box.counterexample is not None:
        click.echo(f"  It breaks at {setting_words(study, box.counterexample)}.")
    rows = [window_row(box, factor) for factor in study.numeric if box.status == "proven"]
    if rows:
        click.echo("")
        print_table(WINDOW_HEADER, rows)
        click.echo(f"\n{SINGLY_WARNING}")
    click.echo("Cautions: " + " ".join(CAUTIONS))
