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
    from wideberth.study.records import Study


@click.command("fit")
@study_argument
@click.option("--report", is_flag=True, help="Print everything: equations, variance, tests, runs.")
@click.option(
    "--figures",
    type=click.Path(),
    help="Folder to draw the residuals to, one sheet a response and one of all.",
)
@json_option
@guarded
def command(study_dir: str, *, report: bool, figures: str | None, as_json: bool) -> int:
    """Fit the models and show how well they describe the runs.

    Example: wideberth fit my-study --report --figures residuals
    """
    from pathlib import Path

    from wideberth.chain.as_json import dumps, fit_json
    from wideberth.chain.files import write_all
    from wideberth.fit.models import fit
    from wideberth.study.reading import read_study

    study = read_study(study_dir)
    models = fit(study)
    sheets = {}
    if figures is not None:
        from wideberth.report.residual_sheets import residual_sheets

        sheets = {Path(figures) / name: text for name, text in residual_sheets(models).items()}
        write_all({path: text.encode("utf-8") for path, text in sheets.items()})
    if as_json:
        click.echo(dumps(fit_json(models)), nl=False)
        return 0
    for one in study.left_out:
        click.echo(one.words())
    for model in models.models:
        _print_model(model)
        if report:
            _print_report(study, model)
    for path in sheets:
        click.echo(f"wrote {path}")
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
                _p(row.p),
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
        found = with_unit(format_value(lack.found_size, lack.found_size), model.unit)
        click.echo(
            f"  lack of fit: F {lack.f:.2f} on {lack.df[0]} and {lack.df[1]}, p {lack.p:.3f};"
            f" the repeated runs would show one of {found} in 4 of 5 studies"
        )
    print_findings(model.findings)


def _print_report(study: Study, model: Model) -> None:
    from wideberth.fit.equations import own_units

    for equation in own_units(study, model):
        levels = ", ".join(f"{name} {level}" for name, level in equation.levels.items())
        click.echo(f"\n  equation in own units{f' at {levels}' if levels else ''}")
        print_table(
            ("term", "coefficient"),
            [("constant" if t == "1" else t, f"{v:.8g}") for t, v in equation.terms.items()],
        )
    if model.exact:
        return
    click.echo("\n  analysis of variance")
    print_table(
        ("part", "df", "sum of squares", "mean square", "F", "p"),
        [
            (
                part.source,
                str(part.df),
                f"{part.squares:.5g}",
                f"{part.squares / part.df:.5g}" if part.df and part.source != "total" else "",
                "" if part.f is None else f"{part.f:.2f}",
                _p(part.p),
            )
            for part in model.anova
        ],
    )
    if model.checks:
        click.echo("\n  checks")
        print_table(
            ("check", "statistic", "df", "p"),
            [
                (
                    check.kind,
                    f"{check.statistic:.3f}",
                    "simulated" if check.df is None else f"{check.df[0]} and {check.df[1]}",
                    _p(check.p),
                )
                for check in model.checks
            ],
        )
        print_findings(model.checks)
    click.echo("\n  runs")
    print_table(
        ("row", "measured", "fitted", "residual", "leverage", "studentized", "Cook"),
        [
            (
                str(run.row),
                f"{run.observed:.5g}",
                f"{run.fitted:.5g}",
                f"{run.residual:.3g}",
                f"{run.leverage:.3f}",
                "" if run.studentized is None else f"{run.studentized:.2f}",
                "" if run.cook is None else f"{run.cook:.3f}",
            )
            for run in model.runs
        ],
    )


def _p(value: float | None) -> str:
    if value is None:
        return ""
    return f"{value:.3f}" if value >= 0.001 else "<0.001"
