"""``wideberth start``."""

from __future__ import annotations

import click

from wideberth.cli.frame import guarded


@click.command("start")
@click.argument("study_dir", type=click.Path())
@guarded
def command(study_dir: str) -> int:
    """Make a new study folder with a commented template.

    Example: wideberth start my-study
    """
    from wideberth.study.template import start_study

    for path in start_study(study_dir):
        click.echo(f"wrote {path}")
    click.echo("Edit study.toml, fill in runs.csv, then run: wideberth check " + study_dir)
    return 0
