"""A finished two-level stage as table rows and sentences."""

from __future__ import annotations

from wideberth.plan.records import Effect, Path, PathStep, StageResponse
from wideberth.report.numbers import format_range, format_setting, format_value, with_unit
from wideberth.study.records import Study


def effect_row(effect: Effect) -> tuple[str, ...]:
    """Write one effect: name, size, interval, p."""
    if effect.interval is None:
        return (effect.term, format_value(effect.change), "not known", "not known")
    half = (effect.interval[1] - effect.interval[0]) / 2
    return (
        effect.term,
        format_value(effect.change, half),
        format_range(*effect.interval, half),
        _p_words(effect.p),
    )


def curvature_words(one: StageResponse) -> str:
    """Say what the centre runs tell about curvature, and what they could have told."""
    bend = one.curvature
    if bend is None:
        return "curvature: not seen by these runs (no centre runs, or mixed with other terms)"
    if bend.interval is None or bend.p is None:
        return "curvature: cannot be tested, because no run was repeated"
    half = (bend.interval[1] - bend.interval[0]) / 2
    size = with_unit(format_value(bend.difference, half), one.unit)
    text = (
        f"curvature: the two-level runs lie {size} from the centre runs"
        f" ({format_range(*bend.interval, half)}; p {_p_words(bend.p)})"
    )
    if bend.detectable is not None:
        found = with_unit(format_value(bend.detectable, bend.detectable / 10), one.unit)
        text += f"; {found} or more would be found in 80 of 100"
    return text


def path_row(study: Study, path: Path, step: PathStep) -> tuple[str, ...]:
    """Write one step of a path: number, settings, what the first-order model expects."""
    settings = (format_setting(study, f.name, step.setting[f.name]) for f in study.factors)
    values = [one.expected for one in path.steps]
    spread = max(values) - min(values) or abs(step.expected)
    return (str(step.step), *settings, format_value(step.expected, spread / 20 or None))


def _p_words(p: float | None) -> str:
    if p is None:
        return "not known"
    return "< 0.0001" if p < 1e-4 else f"{p:.2g}"
