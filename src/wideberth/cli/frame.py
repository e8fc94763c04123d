"""What every command shares: its options, how it fails, and how it prints."""

from __future__ import annotations

import os
import sys
from collections.abc import Callable, Iterable, Sequence
from functools import wraps
from typing import TYPE_CHECKING, Any, ParamSpec

import click

from wideberth.errors import InputError, refusal

if TYPE_CHECKING:
    from wideberth.study.records import Study

P = ParamSpec("P")
Command = Callable[P, int]


def study_argument(function: Callable[P, Any]) -> Callable[P, Any]:
    """Take the study folder."""
    return click.argument("study_dir", type=click.Path())(function)


def json_option(function: Callable[P, Any]) -> Callable[P, Any]:
    """Take ``--json``."""
    return click.option(
        "--json", "as_json", is_flag=True, help="Print the answer as JSON and nothing else."
    )(function)


def seed_option(function: Callable[P, Any]) -> Callable[P, Any]:
    """Take ``--seed``."""
    return click.option(
        "--seed",
        type=click.IntRange(min=0),
        help="Seed of the simulations, instead of the study's.",
    )(function)


def quiet_option(function: Callable[P, Any]) -> Callable[P, Any]:
    """Take ``--quiet``."""
    return click.option("--quiet", is_flag=True, help="Show no progress.")(function)


def at_option(function: Callable[P, Any]) -> Callable[P, Any]:
    """Take ``--at``."""
    return click.option("--at", help="Judge this setting instead: NAME=VALUE,NAME=VALUE,...")(
        function
    )


def draws_option(function: Callable[P, Any]) -> Callable[P, Any]:
    """Take ``--draws``."""
    return click.option(
        "--draws",
        "n_draws",
        type=click.IntRange(min=100),
        default=2000,
        show_default=True,
        help="Number of draws; 2000 serve a report.",
    )(function)


def guarded(function: Command[P]) -> Callable[P, None]:
    """Turn what went wrong into words and an exit code, and the command's result into one."""

    @wraps(function)
    def run(*args: P.args, **kwargs: P.kwargs) -> None:
        as_json = bool(kwargs.get("as_json", False))
        try:
            code = function(*args, **kwargs)
        except InputError as error:
            _print_faults(error, as_json=as_json)
            code = 2
        except BrokenPipeError:
            # whoever read the output has gone; nothing is wrong
            os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
            code = 0
        except (click.ClickException, click.exceptions.Exit, click.Abort):
            raise
        except Exception as error:
            if os.environ.get("WIDEBERTH_DEBUG"):
                raise
            click.echo(
                f"wideberth failed: {type(error).__name__}: {error}\nThis is a fault of wideberth,"
                " not of your study. Set WIDEBERTH_DEBUG=1 to see where, and report it.",
                err=True,
            )
            code = 1
        raise SystemExit(code)

    return run


def _print_faults(error: InputError, *, as_json: bool) -> None:
    if as_json:
        from wideberth.chain.as_json import dumps, refused_json

        click.echo(dumps(refused_json(error.faults)), nl=False)
        return
    n_faults = len(error.faults)
    click.echo(f"{n_faults} {'thing is' if n_faults == 1 else 'things are'} wrong:", err=True)
    for fault in error.faults:
        click.echo(f"- {fault.where}: {fault.what}\n  {fault.mend}", err=True)


def read_at(study: Study, text: str | None, option: str = "--at") -> dict[str, float | str] | None:
    """Read a setting given with an option, ``None`` when none was."""
    if text is None:
        return None
    numeric = {factor.name for factor in study.numeric}
    setting: dict[str, float | str] = {}
    for part in text.split(","):
        name, equals, value = (piece.strip() for piece in part.partition("="))
        if not equals or not value:
            raise refusal(f"'{part}' is no NAME=VALUE", option, "write catalyst=1.2,pressure=8")
        if name in setting:
            raise refusal(f"{name} is given twice", option, "give every factor once")
        setting[name] = value
        if name in numeric:
            try:
                setting[name] = float(value)
            except ValueError as error:
                raise refusal(f"{name} is '{value}'", option, "give a number") from error
    return setting


def read_ranges(text: str | None, option: str) -> dict[str, tuple[float, float]]:
    """Read ranges given with an option as ``NAME=LOW:HIGH,...``; empty when none were."""
    ranges: dict[str, tuple[float, float]] = {}
    for part in text.split(",") if text is not None else ():
        name, equals, ends = (piece.strip() for piece in part.partition("="))
        low, colon, high = ends.partition(":")
        if not equals or not colon:
            raise refusal(f"'{part}' is no NAME=LOW:HIGH", option, "write pressure=8:10")
        if name in ranges:
            raise refusal(f"{name} is given twice", option, "give every factor once")
        try:
            ranges[name] = float(low), float(high)
        except ValueError as error:
            raise refusal(f"{name} is '{ends}'", option, "give two numbers") from error
    return ranges


def print_table(header: Sequence[str], rows: Iterable[Sequence[str]]) -> None:
    """Print aligned columns; the first is flush left, the others flush right."""
    lines = [list(header), *(list(row) for row in rows)]
    widths = [max(len(line[i]) for line in lines) for i in range(len(header))]
    for line in lines:
        cells = [line[0].ljust(widths[0])]
        cells += [cell.rjust(width) for cell, width in zip(line[1:], widths[1:], strict=True)]
        click.echo("  " + "  ".join(cells).rstrip())


def print_findings(findings: Iterable[Any]) -> None:
    """Print findings, one a line, worst mark first in each."""
    marks = {"do not use": "DO NOT USE", "look": "look", "fine": "fine"}
    for finding in findings:
        click.echo(f"  [{marks[finding.grade]}] {finding.text}")
