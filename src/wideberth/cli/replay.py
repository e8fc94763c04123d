"""``wideberth replay``."""

from __future__ import annotations

from dataclasses import asdict, replace
from pathlib import Path
from typing import TYPE_CHECKING

import click

from wideberth.cli.frame import guarded, json_option, quiet_option

if TYPE_CHECKING:
    from wideberth.chain.as_json import Json
    from wideberth.chain.record import Record
    from wideberth.chain.replay import Replay

_DIFFERS = 4


@click.command("replay")
@click.argument("record", type=click.Path())
@click.option("--study", type=click.Path(), help="Folder of the inputs, instead of the record's.")
@json_option
@quiet_option
@guarded
def command(record: str, *, study: str | None, as_json: bool, quiet: bool) -> int:
    """Compute a memo's record again, from the study in it, and compare every number.

    Example: wideberth replay my-study/record.json
    """
    from wideberth.chain.as_json import dumps
    from wideberth.chain.from_json import read_record, study_of
    from wideberth.chain.record import build_record
    from wideberth.chain.replay import compare
    from wideberth.cli.progress import ProgressLine

    path = Path(record)
    recorded = read_record(path)
    stated = study_of(recorded, path)
    progress = ProgressLine(quiet=quiet or as_json)
    anew = build_record(stated, seed=recorded["seed"], n_draws=recorded["draws"], progress=progress)
    progress("comparing", 0.98)
    answer = compare(recorded, _as_printed_then(anew, recorded), Path(study or path.parent))
    progress.close()
    if as_json:
        click.echo(dumps({"command": "replay", **asdict(answer)}), nl=False)
    else:
        _show(answer)
    return _DIFFERS if answer.outcome == "differs" else 0


def _as_printed_then(anew: Record, recorded: Json) -> Json:
    """Give the new record with the old one's versions in its words, and its own beside them."""
    from wideberth.report.memo import Aside, full_record

    aside = Aside(recorded["compared"], recorded["tried"])
    then = replace(anew, version=recorded["version"], packages=recorded["packages"])
    return {
        **full_record(then, aside),
        "version": anew.version,
        "packages": dict(anew.packages),
    }


def _show(answer: Replay) -> None:
    words = {
        "same bits": "The same bits: every number and every printed word of the record.",
        "same printed digits": "The same to the printed digits: every printed word is the same and"
        " every number to 1e-9 of its size.",
        "differs": "It differs.",
    }
    click.echo(words[answer.outcome])
    if answer.first is not None:
        first = answer.first
        lead = "First that differs" if answer.outcome == "differs" else "First with other bits"
        click.echo(
            f"{lead}: {first.place}: recorded {_short(first.recorded)}, now {_short(first.now)}"
        )
    for one in answer.made_elsewhere:
        click.echo(
            f"Made with {one.place} {_short(one.recorded)}, computed now with {_short(one.now)}"
        )
    for name, state in answer.inputs.items():
        click.echo(f"Input {name}: {state}")


def _short(value: object) -> str:
    text = "nothing" if value is None else str(value)
    return text if len(text) <= 60 else f"{text[:57]}..."
