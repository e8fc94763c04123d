"""What a plan is worth, as labelled values that the shell and the figure share."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from wideberth.plan.plan import variance_over
from wideberth.plan.records import Plan, PlannedRun, WayOut
from wideberth.report.numbers import format_setting, format_value, with_unit
from wideberth.study.records import Study

_DIGITS = 0.1
PLAN_CAUTION = (
    "A plan is no hazard review: it knows the ranges, constraints and limits that were stated, and"
    " nothing else. Each run follows the site's safety procedure, local codes and licensed"
    " practice; changes of scale are confirmed first."
)


def quality_rows(plan: Plan) -> list[tuple[str, str]]:
    """List everything that tells how good a plan is: label and value."""
    return [*_counts(plan), *_variances(plan), *_found(plan), *_proven(plan)]


def side_by_side(first: Plan, second: Plan) -> list[tuple[str, str, str]]:
    """List two plans in one table; a value that only one of them has is left empty."""
    one, other = dict(quality_rows(first)), dict(quality_rows(second))
    shared = variance_over(first, second)
    if first.quality.mean_variance is not None and shared is not None:
        label = "prediction variance, average of the first plan's region [error variance]"
        one[label], other[label] = _three(first.quality.mean_variance), _three(shared)
    labels = dict.fromkeys([*one, *other])
    return [(label, one.get(label, ""), other.get(label, "")) for label in labels]


def run_row(study: Study, run: PlannedRun) -> tuple[str, ...]:
    """Write one run: number, block, kind, settings."""
    settings = (format_setting(study, f.name, run.setting[f.name]) for f in study.factors)
    return (str(run.order), run.block, run.kind or "-", *settings)


def way_out_row(way: WayOut) -> tuple[str, ...]:
    """Write one way out: what, options, runs, variance, against the stated plan."""
    return (
        way.what,
        way.options,
        str(way.n_runs),
        "not known" if way.mean_variance is None else _three(way.mean_variance),
        "not known" if way.ratio is None else f"{way.ratio:.2f} times",
    )


def _three(value: float) -> str:
    return format_value(value, abs(value) * _DIGITS or None)


def _counts(plan: Plan) -> Iterator[tuple[str, str]]:
    quality = plan.quality
    old = quality.n_runs - len(plan.runs)
    made = f", {old} of them in the sheet already" if old else ""
    yield "runs", f"{quality.n_runs}{made}"
    yield "terms of the model", str(quality.n_terms)
    yield "degrees of freedom, lack of fit", str(quality.df_lack)
    yield "degrees of freedom, pure error", str(quality.df_pure)
    if plan.design.axial_distance is not None:
        yield "axial distance [coded]", f"{plan.design.axial_distance:.3f}"


def _variances(plan: Plan) -> Iterator[tuple[str, str]]:
    quality = plan.quality
    if quality.largest_leverage is not None:
        yield "largest leverage", f"{quality.largest_leverage:.2f}"
    if quality.mean_variance is not None and quality.most_variance is not None:
        yield (
            "prediction variance, average of its region [error variance]",
            _three(quality.mean_variance),
        )
        half, most = np.quantile(quality.variance_levels, [0.5, 0.95])
        below = f"{_three(float(half))} and {_three(float(most))}"
        yield "half and 95 % of its region lie below [error variance]", below
        yield (
            "prediction variance, largest in its region [error variance]",
            _three(quality.most_variance),
        )
    if quality.uneven is not None:
        yield "unevenness on spheres", uneven_words(quality.uneven)
    if len(plan.fitted.runs.blocks) > 1:
        coupling = quality.block_coupling
        yield "blocks mixed with factors", "not at all" if coupling < 1e-6 else f"{coupling:.3f}"
    if plan.rounding.ratio is not None:
        change = 100 * (plan.rounding.ratio - 1)
        yield "settable steps cost in variance", f"{change:+.1f} %"


def uneven_words(uneven: float) -> str:
    """Say how far a plan is from rotatable."""
    if uneven < 1e-9:
        return "none: rotatable"
    if uneven > 1.0:
        return f"up to {1 + uneven:.1f} times"
    return f"up to {max(100 * uneven, 0.01):.2g} %"


def _found(plan: Plan) -> Iterator[tuple[str, str]]:
    found = plan.quality.detectable
    kinds = (
        ("effect, low to high", found.effect),
        ("product of two factors", found.product),
        ("curvature, centre to low or high", found.curvature),
    )
    for label, size in kinds:
        if size is not None:
            yield f"smallest {label} found in 80 of 100 [error sd]", _three(size)
    units = {r.name: r.unit for r in plan.study.responses}
    for name, sd in plan.choice.error_sd.items():
        for label, size in kinds:
            if size is not None:
                value = with_unit(_three(size * sd), units[name])
                yield f"smallest {label} found: {name}", value


def _proven(plan: Plan) -> Iterator[tuple[str, str]]:
    for one in plan.quality.provable:
        text = _three(one.distance)
        if one.error_sd is not None:
            text += f" ({with_unit(_three(one.distance * one.error_sd), one.unit)})"
        yield f"closest a share guard comes to the limit of {one.response} [batch sd]", text
    certificate = plan.certificate
    if certificate is not None:
        label = f"{certificate.criterion}-efficiency, proven at least"
        yield label, f"{100 * certificate.efficiency:.1f} %"
