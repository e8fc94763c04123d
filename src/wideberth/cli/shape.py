"""``wideberth shape``."""

from __future__ import annotations

from typing import TYPE_CHECKING, Literal

import click

from wideberth.cli.frame import guarded, json_option, print_table, study_argument

if TYPE_CHECKING:
    from wideberth.study.records import Study
    from wideberth.surface.records import Shape


@click.command("shape")
@study_argument
@click.option("--radii", help="Coded distances of the ridge path, like 0.5,1,1.5.")
@click.option(
    "--toward",
    type=click.Choice(["more", "less"]),
    help="Which end the ridge path follows; by default what the goal wants.",
)
@json_option
@guarded
def command(
    study_dir: str, *, radii: str | None, toward: Literal["more", "less"] | None, as_json: bool
) -> int:
    """Describe each response's geometry: canonical analysis and ridge path.

    Example: wideberth shape my-study --radii 0.5,1
    """
    from wideberth.chain.as_json import dumps, shape_json
    from wideberth.fit.models import fit
    from wideberth.study.reading import read_study
    from wideberth.surface.ridge import shape

    study = read_study(study_dir)
    shapes = shape(fit(study), radii=_numbers(radii), toward=toward)
    if as_json:
        click.echo(dumps(shape_json(shapes, study)), nl=False)
        return 0
    for one in shapes:
        _print_shape(one, study)
    return 0


def _numbers(text: str | None) -> list[float] | None:
    from wideberth.errors import refusal

    if text is None:
        return None
    try:
        return [float(part) for part in text.split(",")]
    except ValueError as error:
        raise refusal(f"'{text}' is no list of numbers", "--radii", "write 0.5,1,1.5") from error


def _print_shape(one: Shape, study: Study) -> None:
    from wideberth.report.numbers import format_setting, format_value, with_unit

    levels = ", ".join(f"{name} {level}" for name, level in one.levels.items())
    click.echo(f"\n{one.response}{f' at {levels}' if levels else ''}: {one.sentence}")
    if one.stationary is None:
        click.echo(f"  no stationary point: {one.reason}")
    else:
        place = ", ".join(
            f"{name} {format_value(float(value))}"
            if isinstance(value, float)
            else f"{name} {value}"
            for name, value in one.stationary.setting.items()
        )
        where = "" if one.stationary.explored else " (outside the explored region)"
        mean = with_unit(format_value(one.stationary.mean), one.unit)
        click.echo(f"  stationary point{where}: {place}; fitted mean there {mean}")
    for eigen in one.eigenvalues:
        interval = ""
        if eigen.interval is not None:
            interval = f" ({format_value(eigen.interval[0])} to {format_value(eigen.interval[1])})"
        along = ", ".join(f"{name} {value:+.2f}" for name, value in eigen.direction.items())
        click.echo(f"  curvature {format_value(eigen.value)}{interval} along {along}")
    names = list(one.ridge[0].setting) if one.ridge else []
    click.echo(f"  ridge path toward {one.toward}:")
    print_table(
        ("distance", *names, one.response, "se", "explored"),
        [
            (
                f"{point.radius:.2f}",
                *(
                    format_setting(study, name, value) if isinstance(value, float) else str(value)
                    for name, value in point.setting.items()
                ),
                format_value(point.mean, point.se),
                "" if point.se is None else format_value(point.se, point.se),
                "yes" if point.explored else "no",
            )
            for point in one.ridge
        ],
    )
