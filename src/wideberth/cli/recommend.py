"""``wideberth recommend``."""

from __future__ import annotations

from typing import TYPE_CHECKING

import click

from wideberth.cli.frame import (
    at_option,
    guarded,
    json_option,
    print_findings,
    print_table,
    quiet_option,
    read_at,
    seed_option,
    study_argument,
)

if TYPE_CHECKING:
    from wideberth.decide.alternatives import Alternative
    from wideberth.decide.records import Choice
    from wideberth.fit.records import Models
    from wideberth.study.records import Study


@click.command("recommend")
@study_argument
@at_option
@click.option("--fix", help="Fix some factors and settle the rest: NAME=VALUE,...")
@click.option(
    "--room",
    type=click.Choice(["stated", "none"]),
    default="stated",
    show_default=True,
    help="none: the bare optimum, without the room of the tolerances.",
)
@click.option("--give-ups", "costs", is_flag=True, help="Say what each limit and goal costs.")
@click.option("--aims", is_flag=True, help="Set other aims beside the best compromise.")
@seed_option
@json_option
@quiet_option
@guarded
def command(
    study_dir: str,
    *,
    at: str | None,
    fix: str | None,
    room: str,
    costs: bool,
    aims: bool,
    seed: int | None,
    as_json: bool,
    quiet: bool,
) -> int:
    """Name the setpoint: the best compromise of the goals inside all limits.

    Example: wideberth recommend my-study --at catalyst=1.2,pressure=8,substrate=140
    """
    from wideberth.chain.as_json import (
        alternatives_json,
        dumps,
        give_ups_json,
        prospects_json,
        recommend_json,
    )
    from wideberth.cli.progress import ProgressLine
    from wideberth.decide.alternatives import alternatives
    from wideberth.decide.every_run import with_every_run
    from wideberth.decide.give_ups import give_ups
    from wideberth.decide.prospects import prospects
    from wideberth.decide.recommend import solve
    from wideberth.fit.models import fit
    from wideberth.report.give_up_words import give_up_sentence
    from wideberth.report.left_out_words import every_run_sentences
    from wideberth.report.prospect_words import prospect_sentences
    from wideberth.study.reading import read_study
    from wideberth.uncertainty.assess import draws_for

    study = read_study(study_dir)
    progress = ProgressLine(quiet=quiet or as_json)
    setting, fixed = read_at(study, at), read_at(study, fix, "--fix")
    models, kept = fit(study), room == "stated"
    problem, choice = solve(models, seed=seed, at=setting, fix=fixed, room=kept, progress=progress)
    whole = with_every_run(models, choice, fix=fixed, room=kept, progress=progress)
    found = give_ups(problem, choice, progress=progress) if costs else ()
    draws = draws_for(problem, choice)
    hopes = prospects(problem, choice, draws, progress=progress)
    others = alternatives(problem, choice, draws, progress=progress) if aims else ()
    progress.close()
    if as_json:
        content = {**recommend_json(choice, study, whole), "prospects": prospects_json(hopes)}
        content |= {"give_ups": give_ups_json(found)} if costs else {}
        content |= {"alternatives": alternatives_json(others)} if aims else {}
        click.echo(dumps(content), nl=False)
    else:
        print_choice(choice, study)
        if study.left_out:
            click.echo("\nLeft out of the fit")
        for stated in study.left_out:
            click.echo(f"  {stated.words()}")
        for sentence in every_run_sentences(whole, choice, study) if whole else ():
            click.echo(f"  {sentence}")
        for sentence in prospect_sentences(hopes, choice, study):
            click.echo(sentence)
        if aims:
            _print_aims(others, problem.models)
        if costs:
            click.echo("\nWhat each limit and goal costs")
        for one in found:
            click.echo(f"  {give_up_sentence(one)}")
    return 0 if choice.status == "met" else 3


