"""``wideberth memo``."""

from __future__ import annotations

import os
from pathlib import Path
from typing import TYPE_CHECKING

import click

from wideberth.cli.frame import guarded, json_option, quiet_option, seed_option, study_argument
from wideberth.errors import refusal

if TYPE_CHECKING:
    from wideberth.report.memo import Format
    from wideberth.study.records import Study


@click.command("memo")
@study_argument
@click.option("--out", type=click.Path(), help="Folder to write to, instead of the study's own.")
@click.option(
    "--format",
    "formats",
    default="html",
    show_default=True,
    help="What to write, separated by commas: html, pdf, docx.",
)
@click.option(
    "--compare",
    "earlier",
    type=click.Path(),
    help="Also say what changed since this earlier record.json, and why.",
)
@seed_option
@json_option
@quiet_option
@guarded
def command(
    study_dir: str,
    *,
    out: str | None,
    formats: str,
    earlier: str | None,
    seed: int | None,
    as_json: bool,
    quiet: bool,
) -> int:
    """Run all steps and write the memo and record.json.

    Example: wideberth memo my-study --format html,pdf,docx
    """
    from wideberth.chain.as_json import dumps, record_json
    from wideberth.chain.changes import compared_with, read_earlier
    from wideberth.chain.files import check_writable
    from wideberth.chain.record import build_record
    from wideberth.cli.progress import ProgressLine
    from wideberth.report.memo import Aside, full_record, write_memo
    from wideberth.report.wording import status_sentence
    from wideberth.study.reading import read_study

    wanted = _formats(formats)
    study = read_study(study_dir)
    folder = Path(out) if out else study.directory
    check_writable(folder)
    before = None if earlier is None else read_earlier(Path(earlier))
    tried, history = _history(study, seed)
    progress = ProgressLine(quiet=quiet or as_json)
    record = build_record(study, seed=seed, progress=progress)
    progress("memo", 0.97)
    compared = None if before is None else compared_with(*before, record_json(record))
    aside = Aside(compared, tried)
    paths = write_memo(record, folder, wanted, aside=aside, beside=history)
    progress.close()
    status = record.choice.status
    if as_json:
        click.echo(dumps(full_record(record, aside)), nl=False)
    else:
        for path in paths:
            click.echo(f"wrote {path}")
        click.echo(f"{status}: {status_sentence(record.choice)}")
    return 0 if status == "met" else 3


def _history(study: Study, seed: int | None) -> tuple[int | None, dict[Path, bytes]]:
    """Count what was tried, and give the history to write; nothing where it cannot be kept."""
    from wideberth.chain.history import FILE, read_history, tried_with

    past = read_history(study.directory)
    if not os.access(study.directory, os.W_OK):
        click.echo(f"{study.directory} cannot be written, so no history is kept", err=True)
        return None, {}
    tried, history = tried_with(study, study.seed if seed is None else seed, past)
    return tried, {study.directory / FILE: history}


def _formats(text: str) -> tuple[Format, ...]:
    from wideberth.report.memo import FORMATS

    asked = [part.strip().lower() for part in text.split(",")]
    for name in asked:
        if name not in FORMATS:
            raise refusal(
                f"'{name}' is no format of the memo",
                "--format",
                f"choose from {', '.join(FORMATS)}",
            )
    return tuple(name for name in FORMATS if name in asked)
