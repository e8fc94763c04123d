"""From the checked tables of ``study.toml`` to records."""

from __future__ import annotations

from collections.abc import Mapping
from decimal import Decimal

from wideberth.study.records import (
    CategoricalFactor,
    Factor,
    Formula,
    Goal,
    KnownSd,
    Limit,
    NumericFactor,
    Response,
)
from wideberth.study.schema import (
    FactorTable,
    GoalTable,
    LimitTable,
    ModelTable,
    ResponseTable,
)


def factor_record(name: str, table: FactorTable) -> Factor:
    """Give one factor as a record."""
    if table.levels is not None:
        return CategoricalFactor(name, table.unit or "", tuple(table.levels))
    step = table.settable_step
    return NumericFactor(
        name=name,
        unit=table.unit or "",
        low=0.0 if table.low is None else table.low,
        high=1.0 if table.high is None else table.high,
        allowed=None if table.allowed is None else (table.allowed[0], table.allowed[1]),
        tolerance=table.tolerance,
        settable_step=None if step is None else Decimal(repr(step)),
        scale=table.scale,
        reading_error=table.reading_error,
    )


def response_record(name: str, table: ResponseTable, *, derived: bool) -> Response:
    """Give one response as a record; ``derived`` when its formula names measured ones."""
    formula = None if table.formula is None else _formula(table.formula)
    exact = formula is not None and not derived
    return Response(
        name=name,
        unit=table.unit,
        goal=None if table.goal is None else _goal(table.goal),
        limit=None if table.limit is None else _limit(table.limit, exact=exact),
        order=table.model.order if table.model else None,
        terms=_stated_terms(table.model),
        formula=formula if exact else None,
        derived=formula if derived else None,
        known_sd=None
        if table.known_sd is None
        else KnownSd(table.known_sd.value, table.known_sd.df),
        block_sd=table.block_sd,
    )


def _stated_terms(table: ModelTable | None) -> tuple[tuple[str, ...], ...] | None:
    if table is None or isinstance(table.terms, str):
        return None
    return tuple(dict.fromkeys(tuple(sorted(term_factors(term))) for term in table.terms))


def _goal(table: GoalTable) -> Goal:
    ideal = numbers_of(table.ideal)
    if table.want == "near" and ideal is not None and len(ideal) == 1:
        ideal = (ideal[0], ideal[0])
    exponent = numbers_of(table.exponent) or (1.0,)
    return Goal(
        want=table.want,
        poor=numbers_of(table.poor),
        ideal=ideal,
        exponent=(exponent[0], exponent[-1]),
        priority=table.priority,
    )


def _limit(table: LimitTable, *, exact: bool) -> Limit:
    guard = table.guard or ("none" if exact else "batch")
    return Limit(table.low, table.high, guard, table.confidence, table.share, table.point)


def _formula(table: Mapping[str, float]) -> Formula:
    terms: dict[tuple[str, ...], float] = {}
    for term, number in table.items():
        names = tuple(sorted(term_factors(term)))
        terms[names] = terms.get(names, 0.0) + number
    return Formula(terms)


def term_factors(term: str) -> list[str]:
    """Split ``constant``, ``a``, ``a^2``, ``a*b`` into the factors it multiplies."""
    names: list[str] = []
    for part in (piece.strip() for piece in term.split("*")):
        base, caret, power = part.partition("^")
        count = int(power) if caret and power.strip().isdigit() and int(power) < 9 else 1
        names += [base.strip() if caret and count > 1 else part] * count
    return [] if names == ["constant"] else names


def numbers_of(value: float | list[float] | None) -> tuple[float, ...] | None:
    """Give what may be one number or a list of them as a tuple, ``None`` when not stated."""
    if value is None:
        return None
    return tuple(value) if isinstance(value, list) else (value,)