def print_choice(choice: Choice, study: Study) -> None:
    """Print the answer on one screen, what spoils trust first."""
    from wideberth.report.wording import CAUTIONS, promise, proof_sentence, status_sentence

    doubts = [finding for finding in choice.findings if finding.grade != "fine"]
    if doubts:
        click.echo("Before anything else:")
        print_findings(doubts)
        click.echo("")
    click.echo(f"{choice.status}: {status_sentence(choice)}")
    for conflict in choice.conflicts:
        click.echo(f"  {conflict.text}")
    _print_setting(choice, study)
    _print_predictions(choice)
    _print_limits(choice)
    for sentence in choice.edge:
        click.echo(sentence)
    if choice.confirmation is not None:
        click.echo(f"Confirmation: {choice.confirmation.text}.")
    if choice.desirability is not None:
        click.echo(f"Overall desirability {choice.desirability:.3f} (1 is ideal).")
    proven = proof_sentence(choice)
    if proven:
        click.echo(proven)
    for goal in choice.goals:
        if goal.defaulted:
            click.echo(f"Goal of {goal.response}: {goal.defaulted}.")
    said = promise(choice)
    if said:
        click.echo(said)
    click.echo("Cautions: " + " ".join(CAUTIONS))


def _print_setting(choice: Choice, study: Study) -> None:
    from wideberth.report.numbers import decimals_of, format_setting, format_value, named

    if choice.setpoint is None:
        return
    click.echo("\nSetting judged" if choice.asked else "\nSetpoint")
    units = {factor.name: factor.unit for factor in study.factors}
    numeric = {factor.name: factor for factor in study.numeric}
    rows = []
    for name, value in choice.setpoint.items():
        around = choice.factors.get(name)
        room = allowed = explored = ""
        if around is not None:
            digits = decimals_of(numeric[name])
            room = _ends(around.room, digits) if around.room else "no tolerance stated"
            allowed = " to ".join(format_value(end) for end in around.allowed)
            explored = _ends(around.explored, digits)
        rows.append(
            (named(name, units[name]), format_setting(study, name, value), room, allowed, explored)
        )
    print_table(("factor", "set", "hold within", "allowed", "explored"), rows)


def _print_aims(others: tuple[Alternative, ...], models: Models) -> None:
    from wideberth.report.rows import alternative_header, alternative_row

    click.echo("\nOther aims side by side (in brackets: the spread that setting errors alone make)")
    study = models.study
    rows = [alternative_row(one, others, study) for one in others if one.setpoint is not None]
    print_table(alternative_header(models), rows)
    for one in others:
        if one.reason:
            click.echo(f"  {one.aim}: {one.reason}")


def _ends(ends: tuple[float, float], digits: int) -> str:
    return f"{ends[0]:.{digits}f} to {ends[1]:.{digits}f}"


def _print_predictions(choice: Choice) -> None:
    from wideberth.report.numbers import format_range, format_value, named

    click.echo("\nExpected there")
    rows = []
    for name, prediction in choice.predictions.items():
        interval, batch = prediction.mean_interval, prediction.batch_interval
        half = (interval[1] - interval[0]) / 2 if interval else None
        spread = (batch[1] - batch[0]) / 2 if batch else None
        rows.append(
            (
                named(name, prediction.unit),
                format_value(prediction.mean, half or None),
                format_range(*interval, half) if interval and half else "",
                format_range(*batch, spread) if batch and spread else "",
            )
        )
    print_table(("response", "mean", "95 % interval", "95 % of single batches"), rows)


def _print_limits(choice: Choice) -> None:
    from wideberth.report.wording import guard_sentence, limit_words, margin_words

    if not choice.limits and not choice.constraints:
        return
    click.echo("\nLimits, judged over the whole room")
    for verdict in choice.limits:
        mark = "met" if verdict.met else "NOT MET"
        guard = guard_sentence(verdict.guard, verdict.confidence, verdict.share)
        block = f"; worst block {verdict.block}" if verdict.block else ""
        click.echo(
            f"  {verdict.response} {limit_words(verdict)}: {mark}, {margin_words(verdict)}"
            f" ({guard}{block})"
        )
    for constraint in choice.constraints:
        mark = "met" if constraint.met else "NOT MET"
        word = "at most" if constraint.side == "at_most" else "at least"
        click.echo(
            f"  {constraint.name} {word} {constraint.bound:g}: {mark}, {constraint.value:.5g} at"
            " its worst"
        )
    if choice.ruling:
        click.echo(f"  The limit that rules: {choice.ruling}.")
    click.echo("")
