"""What leaving runs out did to the answer: the same question asked of every run."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

from wideberth.decide.recommend import solve
from wideberth.decide.records import Choice, Prediction, Status
from wideberth.fit.models import fit
from wideberth.fit.records import Models
from wideberth.progress import Progress, silent
from wideberth.study.records import Grade, LeftOut, Setting


@dataclass(frozen=True, slots=True)
class EveryRun:
    """The answer with nothing left out, beside the answer that leaves runs out.

    Attributes
    ----------
    left_out : tuple of LeftOut
        What the answer leaves out, with the reasons stated.
    status, setpoint, desirability, predictions
        As in `Choice`, of the models fitted to every run.
    moved : mapping of str to float
        Setpoint with every run less the one without, by numeric factor, own units.
    grades : mapping of str to Grade
        Grade of each response's model fitted to every run.
    """

    left_out: tuple[LeftOut, ...]
    status: Status
    setpoint: Setting | None
    desirability: float | None
    predictions: Mapping[str, Prediction]
    moved: Mapping[str, float]
    grades: Mapping[str, Grade]


def with_every_run(
    models: Models,
    choice: Choice,
    *,
    fix: Setting | None = None,
    room: bool = True,
    progress: Progress = silent,
) -> EveryRun | None:
    """Answer again with nothing left out.

    Parameters
    ----------
    models, choice : Models, Choice
        What the answer without the left-out runs rests on, and that answer.
    fix, room : Setting, bool
        As they were given to `recommend`.

    Returns
    -------
    EveryRun or None
        ``None`` where nothing is left out, or the person gave the setting.
    """
    study = models.study
    if study.every_run is None or choice.asked:
        return None
    whole = fit(replace(study, runs=study.every_run, left_out=(), every_run=None))
    _, other = solve(whole, seed=choice.seed, fix=fix, room=room, progress=progress)
    ends = other.setpoint or {}, choice.setpoint or {}
    moved = {}
    for factor in study.numeric:
        there, here = (end.get(factor.name) for end in ends)
        if isinstance(there, float) and isinstance(here, float):
            moved[factor.name] = there - here
    return EveryRun(
        left_out=study.left_out,
        status=other.status,
        setpoint=other.setpoint,
        desirability=other.desirability,
        predictions=other.predictions,
        moved=moved,
        grades={model.response: model.grade for model in whole.models},
    )
