"""The settings that may be searched: a box, several-factor planes and perhaps an ellipsoid.

All in coded units. The explored region comes from the runs; the person may ask for everything
allowed, or for a coded radius, instead. With a room, planes move inwards by what the tolerances
span; the ellipsoid is met at the room's corners by the search.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from scipy.special import ndtri

from wideberth.decide.interior import refine
from wideberth.decide.program import Curves, Program, expand
from wideberth.errors import refusal
from wideberth.quadratic.stack import Stack
from wideberth.study.coding import to_coded
from wideberth.study.records import BoolArray, FloatArray, Study
from wideberth.surface.explored import Explored

_OUTSIDE = 1e-9
_WHERE = "study.toml"


@dataclass(frozen=True, slots=True, eq=False)
class Room:
    """How far a setting may be off in each numeric factor, coded: ``below`` and ``above``, (k,)."""

    below: FloatArray
    above: FloatArray

    @property
    def is_empty(self) -> bool:
        """True when no factor has a tolerance."""
        return not (self.below.any() or self.above.any())


@dataclass(frozen=True, slots=True, eq=False)
class Region:
    """Settings x = origin + basis z with ``planes @ x <= bounds`` and inside the ellipsoid.

    Attributes
    ----------
    planes : ndarray, shape (L, k); bounds : ndarray, shape (L,)
        The box first (k lower, then k upper ends), then the several-factor constraints.
    names : tuple of str, length L
        What each plane is: ``low of NAME``, ``high of NAME``, or the constraint's name.
    centre : ndarray, shape (k,); shape : ndarray, shape (k, k)
        ``(x - centre)' shape (x - centre) <= 1``; a zero matrix where no ellipsoid applies.
    origin : ndarray, shape (k,); basis : ndarray, shape (k, r)
        The directions that the runs span.
    middle : ndarray, shape (k,)
        A setting well inside.
    """

    planes: FloatArray
    bounds: FloatArray
    names: tuple[str, ...]
    centre: FloatArray
    shape: FloatArray
    origin: FloatArray
    basis: FloatArray
    middle: FloatArray

    @property
    def has_ellipsoid(self) -> bool:
        """True when an ellipsoid bounds the region."""
        return bool(self.shape.any())

    def reach(self, rays: FloatArray) -> FloatArray:
        """Give how often each ray, shape (N, k), fits between the middle and the edge; (N,)."""
        slack = self.bounds - self.planes @ self.middle
        rate = rays @ self.planes.T
        steep = rate > 1e-12
        reach: FloatArray = np.where(steep, slack / np.where(steep, rate, 1.0), np.inf).min(
            axis=1, initial=np.inf
        )
        if self.has_ellipsoid:
            away = self.middle - self.centre
            a = np.einsum("ni,ij,nj->n", rays, self.shape, rays)
            b = rays @ self.shape @ away
            c = away @ self.shape @ away - 1.0
            bends = a > 1e-14
            root = (-b + np.sqrt(np.maximum(b * b - a * c, 0.0))) / np.where(bends, a, 1.0)
            reach = np.where(bends, np.minimum(reach, root), reach)
        return np.maximum(np.where(np.isfinite(reach), reach, 0.0), 0.0)

    def ellipsoid_row(self) -> FloatArray:
        """Give ``1 - (x - centre)' shape (x - centre)`` as coefficients, shape (p,)."""
        pulled = self.shape @ self.centre
        row = Stack(np.array(1.0 - self.centre @ pulled), 2 * pulled, -self.shape)
        return row.coefficients()


def room_of(study: Study) -> Room:
    """Give the box of all tolerances around a setting, coded; nil where none is stated."""
    below, above = np.zeros(len(study.numeric)), np.zeros(len(study.numeric))
    for j, factor in enumerate(study.numeric):
        if factor.tolerance is None:
            continue
        if factor.scale == "log":
            half = (np.log(factor.high) - np.log(factor.low)) / 2
            below[j] = -np.log1p(-factor.tolerance) / half
            above[j] = np.log1p(factor.tolerance) / half
        else:
            below[j] = above[j] = 2 * factor.tolerance / (factor.high - factor.low)
    return Room(below, above)


def search_region(study: Study, explored: Explored) -> Region:
    """Build the region that the study asks for: explored, allowed, or a radius."""
    k = len(study.numeric)
    centre, shape = explored.centre, explored.shape
    low, high = explored.low, explored.high
    if study.region.keep != "explored":
        low, high = _allowed(study, explored)
        centre = np.zeros(k)
        radius = study.region.radius
        shape = np.zeros((k, k)) if radius is None else np.eye(k) / radius**2
    factor_names = [factor.name for factor in study.numeric]
    region = Region(
        planes=np.concatenate([-np.eye(k), np.eye(k), explored.planes]),
        bounds=np.concatenate([-low, high, explored.bounds]),
        names=(
            *(f"low of {name}" for name in factor_names),
            *(f"high of {name}" for name in factor_names),
            *explored.names,
        ),
        centre=centre,
        shape=shape,
        origin=explored.origin,
        basis=explored.basis,
        middle=explored.origin,
    )
    return centred(region, "the allowed ranges and constraints leave no setting to search", _WHERE)


