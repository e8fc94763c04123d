"""The operating window: the largest box around the room of a setting in which everything holds.

Growth and exchange look for a large box; nothing of that needs to be right, because the box is
proven in the end, and drawn in toward the room where a proof fails. The exchange keeps the worst
places met so far as positions relative to the box and maximises its volume subject to all of them.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.optimize import minimize

from wideberth.decide.arena import Arena, HardRow
from wideberth.decide.region import Region, Room
from wideberth.decide.room import worst_in_room
from wideberth.decide.search import HOLDS
from wideberth.operate.proof import prove_over_box
from wideberth.study.records import BoolArray, FloatArray

_ROUNDS = 25
_NEAR = 1.5
_LEAST_WIDTH = 1e-6
_MARGIN = 1e-4
_SHRINKS = (1e-5, 1e-3, 0.03, 0.2, 0.6)
_FINEST = 0.01
_BISECTIONS = 16


@dataclass(frozen=True, slots=True, eq=False)
class Box:
    """Coded ends of a box, (k,) each."""

    low: FloatArray
    high: FloatArray


@dataclass(frozen=True, slots=True, eq=False)
class Ground:
    """What a window must hold: rows and planes, around a core, in factors that may move.

    ``level`` is what every row must reach in the search, a hair above what is proven.
    """

    rows: tuple[HardRow, ...]
    planes: FloatArray
    bounds: FloatArray
    core: Box
    free: BoolArray
    level: float


def ground_of(arena: Arena, region: Region, room: Room, x: FloatArray) -> Ground:
    """Lay out what the window around x (k,) must hold; ``arena`` gives the rows to hold."""
    core = Box(x - room.below, x + room.above)
    off = np.eye(len(x)) - region.basis @ region.basis.T
    free = np.abs(off).max(axis=0) < 1e-9
    worst = min((worst_over(row, core) for row in arena.hard), default=np.inf)
    level = min(_MARGIN, max(worst, 0.0) / 2)
    return Ground(arena.hard, region.planes, region.bounds, core, free, level)


def worst_over(row: HardRow, box: Box) -> float:
    """Search a row's lowest value over a box."""
    middle, half = (box.low + box.high) / 2, (box.high - box.low) / 2
    return worst_in_room(row, Room(half, half), middle)[0]


