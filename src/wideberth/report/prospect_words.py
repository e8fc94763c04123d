"""What more evidence would buy, in sentences that shell and memo share."""

from __future__ import annotations

from wideberth.decide.confirmation import Chance
from wideberth.decide.prospects import History, Prospects, Provisional, Reach
from wideberth.decide.records import Choice
from wideberth.report.numbers import format_value, with_unit
from wideberth.report.wording import batches_in_100, setting_words
from wideberth.study.records import Study


def prospect_sentences(found: Prospects, choice: Choice, study: Study) -> tuple[str, ...]:
    """Say what more evidence would buy, or what these runs can still prove."""
    said = []
    if found.provisional is not None:
        if choice.status == "met":
            said.append(_beyond_proof(found.provisional, study))
        else:
            said += _of_runs(found.provisional, with_text=choice.status != "provisional")
    if found.history is not None:
        said.append(_of_history(found.history, study))
    said += [_provable(what, getattr(found, what)) for what in found.asked]
    return (*said, *(_reach(one) for one in found.reach))


def _beyond_proof(one: Provisional, study: Study) -> str:
    gain = "" if one.gain is None else f", {one.gain:.3f} more than the proven setpoint"
    runs = " ".join(_of_runs(one, with_text=True))
    return (
        f"Not proven, but open to confirmation: {setting_words(study, one.setpoint)} would score"
        f" {one.desirability:.3f}{gain}. {runs}"
    ).rstrip()


def _of_runs(one: Provisional, *, with_text: bool) -> list[str]:
    said = []
    if with_text and one.confirmation is not None:
        text = one.confirmation.text
        said.append(f"{text[0].upper()}{text[1:]}.")
    if one.chances:
        said.append(f"{chance_words(one.chances)}.")
    return said


def chance_words(chances: tuple[Chance, ...]) -> str:
    """Say how likely so many runs are to prove every guarded limit."""
    parts = [
        f"{chance.runs} {'run' if chance.runs == 1 else 'runs'} {_in_100(chance.share)}"
        for chance in chances
    ]
    return f"Chances that confirmation runs there prove every guarded limit: {', '.join(parts)}"


def _in_100(share: float) -> str:
    return batches_in_100(share).replace(" batches", "")


def _of_history(one: History, study: Study) -> str:
    lead = (
        "A batch standard deviation pooled from production history"
        f" ({one.df} degrees of freedom, the same size as found here)"
    )
    if not one.proves or one.setpoint is None:
        return f"{lead} would not be enough to prove a setpoint."
    score = (
        "" if one.desirability is None else f", with overall desirability {one.desirability:.3f}"
    )
    return f"{lead} would prove {setting_words(study, one.setpoint)}{score}."


def _provable(what: str, value: float | None) -> str:
    scope = "every guarded limit" if what == "confidence" else "the limits guarded by a share"
    if value is None:
        return f"These runs cannot prove {scope} with a {what} of even 51 % anywhere."
    return f"These runs can prove {scope} somewhere with a {what} of at most {100 * value:g} %."


def _reach(one: Reach) -> str:
    best = with_unit(format_value(one.best), one.unit)
    poor = with_unit(f"{one.poor:.6g}", one.unit)
    if one.reached:
        return f"{one.response} alone reaches {best} inside the limits, better than poor ({poor})."
    return f"{one.response} reaches {best} at best inside the limits; its poor bound is {poor}."
