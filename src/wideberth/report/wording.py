"""The fixed sentences that doors and memo share, so that both say the same."""

from __future__ import annotations

from wideberth.decide.records import Choice, LimitVerdict, Status
from wideberth.report.numbers import format_value
from wideberth.study.records import GuardKind, Study

STATUS_SENTENCE: dict[Status, str] = {
    "met": "Every limit holds with its guard at this setpoint, over its whole room.",
    "conflict": "No setting holds every limit: they cannot hold together. The setting shown breaks"
    " them least; it is not a recommendation.",
    "provisional": "No setting can be proven here whatever was searched; this one meets every"
    " guard as if it had been fixed in advance. It is provisional until confirmed.",
    "unproven": "These runs cannot prove a guarded limit at any setting. The setting shown comes"
    " closest; it is not a recommendation.",
    "unreached": "No setting inside the limits reaches every goal: the overall desirability is 0"
    " everywhere. The setting shown comes closest.",
    "unsupported": "A model that the answer rests on must not be used, or the setting was never"
    " explored. The numbers are shown, but they support no setting.",
}

_ASKED_SENTENCE: dict[Status, str] = {
    "conflict": "This setting breaks a limit on the fitted means.",
    "provisional": "This setting meets every guard as one fixed before the runs, but not as"
    " one that was searched for. It is provisional until confirmed.",
    "unproven": "This setting meets the limits on the fitted means, but the runs do not prove it.",
    "unreached": "This setting holds the limits but does not reach every goal.",
}


def status_sentence(choice: Choice) -> str:
    """Say what the status means, for a setting that was found or one that was given."""
    found = STATUS_SENTENCE[choice.status]
    return _ASKED_SENTENCE.get(choice.status, found) if choice.asked else found


CAUTIONS = (
    "An empirical model is valid only where runs were made; it is no hazard review.",
    (
        "Safety limits come from the site's own process-safety work and local codes; changes go"
        " through the site's management of change and licensed practice."
    ),
    "Confirm at the intended scale before use.",
)


def guard_sentence(kind: GuardKind, confidence: float, share: float) -> str:
    """Say what a guard asks for."""
    sure = f"{100 * confidence:g} % confidence"
    return {
        "none": "the fitted mean meets it",
        "mean": f"the true mean meets it, with {sure}",
        "batch": f"one future batch meets it, with {sure}",
        "share": f"at least {100 * share:g} % of batches meet it, with {sure}",
    }[kind]


def limit_words(verdict: LimitVerdict) -> str:
    """Word a limit: ``at most 45 W/kg``."""
    word = "at least" if verdict.side == "low" else "at most"
    return f"{word} {verdict.value:.6g} {verdict.unit}".rstrip()


def margin_words(verdict: LimitVerdict) -> str:
    """Word a margin: how far from being broken, in its own measure."""
    if verdict.margin is None:
        return f"not judged: {verdict.reason}"
    size = format_value(abs(verdict.margin), 0.1)
    counted = "batch sd" if verdict.margin_in == "batch sd" else "% of the response's range"
    return f"{size} {counted} to spare" if verdict.met else f"broken by {size} {counted}"


def promise(choice: Choice) -> str:
    """State what a simultaneous guard promises, and what it does not; empty without one."""
    if choice.status != "met":
        return ""
    guarded = [v for v in choice.limits if v.guard != "none" and v.point == "chosen"]
    if not guarded:
        return ""
    wrong = 100 * (1 - min(verdict.confidence for verdict in guarded))
    return (
        f"A method that names a setting like this is wrong in at most {wrong:.2g} of 100 studies,"
        " however the setting was searched for, as long as the model's form is right and the"
        " noise is normal. It does not say how likely this one setting is to be safe."
    )


def unknowns(study: Study) -> tuple[str, ...]:
    """Say what these runs cannot tell."""
    context = study.context
    held = f" ({context.held_constant})" if context.held_constant else ""
    constant = f"Whatever was held constant{held} is not in the model"
    known = [f"{constant}: other lots, operators and analytical methods may behave differently."]
    if context.scale_run and context.scale_intended and context.scale_run != context.scale_intended:
        known.append(
            f"Every number speaks of batches at the scale that was run ({context.scale_run}); what"
            f" changes at {context.scale_intended} is not known."
        )
    else:
        known.append("Every number speaks of batches at the scale that was run.")
    if study.runs.blocks:
        known.append(
            f"Limits are judged at the worst of {', '.join(study.runs.blocks)}; other blocks may"
            " differ."
        )
    return tuple(known)
