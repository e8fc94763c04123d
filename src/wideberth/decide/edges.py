"""Which bounds the optimum leans on, and where the goals would like to go, in words."""

from __future__ import annotations

import numpy as np

from wideberth.decide.arena import Arena
from wideberth.decide.room import worst_in_room
from wideberth.study.records import FloatArray, Study

_LEANS = 1e-5
_COUNTS = 0.35


def edge_sentences(study: Study, rows: Arena, x: FloatArray) -> tuple[str, ...]:
    """Word every bound of the region that the free optimum x (k,) leans on with its room."""
    region, sentences = rows.region, []
    k = len(study.numeric)
    moves = np.abs(region.planes @ region.basis).max(axis=1, initial=0.0) > 1e-9
    for plane in np.flatnonzero(moves & (region.planes @ x >= region.bounds - _LEANS)):
        if plane < 2 * k:
            name = study.numeric[plane % k].name
            end, way = ("lower", "less") if plane < k else ("upper", "more")
            sentences.append(
                f"The setting leans on the {end} end of {name}: it wants to go toward {way} {name}."
            )
        else:
            toward = _toward(study, region.planes[plane])
            sentences.append(
                f"The setting leans on the constraint {region.names[plane]}: it wants to go"
                f" toward {toward}."
            )
    for row in rows.hard:
        if row.limit is None:
            inside, shift = worst_in_room(row, rows.room, x)
            if inside <= _LEANS:
                toward = _toward(study, region.shape @ (x + shift - region.centre))
                sentences.append(
                    "The setting leans on the edge of the region that the runs explored: it wants"
                    f" to go toward {toward}."
                )
    return tuple(sentences)


def _toward(study: Study, outward: FloatArray) -> str:
    """Name the factors that carry most of an outward direction, largest first."""
    size = np.abs(outward)
    order = [j for j in np.argsort(-size, kind="stable") if size[j] >= _COUNTS * size.max()]
    words = [f"{'more' if outward[j] > 0 else 'less'} {study.numeric[j].name}" for j in order]
    return words[0] if len(words) == 1 else f"{', '.join(words[:-1])} and {words[-1]}"
