"""Refining many starts at once by a primal-dual interior point method on the epigraph form.

Every kink of a desirability, every cap, limit and bound is an ordinary inequality row, so Newton
steps never meet a corner. The problem is not convex: each start ends at an optimum of its own
basin, and the search above compares them.

References
----------
Wright (1997), Primal-dual interior-point methods, SIAM; the treatment of indefinite pivots
follows the modified Cholesky idea of Gill and Murray (1974) (both from memory).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from wideberth.decide.program import Expansion, Program, expand, weighted_curvature
from wideberth.study.records import BoolArray, FloatArray

_MAX_ITERATIONS = 80
_TO_BOUNDARY = 0.995
_OPTIMALITY = 1e-9
_COMPLEMENTARITY = 1e-11
_LONGEST_STEP = 0.5
_LEAST = 1e-13


@dataclass(frozen=True, slots=True, eq=False)
class Refined:
    """Where each start ended: x of shape (N, k), targets t (N, T), and whether it settled (N,)."""

    x: FloatArray
    t: FloatArray
    converged: BoolArray


@dataclass(frozen=True, slots=True, eq=False)
class _State:
    """Iterates, candidate last: rows first, planes after them in slack and multiplier."""

    x: FloatArray
    t: FloatArray
    slack: FloatArray
    multiplier: FloatArray
    barrier: FloatArray

    def take(self, keep: BoolArray) -> _State:
        return _State(
            self.x[:, keep],
            self.t[:, keep],
            self.slack[:, keep],
            self.multiplier[:, keep],
            self.barrier[keep],
        )


@dataclass(frozen=True, slots=True, eq=False)
class _Linearised:
    """The rows and planes around a state: what a Newton step needs.

    ``slopes`` (R + L, k, N) and ``residual`` (R + L, N) of all inequalities; ``drop`` and
    ``bend`` are the first and second derivative of ``t ** power`` in each row (0 for planes).
    """

    rows: Expansion
    slopes: FloatArray
    residual: FloatArray
    drop: FloatArray
    bend: FloatArray


def refine(
    program: Program, starts: FloatArray, t_starts: FloatArray, basis: FloatArray
) -> Refined:
    """Refine every start within ``start + span(basis)``.

    Parameters
    ----------
    program : Program
        With R rows and T targets in k factors.
    starts : ndarray, shape (N, k)
        Coded; need not be feasible.
    t_starts : ndarray, shape (N, T)
    basis : ndarray, shape (k, r)
        Orthonormal directions that may be moved in.
    """
    n = starts.shape[0]
    if not basis.shape[1]:
        return Refined(starts.copy(), t_starts.copy(), np.ones(n, dtype=np.bool_))
    state = _first_state(program, starts.T.copy(), t_starts.T.copy())
    x, t = starts.copy(), t_starts.copy()
    converged = np.zeros(n, dtype=np.bool_)
    active = np.arange(n)
    for _ in range(_MAX_ITERATIONS):
        at = _linearise(program, state)
        done = _settled(program, state, at, basis)
        if done.any():
            x[active[done]], t[active[done]] = state.x[:, done].T, state.t[:, done].T
            converged[active[done]] = True
            if done.all():
                return Refined(x, t, converged)
            active, state = active[~done], state.take(~done)
            program = program.take(~done)
            at = _linearise(program, state)
        state = _step(program, state, at, basis)
    x[active], t[active] = state.x.T, state.t.T
    return Refined(x, t, converged)


def _first_state(program: Program, x: FloatArray, t: FloatArray) -> _State:
    rows = expand(program, x).values - _taken(program, t)[0]
    planes = program.bounds[:, None] - program.planes @ x
    slack = np.maximum(np.concatenate([rows, planes]), 1e-2)
    barrier = np.full(x.shape[1], 1e-2)
    return _State(x, t, slack, barrier / slack, barrier)


def _taken(program: Program, t: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Give t ** power of every row with two derivatives in t; rows without a target give 0."""
    carried = program.target >= 0
    power = program.power[carried, None]
    value = np.zeros((len(program.target), t.shape[1]))
    drop, bend = np.zeros_like(value), np.zeros_like(value)
    own = t[program.target[carried]]
    plain = power == 1.0
    # a power other than 1 belongs to a logarithmic target, which stays positive
    base = np.where(plain, 1.0, np.maximum(own, 1e-300))
    value[carried] = np.where(plain, own, base**power)
    drop[carried] = np.where(plain, 1.0, power * base ** (power - 1))
    bend[carried] = np.where(plain, 0.0, power * (power - 1) * base ** (power - 2))
    return value, drop, bend


def _linearise(program: Program, state: _State) -> _Linearised:
    rows = expand(program, state.x)
    value, drop, bend = _taken(program, state.t)
    n_planes, n = len(program.bounds), state.x.shape[1]
    planes = np.broadcast_to(-program.planes[:, :, None], (n_planes, state.x.shape[0], n))
    room = program.bounds[:, None] - program.planes @ state.x
    none = np.zeros((n_planes, n))
    return _Linearised(
        rows=rows,
        slopes=np.concatenate([rows.slopes, planes]),
        residual=np.concatenate([rows.values - value, room]) - state.slack,
        drop=np.concatenate([drop, none]),
        bend=np.concatenate([bend, none]),
    )


def _gain(program: Program, t: FloatArray) -> tuple[FloatArray, FloatArray]:
    """First derivative and negative second derivative of the objective in t, (T, N) each."""
    weight = program.weights[:, None]
    log = program.logarithmic[:, None]
    safe = np.where(log, t, 1.0)
    return weight / safe, np.where(log, weight / safe**2, 0.0)