def largest_box(ground: Ground) -> tuple[Box, int]:
    """Find a large box that holds everything, proven, with the boxes that the proofs needed.

    The best of several starts; the core itself must hold.
    """
    k = len(ground.free)
    forward = np.concatenate([np.arange(k), np.arange(k) + k])
    grown = [_grown(ground, order) for order in (forward, forward[::-1], np.roll(forward, k // 2))]
    tried = [_exchanged(ground, start) for start in (ground.core, *grown)]
    tried = sorted([*tried, *grown], key=lambda box: -_log_volume(ground, box))
    best, boxes = ground.core, 0
    for box in tried:
        if _log_volume(ground, box) <= _log_volume(ground, best):
            break
        held, more = proven(ground, box)
        boxes += more
        if held is not None and _log_volume(ground, held) > _log_volume(ground, best):
            best = held
    return best, boxes


def proven(ground: Ground, box: Box) -> tuple[Box | None, int]:
    """Prove a box, drawn in toward the core as little as it takes; with the boxes needed.

    ``None`` when not even the core can be proven.
    """
    held, boxes = _proof(ground, box)
    if held:
        return box, boxes
    inner, outer = 0.0, 1.0
    for _ in range(_BISECTIONS):
        share = (inner + outer) / 2
        if _holds(ground, _toward(ground.core, box, share)):
            inner = share
        else:
            outer = share
    for share in (inner, *(inner * (1.0 - shrink) for shrink in _SHRINKS), 0.0):
        tried = _toward(ground.core, box, share)
        held, more = _proof(ground, tried)
        boxes += more
        if held:
            return tried, boxes
    return None, boxes


def _proof(ground: Ground, box: Box) -> tuple[bool, int]:
    """Prove every plane and row over one box; with the boxes needed."""
    if not _planes_hold(ground, box):
        return False, 0
    boxes = 0
    for row in ground.rows:
        proof = prove_over_box(row, box.low, box.high, HOLDS)
        boxes += proof.boxes
        if not proof.proven:
            return False, boxes
    return True, boxes


def _holds(ground: Ground, box: Box) -> bool:
    return _planes_hold(ground, box) and all(
        worst_over(row, box) >= ground.level for row in ground.rows
    )


def alone(ground: Ground, j: int) -> Box | None:
    """Widen one factor alone as far as everything holds, the others in the core; proven."""
    box = ground.core
    for side in (0, 1):
        wide = _pushed(ground, box, j, side, np.inf)
        if _seems_to_hold(ground, wide):
            box = wide
            continue
        inner, outer = 0.0, 1.0
        for _ in range(_BISECTIONS):
            share = (inner + outer) / 2
            if _seems_to_hold(ground, _toward(box, wide, share)):
                inner = share
            else:
                outer = share
        box = _toward(box, wide, inner)
    return proven(ground, box)[0]


def stoppers(ground: Ground, box: Box, names: tuple[str, ...]) -> list[tuple[str, str]]:
    """Name for each factor what a push below and above breaks first: [(low, high)] * k.

    ``names`` are the rows' and then the planes'.
    """
    found = []
    for j in range(len(ground.free)):
        sides = []
        for side in (0, 1):
            text = ""
            for push in (0.005, 0.02, 0.06):
                text = _broken_by_push(ground, box, j, side, push, names)
                if text or not ground.free[j]:
                    break
            sides.append(text)
        found.append((sides[0], sides[1]))
    return found


def _broken_by_push(
    ground: Ground, box: Box, j: int, side: int, push: float, names: tuple[str, ...]
) -> str:
    if not ground.free[j]:
        return "never varied on its own"
    width = 2 * push
    low, high = box.low.copy(), box.high.copy()
    if side == 0:
        low[j] -= width
    else:
        high[j] += width
    x = _pattern(Box(low, high), ground.free)
    worst = [float(row.value(x).min()) for row in ground.rows]
    slack = plane_slack(ground, Box(low, high))
    broken = [(w, n) for w, n in zip(worst, names[: len(worst)], strict=True) if w < ground.level]
    # a bound in coded units counts like an edge: it is named before a row only when alone
    broken += [(s - 1e3, n) for s, n in zip(slack, names[len(worst) :], strict=True) if s < -1e-9]
    return min(broken)[1] if broken else ""


def plane_slack(ground: Ground, box: Box) -> FloatArray:
    """Give how far every plane is from being reached anywhere in a box: (L,)."""
    up, down = np.maximum(ground.planes, 0.0), np.minimum(ground.planes, 0.0)
    result: FloatArray = ground.bounds - up @ box.high - down @ box.low
    return result


def _planes_hold(ground: Ground, box: Box) -> bool:
    return bool((plane_slack(ground, box) >= -1e-9).all())


def _toward(core: Box, box: Box, share: float) -> Box:
    return Box(core.low + share * (box.low - core.low), core.high + share * (box.high - core.high))


def _log_volume(ground: Ground, box: Box) -> float:
    width = (box.high - box.low)[ground.free]
    return float(np.log(width + _LEAST_WIDTH).sum())


def _pushed(ground: Ground, box: Box, j: int, side: int, step: float) -> Box:
    """Push one end outwards by a step, at most to where the planes stop it."""
    low, high = box.low.copy(), box.high.copy()
    if not ground.free[j]:
        return box
    rate = -ground.planes[:, j] if side == 0 else ground.planes[:, j]
    slack = np.maximum(plane_slack(ground, box), 0.0)
    stops = rate > 1e-12
    most = float((slack[stops] / rate[stops]).min(initial=np.inf))
    moved = min(step, most) if np.isfinite(min(step, most)) else 0.0
    if side == 0:
        low[j] -= moved
    else:
        high[j] += moved
    return Box(low, high)


def _grown(ground: Ground, order: FloatArray) -> Box:
    """Grow the core side by side in an order, with steps that halve where they do not hold."""
    k = len(ground.free)
    box = ground.core
    steps = np.where(np.concatenate([ground.free, ground.free]), 0.5, 0.0)
    while steps.max(initial=0.0) > _FINEST:
        for place in order.astype(int).tolist():
            if steps[place] <= _FINEST:
                continue
            tried = _pushed(ground, box, place % k, place // k, float(steps[place]))
            moved = np.abs(tried.low - box.low).max() + np.abs(tried.high - box.high).max()
            if moved > _FINEST / 4 and _seems_to_hold(ground, tried):
                box = tried
            else:
                steps[place] /= 2
    return box


def _seems_to_hold(ground: Ground, box: Box) -> bool:
    """Check a box at its corners and the middles of its faces; the proof comes later."""
    if not _planes_hold(ground, box):
        return False
    x = _pattern(box, ground.free)
    return all(bool((row.value(x) >= ground.level).all()) for row in ground.rows)


def _pattern(box: Box, free: BoolArray) -> FloatArray:
    """Corners of a box, with the middles of faces for few factors: (n, k)."""
    loose = np.flatnonzero(box.high > box.low)
    if not len(loose):
        return box.low[None, :]
    choices = [0.0, 0.5, 1.0] if len(loose) <= 5 else [0.0, 1.0]
    grid = np.stack(np.meshgrid(*[choices] * len(loose), indexing="ij"), axis=-1)
    share = np.zeros((grid.size // len(loose), len(free)))
    share[:, loose] = grid.reshape(-1, len(loose))
    return box.low + share * (box.high - box.low)


def _worst_places(row: HardRow, box: Box, free: BoolArray) -> FloatArray:
    """Give a row's low places over a box as positions in [-1, 1]^k: (n, k)."""
    width = box.high - box.low
    x = _pattern(box, free)
    values = row.value(x)
    low = x[np.argsort(values, kind="stable")[:6]]
    middle, half = (box.low + box.high) / 2, width / 2
    value, shift = worst_in_room(row, Room(half, half), middle)
    places = np.concatenate([low, (middle + shift)[None, :]])
    near = np.append(row.value(low), value) < _NEAR
    safe = np.where(width > 0, width, 1.0)
    result: FloatArray = np.where(width > 0, (2 * places - box.low - box.high) / safe, 0.0)[near]
    return result


def _exchanged(ground: Ground, start: Box) -> Box:
    """Maximise the volume against all worst places met, until no new one breaks a row."""
    k = len(ground.free)
    ends = np.concatenate([start.low, start.high])
    places: list[FloatArray] = [np.zeros((0, k)) for _ in ground.rows]
    for _ in range(_ROUNDS):
        box, added = Box(ends[:k], ends[k:]), False
        for i, row in enumerate(ground.rows):
            for place in _worst_places(row, box, ground.free):
                known = places[i]
                if not len(known) or np.abs(known - place).max(axis=1).min() > 1e-6:
                    places[i] = np.vstack([known, place])
                    added = True
        if not added:
            break
        better = _maximised(ground, places, ends)
        if np.abs(better - ends).max() < 1e-9:
            break
        ends = better
    return Box(ends[:k], ends[k:])


def _maximised(ground: Ground, places: list[FloatArray], ends: FloatArray) -> FloatArray:
    k, free = len(ground.free), ground.free
    kept = [(row, p) for row, p in zip(ground.rows, places, strict=True) if len(p)]
    up, down = np.maximum(ground.planes, 0.0), np.minimum(ground.planes, 0.0)
    tops = np.concatenate([down, up], axis=1)

    def width(z: FloatArray) -> FloatArray:
        return np.maximum(z[k:] - z[:k], 0.0) + _LEAST_WIDTH

    def volume(z: FloatArray) -> float:
        return -float(np.log(width(z)[free]).sum())

    def volume_slope(z: FloatArray) -> FloatArray:
        rate = np.where(free, 1.0 / width(z), 0.0)
        return np.concatenate([rate, -rate])

    def held(z: FloatArray) -> FloatArray:
        values = [row.value(_at(z, place)) - ground.level for row, place in kept]
        return np.concatenate([*values, ground.bounds - tops @ z])

    def held_slope(z: FloatArray) -> FloatArray:
        slopes = []
        for row, place in kept:
            slope = row.slope(_at(z, place))
            slopes.append(np.hstack([slope * (1 - place) / 2, slope * (1 + place) / 2]))
        return np.vstack([*slopes, -tops])

    core = ground.core
    lower = np.concatenate([np.full(k, -np.inf), core.high])
    upper = np.concatenate([core.low, np.full(k, np.inf)])
    still = np.concatenate([~free, ~free])
    fixed = np.concatenate([core.low, core.high])
    lower, upper = np.where(still, fixed, lower), np.where(still, fixed, upper)
    # the library's own types do not know functions of plain arrays
    how: Any = {
        "jac": volume_slope,
        "method": "SLSQP",
        "bounds": list(zip(lower, upper, strict=True)),
        "constraints": [{"type": "ineq", "fun": held, "jac": held_slope}],
        "options": {"maxiter": 100, "ftol": 1e-9},
    }
    found = minimize(volume, ends, **how)
    result: FloatArray = np.clip(found.x, lower, upper)
    return result if np.isfinite(result).all() else ends


def _at(z: FloatArray, place: FloatArray) -> FloatArray:
    k = place.shape[1]
    result: FloatArray = z[:k] * (1 - place) / 2 + z[k:] * (1 + place) / 2
    return result
