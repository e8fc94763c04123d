"""The path of steepest ascent: settings to run one after the other, on settable steps.

It follows the slopes of the first-order model from the centre, a coded unit of the steepest factor
at a time, for as long as every setting may be run.

References
----------
Box and Wilson (1951), J. Royal Statistical Society B 13, 1-45 (from memory).
"""

from __future__ import annotations

import numpy as np
from scipy.special import stdtrit

from wideberth.plan.records import Path, PathStep, StageResponse
from wideberth.plan.safety import Earlier, offences
from wideberth.plan.settings import settable
from wideberth.study.coding import to_coded
from wideberth.study.records import Study

_MOST_STEPS = 12
_SURE = 0.95


def steepest_path(
    study: Study, judged: StageResponse, toward: float, earlier: Earlier | None
) -> Path | None:
    """Lay out the path of one response.

    Parameters
    ----------
    toward : float
        +1 when more is better, -1 when less is.

    Returns
    -------
    Path or None
        ``None`` where no numeric factor has a slope.
    """
    slopes = toward * np.array(judged.slopes)
    steepest = float(np.abs(slopes).max(initial=0.0))
    if steepest == 0.0:
        return None
    direction = slopes / steepest
    levels = np.zeros((1, len(study.categorical)), dtype=np.int64)
    if study.categorical:
        values, counts = np.unique(study.runs.levels, axis=0, return_counts=True)
        levels = values[[int(counts.argmax())]]
    steps: list[PathStep] = []
    stopped = f"The path was laid out for {_MOST_STEPS} steps; it may go on."
    for count in range(1, _MOST_STEPS + 1):
        actual = settable(study.numeric, count * direction[None, :])
        (reasons,) = offences(study, earlier, actual, levels)
        if reasons:
            stopped = f"Step {count} must not be run: {'; '.join(reasons)}."
            break
        coded = to_coded(study.numeric, actual)[0]
        numbers = dict(zip((f.name for f in study.numeric), actual[0].tolist(), strict=True))
        level = {f.name: f.levels[levels[0, c]] for c, f in enumerate(study.categorical)}
        steps.append(
            PathStep(
                step=count,
                setting={f.name: (numbers | level)[f.name] for f in study.factors},
                coded=tuple(coded.tolist()),
                expected=judged.mean + float(np.array(judged.slopes) @ coded),
            )
        )
    return Path(
        response=judged.response,
        unit=judged.unit,
        direction=tuple(direction.tolist()),
        steps=tuple(steps),
        stopped=stopped,
        rule=_rule(judged, toward),
    )


def _rule(judged: StageResponse, toward: float) -> str:
    worse = "below" if toward > 0 else "above"
    noise = ""
    if judged.s and judged.df > 0:
        size = float(stdtrit(judged.df, _SURE)) * judged.s * float(np.sqrt(2))
        noise = f" (a difference of {size:.2g} {judged.unit} may be noise)".replace(" )", ")")
    return (
        f"Stop when two runs in succession lie {worse} the best so far{noise}; then plan a new"
        " two-level stage around the best."
    )
