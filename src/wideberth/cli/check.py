"""``wideberth check``."""

from __future__ import annotations

import click

from wideberth.cli.frame import guarded, json_option, print_findings, study_argument


@click.command("check")
@study_argument
@json_option
@guarded
def command(study_dir: str, *, as_json: bool) -> int:
    """Say everything that is wrong or doubtful in a study, at once.

    Example: wideberth check my-study
    """
    from wideberth.chain.as_json import check_json, dumps
    from wideberth.study.checking import check_study
    from wideberth.study.reading import read_study

    study = read_study(study_dir)
    findings = check_study(study)
    if as_json:
        click.echo(dumps(check_json(study, findings)), nl=False)
        return 0
    click.echo(
        f"{study.title}: {len(study.runs.rows)} runs, {len(study.factors)} factors,"
        f" {len(study.responses)} responses; nothing is wrong."
    )
    if findings:
        click.echo("Look again at:")
        print_findings(findings)
    return 0
