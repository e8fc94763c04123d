"""The shell door: parse, call, show. Nothing heavy is imported until a command runs."""

from __future__ import annotations

import os
from importlib import import_module

import click

_COMMANDS = (
    "start",
    "check",
    "plan",
    "fit",
    "shape",
    "recommend",
    "frontier",
    "uncertainty",
    "window",
    "robustness",
    "next",
    "memo",
)


class _LazyCommands(click.Group):
    """Commands in the order a study goes through them, each loaded when it is asked for."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        return list(_COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        if cmd_name not in _COMMANDS:
            return None
        module = import_module(f"wideberth.cli.{cmd_name}")
        command: click.Command = module.command
        return command


@click.group(cls=_LazyCommands, context_settings={"help_option_names": ["--help", "-h"]})
@click.version_option(package_name="wideberth", message="wideberth %(version)s")
def main() -> None:
    """Put one setpoint, with ranges, in front of the people who sign it.

    A study is a folder with study.toml (what you state) and a run sheet (what you measured).

    Exit codes: 0 done; 2 input or usage is wrong; 3 done, but no setpoint can be recommended;
    1 a fault of wideberth itself.
    """
    # one thread, so that sums come out in the same order every time
    for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
        os.environ.setdefault(name, "1")
