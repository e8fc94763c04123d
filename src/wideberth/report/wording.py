"""The fixed sentences that doors and memo share, so that both say the same."""

from __future__ import annotations

import math
from collections.abc import Mapping

from wideberth.decide.conformance import Conformance
from wideberth.decide.records import Choice, LimitVerdict, Status
from wideberth.operate.records import Window
from wideberth.report.numbers import decimals_of, format_setting, format_value, with_unit
from wideberth.study.records import GuardKind, NumericFactor, Setting, Study
from wideberth.uncertainty.records import Difference, Uncertainty

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

_NONE_PROVEN = (
    "That none does is proven on the fitted equations, over every allowed setting; it was not"
    " merely searched for."
)
_NONE_FOUND = "None was found; the proof that there is none stayed open within its budget of boxes."


def status_sentence(choice: Choice) -> str:
    """Say what the status means, for a setting that was found or one that was given."""
    found = STATUS_SENTENCE[choice.status]
    if choice.asked:
        return _ASKED_SENTENCE.get(choice.status, found)
    if choice.none_holds is None or choice.status == "unsupported":
        return found
    return f"{found} {_NONE_PROVEN if choice.none_holds else _NONE_FOUND}"


def proof_sentence(choice: Choice) -> str:
    """Say what no allowed setting can exceed; empty where nothing was proven."""
    if choice.desirability is None or choice.proof_gap is None:
        return ""
    bound = min(choice.desirability + choice.proof_gap, 1.0)
    # rounded outwards, so that the printed bound still bounds
    shown = math.ceil(bound * 1e4 - 1e-6) / 1e4
    step = "settable " if choice.unrounded.desirability != choice.desirability else "allowed "
    return (
        f"On the fitted equations no {step}setting that holds every limit can score above"
        f" {shown:.4f} of overall desirability; this one scores {choice.desirability:.4f}."
    )


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
    if study.future_blocks == "sample":
        known.append(
            f"{', '.join(study.runs.blocks)} are taken as a sample of the blocks to come; a block"
            " of another kind may differ by more."
        )
    elif study.runs.blocks:
        known.append(
            f"Limits are judged at the worst of {', '.join(study.runs.blocks)}; other blocks may"
            " differ."
        )
    return tuple(known)


SINGLY_WARNING = (
    "Ranges taken alone hold only while every other factor stays in its room; they do not hold"
    " together. The window does."
)


_HARDLY_LOST = 0.99
_COUNTS = 0.005
_SOURCE = {
    "equations": "doubt about the equations",
    "batches": "noise from batch to batch",
    "settings": "wandering settings",
}


def batches_in_100(share: float) -> str:
    """Write a share of batches as whole batches in 100, no finer."""
    if share > 0.99:
        return "more than 99 of 100 batches"
    if share < 0.01:
        return "fewer than 1 of 100 batches"
    return f"{int(100 * share)} of 100 batches"


def conformance_words(one: Conformance) -> str:
    """Word a conformance with its lower bound."""
    low = int(100 * min(one.lower, 0.99))
    least = f"at least {low}, 95 % sure" if low >= 1 else "perhaps none"
    block = f"; worst in {one.block}" if one.block else ""
    return f"{batches_in_100(one.mean)} ({least}{block})"


def together_sentences(sure: Uncertainty) -> tuple[str, ...]:
    """Say how many batches meet all limits together, with and without setting error."""
    if sure.conformance is None:
        return ("No limit is stated, so every batch meets all of them.",)
    words = conformance_words(sure.conformance)
    if not sure.setting_error_included or sure.conformance_exact_setting is None:
        return (f"All limits together: {words}; settings taken as held exactly.",)
    exact = conformance_words(sure.conformance_exact_setting)
    return (
        f"All limits together, settings wandering within their tolerances: {words}.",
        f"As if every batch were run at exactly the setting: {exact}.",
    )


def location_sentence(sure: Uncertainty) -> str:
    """Say how well the runs locate the optimum."""
    if sure.region is None:
        return "Where the optimum lies cannot be said."
    filled = _filled(sure.region.share_of_explored)
    if not sure.region.determined:
        return (
            f"The runs do not determine where the optimum lies: it may be anywhere in {filled} of"
            " what may be searched."
        )
    sentence = (
        f"The optimum of the true equations lies, {100 * sure.region.level:g} % sure, in a region"
        f" that fills {filled} of what may be searched"
    )
    edge = sure.edge_share or 0.0
    if edge >= 0.2:
        sentence += f"; in {100 * edge:.0f} of 100 draws it lies on the edge of that"
    if sure.region.share_of_edge is not None:
        sentence += f", and {_filled(sure.region.share_of_edge)} of the edge belongs to the region"
    return sentence + "."


