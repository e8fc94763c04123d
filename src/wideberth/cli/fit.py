"""``wideberth fit``."""

from __future__ import annotations

from typing import TYPE_CHECKING

import click

from wideberth.cli.frame import (
    guarded,
    json_option,
    print_findings,
    print_table,
    study_argument,
)

if TYPE_CHECKING:
    from wideberth.fit.records import Model


@click.command("fit")
@study_argument
@json_option
@guarded
def command(study_dir: str, *, as_json: bool) -> int:
    """Fit the models and show how well they describe the runs.

    Example: wideberth fit my-study
    """
    from wideberth.chain.as_json import dumps, fit_json
    from wideberth.fit.models import fit
    from wideberth.study.reading import read_study

    study = read_study(study_dir)
    models = fit(study)
    if as_json:
        click.echo(dumps(fit_json(models)), nl=False)
        return 0
    for one in study.left_out:
        click.echo(one.words())
    for model in models.models:
        _print_model(model)
    return 0


def _print_model(model: Model) -> None:
    from wideberth.report.numbers import format_value, with_unit

    unit = f" [{model.unit}]" if model.unit else ""
    click.echo(f"\n{model.response}{unit}")
    if model.exact:
        click.echo("  known exactly by its formula")
        return
    print_table(
        ("term", "coded", "se", "t", "p"),
        [
            (
                row.term,
                format_value(row.coded, row.se),
                "" if row.se is None else format_value(row.se, row.se),
                "" if row.t is None else f"{row.t:.2f}",
                "" if row.p is None else f"{row.p:.3f}" if row.p >= 0.001 else "<0.001",
            )
            for row in model.table
        ],
    )
    parts = [f"{model.n_runs} runs", f"{model.df_residual} residual degrees of freedom"]
    if model.s is not None:
        of = "" if model.between is None else " of a batch in a new block"
        of += "" if model.pooled is None else f" on {model.df_error} with the history"
        parts.append(f"s {with_unit(format_value(model.s, model.s), model.unit)}{of}")
    for label, value in (
        ("R2", model.r2),
        ("adjusted R2", model.r2_adjusted),
        ("PRESS R2", model.r2_press),
    ):
        if value is not None:
            parts.append(f"{label} {value:.3f}")
    click.echo("  " + ", ".join(parts))
    lack = model.lack_of_fit
    if lack is not None:
        click.echo(
            f"  lack of fit: F {lack.f:.2f} on {lack.df[0]} and {lack.df[1]}, p {lack.p:.3f}"
        )
    print_findings(model.findings)