def _by_target(program: Program, values: FloatArray) -> FloatArray:
    """Sum the rows of each target: (R + L, ...) to (T, ...)."""
    carries = program.target[None, :] == np.arange(len(program.weights))[:, None]
    total: FloatArray = np.tensordot(carries.astype(float), values[: len(program.target)], axes=1)
    return total


def _settled(program: Program, state: _State, at: _Linearised, basis: FloatArray) -> BoolArray:
    pull = np.einsum("rn,rkn->kn", state.multiplier, at.slopes)
    gain, _ = _gain(program, state.t)
    balance = gain - _by_target(program, state.multiplier * at.drop)
    scale = 1.0 + state.multiplier.max(axis=0)
    error = np.maximum(
        np.abs(basis.T @ pull).max(axis=0, initial=0.0),
        np.abs(balance * np.minimum(np.abs(state.t), 1.0)).max(axis=0, initial=0.0),
    )
    complementarity = (state.slack * state.multiplier).mean(axis=0)
    settled: BoolArray = (
        (error < _OPTIMALITY * scale)
        & (np.abs(at.residual).max(axis=0) < _OPTIMALITY)
        & (complementarity < _COMPLEMENTARITY)
    )
    return settled


def _step(program: Program, state: _State, at: _Linearised, basis: FloatArray) -> _State:
    dx, dt = _newton(program, state, at, basis)
    dslack = at.residual + np.einsum("rkn,kn->rn", at.slopes, dx)
    dslack -= at.drop * _of_row(program, dt, len(program.bounds))
    dmultiplier = (state.barrier - state.multiplier * dslack) / state.slack - state.multiplier
    shrinking = -dslack / state.slack
    if program.logarithmic.any():
        log = program.logarithmic
        shrinking = np.concatenate([shrinking, -dt[log] / state.t[log]])
    primal = _share_of_step(shrinking)
    dual = _share_of_step(-dmultiplier / state.multiplier)
    # an infeasible start drives slacks to nothing and multipliers without end: keep both finite
    slack = np.maximum(state.slack + primal * dslack, _LEAST)
    multiplier = np.clip(state.multiplier + dual * dmultiplier, _LEAST, 1.0 / _LEAST)
    average = (slack * multiplier).mean(axis=0)
    lower = np.where((primal > 0.9) & (dual > 0.9), 0.03, 0.25)
    return replace(
        state,
        x=state.x + primal * dx,
        t=state.t + primal * dt,
        slack=slack,
        multiplier=multiplier,
        barrier=np.maximum(lower * average, 1e-14),
    )


def _share_of_step(shrinking: FloatArray) -> FloatArray:
    share: FloatArray = np.minimum(1.0, _TO_BOUNDARY / np.maximum(shrinking.max(axis=0), 1e-12))
    return share


def _of_row(program: Program, dt: FloatArray, n_planes: int) -> FloatArray:
    """Spread the targets' steps over rows (0 where a row carries none) and planes."""
    if not len(program.weights):
        return np.zeros((len(program.target) + n_planes, dt.shape[1]))
    rows = np.where(program.target[:, None] >= 0, dt[program.target], 0.0)
    return np.concatenate([rows, np.zeros((n_planes, dt.shape[1]))])


def _newton(
    program: Program, state: _State, at: _Linearised, basis: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Eliminate slacks, multipliers and targets; solve for the step in x, then in t."""
    pull = state.multiplier / state.slack
    push = (state.barrier - state.multiplier * at.residual) / state.slack
    gain, curvature = _gain(program, state.t)
    stiffness = curvature + _by_target(program, pull * at.drop**2 + state.multiplier * at.bend)
    need = gain - _by_target(program, push * at.drop)
    reduced = np.einsum("kr,mkn->mrn", basis, at.slopes)
    coupling = _by_target(program, (pull * at.drop)[:, None, :] * reduced)
    hessian = weighted_curvature(program, at.rows, state.multiplier[: len(program.target)])
    system = np.einsum("mrn,msn->rsn", pull[:, None] * reduced, reduced)
    system -= np.einsum("kr,kjn,js->rsn", basis, hessian, basis)
    system -= np.einsum("irn,isn->rsn", coupling / stiffness[:, None], coupling)
    right = np.einsum("mn,mrn->rn", push, reduced)
    right += np.einsum("irn,in->rn", coupling, need / stiffness)
    dz = _solve_modified(system, right)
    length = np.sqrt((dz * dz).sum(axis=0))
    dz *= np.minimum(1.0, _LONGEST_STEP / np.maximum(length, 1e-300))
    dt = (need + np.einsum("irn,rn->in", coupling, dz)) / stiffness
    return basis @ dz, dt


def _solve_modified(system: FloatArray, right: FloatArray) -> FloatArray:
    """Solve (r, r, N) systems by LDL', raising pivots that are not safely positive."""
    r = system.shape[0]
    low, x = system.copy(), right.copy()
    pivot = np.empty_like(right)
    typical = np.abs(system[np.arange(r), np.arange(r)]).mean(axis=0) + 1e-300
    for i in range(r):
        value = low[i, i] - (low[i, :i] ** 2 * pivot[:i]).sum(axis=0)
        raised = np.maximum(np.abs(value), 1e-2 * typical)
        pivot[i] = np.where(value < 1e-10 * typical, raised, value)
        for j in range(i + 1, r):
            low[j, i] = (low[j, i] - (low[j, :i] * low[i, :i] * pivot[:i]).sum(axis=0)) / pivot[i]
    for i in range(r):
        x[i] -= (low[i, :i] * x[:i]).sum(axis=0)
    x /= pivot
    for i in range(r - 1, -1, -1):
        x[i] -= (low[i + 1 :, i] * x[i + 1 :]).sum(axis=0)
    return x