def with_room(region: Region, room: Room, study: Study) -> Region:
    """Move every plane inwards so that the whole room of a setting stays inside it."""
    if room.is_empty:
        return region
    reach = np.maximum(region.planes * room.above, -region.planes * room.below).sum(axis=1)
    tight = replace(region, bounds=region.bounds - reach)
    return centred(tight, "the room of the stated tolerances fits nowhere in the region", _WHERE)


def inside_planes(region: Region, x: FloatArray) -> BoolArray:
    """Tell which settings, shape (..., k), keep the box and the constraints; shape (...)."""
    result: BoolArray = np.asarray((x @ region.planes.T <= region.bounds + _OUTSIDE).all(axis=-1))
    return result


def inside(region: Region, x: FloatArray) -> BoolArray:
    """Tell which settings, shape (..., k), lie inside; shape (...)."""
    away = x - region.centre
    size = np.einsum("...i,ij,...j->...", away, region.shape, away)
    result: BoolArray = np.asarray(size <= 1.0 + _OUTSIDE) & inside_planes(region, x)
    return result


def candidates(region: Region, n: int) -> FloatArray:
    """Cover the region evenly with settings, a third of them on its edge; shape (N, k).

    The points go along rays from the middle, so each lies inside by construction; corners of the
    box are among the rays. The same region always gives the same points.
    """
    r = region.basis.shape[1]
    if r == 0:
        return region.middle[None, :].copy()
    spread = even_points(n, r + 1)
    rays = ndtri(0.5 + 0.9999 * (spread[:, :r] - 0.5))
    # a third exactly on the edge, where optima often sit, the rest spread over the volume
    depth = np.where(np.arange(n) % 3 == 0, 1.0, spread[:, r] ** (1.0 / r))
    signs = _sign_rays(r)
    rays = np.concatenate([rays, signs, signs]) @ region.basis.T
    depth = np.concatenate([depth, np.ones(len(signs)), np.full(len(signs), 0.5)])
    reach = region.reach(rays)
    points = region.middle + rays * (reach * depth)[:, None]
    return np.concatenate([region.middle[None, :], points])


def _allowed(study: Study, explored: Explored) -> tuple[FloatArray, FloatArray]:
    low, high = explored.low.copy(), explored.high.copy()
    for j, factor in enumerate(study.numeric):
        if factor.allowed is not None:
            ends = np.full((2, len(study.numeric)), 1.0)
            ends[:, j] = factor.allowed
            low[j], high[j] = to_coded(study.numeric, ends)[:, j]
    return low, high


def even_points(n: int, dimension: int) -> FloatArray:
    """Additive recurrence on the generalised golden ratio (Roberts' R sequence, from memory)."""
    ratio = 2.0
    for _ in range(64):
        ratio = (1.0 + ratio) ** (1.0 / (dimension + 1))
    steps = np.array([ratio ** -(i + 1.0) for i in range(dimension)])
    counts = np.arange(1, n + 1, dtype=np.float64)
    spread: FloatArray = 0.5 + counts[:, None] * steps
    spread -= np.floor(spread)
    return spread


def _sign_rays(r: int) -> FloatArray:
    """Axes and corners; all of {-1, 0, 1}^r without the zero up to five directions."""
    if r <= 5:
        grid = np.stack(np.meshgrid(*[[-1.0, 0.0, 1.0]] * r, indexing="ij"), axis=-1)
        rays: FloatArray = grid.reshape(-1, r).astype(np.float64)
        return np.array(rays[np.abs(rays).sum(axis=1) > 0])
    corners = np.stack(np.meshgrid(*[[-1.0, 1.0]] * r, indexing="ij"), axis=-1).reshape(-1, r)
    return np.concatenate([np.eye(r), -np.eye(r), corners])


def centred(region: Region, nothing_left: str, where: str) -> Region:
    """Find the setting with the largest smallest slack, or refuse when there is none."""
    k = len(region.origin)
    rows = [region.ellipsoid_row()] if region.has_ellipsoid else []
    moves = np.abs(region.planes @ region.basis).max(axis=1, initial=0.0) > 1e-9
    flat = np.zeros((int(moves.sum()), len(region.ellipsoid_row())))
    flat[:, 0], flat[:, 1 : 1 + k] = region.bounds[moves], -region.planes[moves]
    coefficients = np.concatenate([np.array(rows).reshape(len(rows), flat.shape[1]), flat])
    still = (region.planes @ region.origin - region.bounds)[~moves].max(initial=-np.inf)
    if still > _OUTSIDE:
        raise refusal(nothing_left, where, "widen allowed, the constraints or the region")
    if not len(coefficients):
        return region
    program = Program(
        weights=np.ones(1),
        logarithmic=np.zeros(1, dtype=np.bool_),
        curves=Curves.from_coefficients(coefficients[:, None, :], k),
        target=np.zeros(len(coefficients), dtype=np.int64),
        power=np.ones(len(coefficients)),
        guards=(),
        planes=np.zeros((0, k)),
        bounds=np.zeros(0),
    )
    best = refine(program, region.origin[None, :], np.array([[-1.0]]), region.basis)
    deepest = expand(program, best.x.T).values.min()
    if deepest < -_OUTSIDE:
        raise refusal(nothing_left, where, "widen allowed, the constraints or the region")
    return replace(region, middle=best.x[0])