def _filled(share: float) -> str:
    return "less than 1 %" if share < 0.01 else f"{100 * share:.0f} %"


def lost_sentences(sure: Uncertainty) -> tuple[str, ...]:
    """Say which limits and which source of error cost batches; empty where none are lost."""
    if sure.losses is None or sure.conformance is None or sure.conformance.mean > _HARDLY_LOST:
        return ()
    limits = sorted(sure.losses.limits.items(), key=lambda item: -item[1])
    broken = [f"{name} by {_lost(share)} of 100" for name, share in limits if share >= _COUNTS]
    sources = sorted(sure.losses.sources.items(), key=lambda item: -item[1])
    gains = [f"{_SOURCE[name]} {_lost(gain)}" for name, gain in sources if gain >= _COUNTS]
    said = [f"Batches that break a limit: {', '.join(broken)}."] if broken else []
    if gains:
        said.append(f"Batches of 100 gained if one source were gone: {', '.join(gains)}.")
    return tuple(said)


def _lost(share: float) -> str:
    return f"{100 * share:.0f}"


def loss_sentence(sure: Uncertainty, choice: Choice) -> tuple[str, ...]:
    """Say what may be lost against the unknown best, and how rosy the fitted optimum looks."""
    said = []
    if sure.possible_loss is not None:
        said.append(
            "Against the best setting of each draw it loses"
            f" {sure.possible_loss.median:.3f} of overall desirability in the middle and at most"
            f" {sure.possible_loss.bound:.3f} in 95 of 100 draws."
        )
    if sure.optimism is not None and choice.desirability is not None:
        said.append(
            "A fitted optimum looks too good, because it was picked where the noise helped it: the"
            f" overall desirability {choice.desirability:.3f} is about"
            f" {max(sure.optimism.desirability, 0):.3f} too much; corrected it is"
            f" {sure.optimism.corrected:.3f}."
        )
    return tuple(said)


def today_sentences(sure: Uncertainty) -> tuple[str, ...]:
    """Say what changes against today's setting, and whether it is shown to be better."""
    today = sure.today
    if today is None:
        return ()
    said = [today.verdict]
    if today.broken:
        said.append(f"Today's setting does not hold {', '.join(today.broken)}.")
    one = today.desirability
    if one is not None and one.interval is not None:
        low, high = one.interval
        said.append(
            f"Overall desirability changes by {one.mean:+.3f} (95 %: {low:+.3f} to {high:+.3f}),"
            " corrected for what the search flatters."
        )
    return tuple(said)


def difference_words(one: Difference) -> str:
    """Word a paired difference with its interval: ``+4.34 (+4.00 to +4.69)``."""
    if one.interval is None:
        return f"{format_value(one.mean)} (no interval: no degrees of freedom)"
    low, high = one.interval
    half = (high - low) / 2
    ends = [signed(end, half or None) for end in (one.mean, low, high)]
    return f"{ends[0]} ({ends[1]} to {ends[2]})" if half > 0 else f"{ends[0]} (exact)"


def signed(value: float, uncertainty: float | None) -> str:
    """Write a number with its sign."""
    text = format_value(value, uncertainty)
    return text if text.startswith("-") else f"+{text}"


def setting_words(study: Study, setting: Setting) -> str:
    """Write a setting in one line: ``catalyst 1.38 wt%, pressure 9.8 bar``."""
    units = {factor.name: factor.unit for factor in study.factors}
    return ", ".join(
        with_unit(f"{name} {format_setting(study, name, value)}", units[name])
        for name, value in setting.items()
    )


def window_sentence(box: Window) -> str:
    """Say what the window is, or that there is none."""
    if box.status == "none":
        return "No window: not every limit holds with its guard over the whole room."
    return (
        "Every limit holds with its guard everywhere in this window, all factors free at once:"
        " proven over the whole box."
    )


def ends_words(factor: NumericFactor, ends: tuple[float, float], *, inwards: bool = False) -> str:
    """Write two ends of a range to the digits a setting is worth, rounded inwards if asked."""
    digits = decimals_of(factor)
    low, high = ends
    if inwards:
        slack = 1e-7 * 10.0**-digits
        low = math.ceil((low - slack) * 10**digits) / 10**digits
        high = math.floor((high + slack) * 10**digits) / 10**digits
    return f"{low:.{digits}f} to {high:.{digits}f}"


def shares_words(shares: Mapping[str, float]) -> str:
    """Name the factors that make most of a variance, largest first."""
    large = sorted(shares.items(), key=lambda item: -item[1])
    return ", ".join(f"{name} {100 * share:.0f} %" for name, share in large if share >= 0.05)
