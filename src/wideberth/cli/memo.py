"""``wideberth memo``."""

from __future__ import annotations

from pathlib import Path

import click

from wideberth.cli.frame import guarded, json_option, quiet_option, seed_option, study_argument


@click.command("memo")
@study_argument
@click.option("--out", type=click.Path(), help="Folder to write to, instead of the study's own.")
@seed_option
@json_option
@quiet_option
@guarded
def command(
    study_dir: str, *, out: str | None, seed: int | None, as_json: bool, quiet: bool
) -> int:
    """Run all steps and write memo.html and record.json.

    Example: wideberth memo my-study
    """
    from wideberth.chain.as_json import dumps, record_json
    from wideberth.chain.record import build_record
    from wideberth.cli.progress import ProgressLine
    from wideberth.report.memo import write_memo
    from wideberth.report.wording import status_sentence
    from wideberth.study.reading import read_study

    study = read_study(study_dir)
    progress = ProgressLine(quiet=quiet or as_json)
    record = build_record(study, seed=seed, progress=progress)
    progress("memo", 0.97)
    paths = write_memo(record, Path(out) if out else study.directory)
    progress.close()
    status = record.choice.status
    if as_json:
        click.echo(dumps(record_json(record)), nl=False)
    else:
        for path in paths:
            click.echo(f"wrote {path}")
        click.echo(f"{status}: {status_sentence(record.choice)}")
    return 0 if status == "met" else 3
