"""What ``study.toml`` says, checked against itself, and turned into records."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from decimal import Decimal

from wideberth.errors import Fault
from wideberth.study.lines import KeyPath
from wideberth.study.naming import name_faults, nearest
from wideberth.study.plan_statement import plan_faults
from wideberth.study.records import Factor, LeftOut, Response
from wideberth.study.schema import (
    FactorTable,
    GoalTable,
    LimitTable,
    ModelTable,
    ResponseTable,
    StudyFile,
    place,
)
from wideberth.study.sheet import SheetContent
from wideberth.study.stated_records import (
    factor_record,
    numbers_of,
    response_record,
    term_factors,
)

STUDY_FILE = "study.toml"


@dataclass(frozen=True, slots=True)
class Statement:
    """The parsed tables with the lines they stand on."""

    tables: StudyFile
    lines: Mapping[KeyPath, int]

    def at(self, *path: str | int) -> str:
        """Say where a key path stands."""
        return place(path, self.lines)

    def faults(self) -> Iterator[Fault]:
        """Check what the tables say against each other; the sheet is checked elsewhere."""
        if not self.tables.factors:
            yield Fault("no factor is stated", STUDY_FILE, "add a table [factors.NAME]")
        if not self.tables.responses:
            yield Fault("no response is stated", STUDY_FILE, "add a table [responses.NAME]")
        yield from name_faults(self.tables.factors, self.tables.responses, self.at)
        for name, factor in self.tables.factors.items():
            yield from self._factor_faults(name, factor)
        for name, response in self.tables.responses.items():
            yield from self._response_faults(name, response)
        yield from self._constraint_faults()
        yield from self._leave_out_faults()
        yield from self._today_faults()
        yield from plan_faults(self.tables, self.at)
        yield from self._stage_faults()

    def _stage_faults(self) -> Iterator[Fault]:
        """Ask of a final memo what it takes to find it again: number, revision and date."""
        if self.tables.memo.stage == "draft":
            return
        for key in ("document", "revision", "date"):
            if not getattr(self.tables.context, key).strip():
                yield Fault(
                    f"the memo is called final, but [context] states no {key}",
                    self.at("memo", "stage"),
                    f"state {key} in [context], or leave the memo a draft",
                )

    def _factor_faults(self, name: str, table: FactorTable) -> Iterator[Fault]:
        where = self.at("factors", name)
        if table.levels is not None:
            yield from self._level_faults(name, table, table.levels)
            return
        for key in ("unit", "low", "high"):
            if getattr(table, key) is None:
                yield Fault(f"{name} has no {key}", where, f"state {key}, or levels instead")
        if table.low is None or table.high is None:
            return
        if table.low >= table.high:
            yield Fault(f"low {table.low:g} is not below high {table.high:g}", where, "swap them")
        if table.scale == "log":
            yield from self._log_faults(name, table)
        yield from self._allowed_faults(name, table)

    def _level_faults(self, name: str, table: FactorTable, levels: list[str]) -> Iterator[Fault]:
        where = self.at("factors", name)
        stated = [
            k
            for k in ("low", "high", "allowed", "tolerance", "settable_step", "reading_error")
            if getattr(table, k) is not None
        ]
        if stated:
            yield Fault(
                f"{name} has levels and also {', '.join(stated)}",
                where,
                "a factor has either levels or low and high",
            )
        if len(set(levels)) < len(levels):
            yield Fault(f"{name} names a level twice", where, "name each level once")

    def _allowed_faults(self, name: str, table: FactorTable) -> Iterator[Fault]:
        if table.allowed is not None and table.allowed[0] >= table.allowed[1]:
            yield Fault(
                f"allowed runs from {table.allowed[0]:g} to {table.allowed[1]:g}",
                self.at("factors", name, "allowed"),
                "write the smaller number first",
            )
        elif table.allowed is not None and table.settable_step is not None:
            step = Decimal(repr(table.settable_step))
            first, last = (Decimal(repr(end)) / step for end in table.allowed)
            if last.to_integral_value("ROUND_FLOOR") < first.to_integral_value("ROUND_CEILING"):
                yield Fault(
                    f"no whole multiple of the step {table.settable_step:g} is allowed",
                    self.at("factors", name, "settable_step"),
                    "make the step smaller or widen allowed",
                )

    def _log_faults(self, name: str, table: FactorTable) -> Iterator[Fault]:
        where = self.at("factors", name)
        ends = [table.low, *(table.allowed or [])]
        if any(end is not None and end <= 0 for end in ends):
            yield Fault(
                f"{name} is on a log scale but reaches 0 or less", where, "use values above 0"
            )
        if table.tolerance is not None and table.tolerance >= 1:
            yield Fault(
                f"the tolerance of {name} is {table.tolerance:g}",
                self.at("factors", name, "tolerance"),
                "on a log scale it is relative: 0.05 means 5 %",
            )

    def _response_faults(self, name: str, table: ResponseTable) -> Iterator[Fault]:
        exact = table.formula is not None and not self._parts(table)
        if table.limit is not None:
            yield from self._limit_faults(name, table.limit, exact=exact)
        if table.goal is not None:
            yield from self._goal_faults(name, table.goal)
        if table.model is not None and not exact:
            yield from self._model_faults(name, table.model)
        if table.formula is None:
            return
        where = self.at("responses", name, "formula")
        if not table.formula:
            yield Fault("the formula is empty", where, "state at least one term")
        for key in ("model", "known_sd", "block_sd"):
            if exact and getattr(table, key) is not None:
                yield Fault(
                    f"{name} has a formula and a {key}", where, "an exact response is not fitted"
                )
        for term in table.formula:
            yield from self._term_faults(name, term)

    def _model_faults(self, name: str, table: ModelTable) -> Iterator[Fault]:
        where = self.at("responses", name, "model", "terms")
        if isinstance(table.terms, str):
            if table.terms != "all":
                yield Fault(
                    f"terms is '{table.terms}'",
                    where,
                    "use 'all' or a list like ['a', 'b', 'a*b']; terms are not chosen from the data"
                    " here, because guards would then promise more than they hold",
                )
            return
        if table.order is not None:
            yield Fault(
                f"the model of {name} has an order and a list of terms", where, "state one of them"
            )
        stated = [tuple(sorted(term_factors(term))) for term in table.terms]
        for term, names in zip(table.terms, stated, strict=True):
            yield from self._listed_faults(term, names, stated, where)

    def _listed_faults(
        self, term: str, names: tuple[str, ...], stated: list[tuple[str, ...]], where: str
    ) -> Iterator[Fault]:
        """Check one listed term: known factors, degree 2 at most, and its parts listed as well."""
        factors = self.tables.factors
        unknown = [factor for factor in names if factor not in factors]
        for factor in unknown:
            mend = nearest(factor, factors, "use the names of factors")
            yield Fault(f"the term {term} names no factor of the study: {factor}", where, mend)
        if unknown:
            return
        levelled = [factor for factor in names if factors[factor].levels is not None]
        if len(names) > 2 or len(levelled) > 1:
            yield Fault(
                f"the term {term} is beyond a second-order model",
                where,
                "use squares and products of two factors, at most one of them with levels",
            )
            return
        missing = [factor for factor in set(names) if (factor,) not in stated]
        if len(names) == 2 and missing:
            yield Fault(
                f"{term} is listed without {' and '.join(sorted(missing))}",
                where,
                "list what a term is made of too: without it the model depends on the coding",
            )

    def _term_faults(self, name: str, term: str) -> Iterator[Fault]:
        where = self.at("responses", name, "formula", term)
        names = term_factors(term)
        if len(names) > 2:
            yield Fault(f"the term {term} is of degree {len(names)}", where, "use degree 2 at most")
        if names == ["per"]:
            yield Fault("a denominator is not served", where, "measure the ratio as a response")
            return
        if set(names) & set(self.tables.responses):
            yield from self._derived_faults(term, names, where)
            return
        for factor in names:
            table = self.tables.factors.get(factor)
            if table is None:
                known = [*self._numeric_names(), *self._measured_names()]
                yield Fault(
                    f"the term {term} names no factor of the study: {factor}",
                    where,
                    nearest(factor, known, "use the names of numeric factors"),
                )
            elif table.levels is not None or table.scale == "log":
                kind = "has levels" if table.levels is not None else "is on a log scale"
                yield Fault(f"{factor} {kind} and cannot stand in a formula", where, "leave it out")

    def _derived_faults(self, term: str, names: list[str], where: str) -> Iterator[Fault]:
        """Check a term of a formula that names a response: a measured one, by itself."""
        for name in names:
            table = self.tables.responses.get(name)
            if table is not None and table.formula is not None:
                yield Fault(
                    f"the term {term} names {name}, which has a formula itself",
                    where,
                    "write out what it is made of",
                )
                return
        if len(names) > 1:
            yield Fault(
                f"the term {term} multiplies a measured response",
                where,
                "measured responses may only be added, each with a number",
            )

    def _measured_names(self) -> list[str]:
        return [name for name, table in self.tables.responses.items() if table.formula is None]

    def _parts(self, table: ResponseTable) -> list[str]:
        """Name the measured responses that a formula is computed from."""
        named = {name for term in table.formula or () for name in term_factors(term)}
        return [name for name in self._measured_names() if name in named]

    def _numeric_names(self) -> list[str]:
        return [name for name, table in self.tables.factors.items() if table.levels is None]

    def _limit_faults(self, name: str, table: LimitTable, *, exact: bool) -> Iterator[Fault]:
        where = self.at("responses", name, "limit")
        if table.low is None and table.high is None:
            yield Fault(f"the limit of {name} has neither low nor high", where, "state one")
        elif table.low is not None and table.high is not None and table.low >= table.high:
            yield Fault(
                f"the limit of {name} runs from {table.low:g} to {table.high:g}",
                where,
                "low must lie below high",
            )
        if exact and table.guard not in (None, "none"):
            yield Fault(
                f"{name} is known exactly but guarded by '{table.guard}'",
                where,
                "leave guard out: there is no noise to guard against",
            )

    def _goal_faults(self, name: str, table: GoalTable) -> Iterator[Fault]:
        where = self.at("responses", name, "goal")
        poor, ideal = numbers_of(table.poor), numbers_of(table.ideal)
        if table.want == "near":
            yield from self._near_faults(name, poor, ideal)
            return
        for key, numbers in (("poor", poor), ("ideal", ideal)):
            if numbers is not None and len(numbers) != 1:
                yield Fault(
                    f"{key} of {name} holds two numbers", where, f"want = '{table.want}' takes one"
                )
                return
        if isinstance(table.exponent, list):
            yield Fault(
                f"exponent of {name} holds two numbers", where, "only want = 'near' has two sides"
            )
        if poor and ideal and (ideal[0] <= poor[0]) == (table.want == "more"):
            yield Fault(
                f"{name} is wanted {table.want}, but ideal {ideal[0]:g} is not"
                f" {'above' if table.want == 'more' else 'below'} poor {poor[0]:g}",
                where,
                "swap poor and ideal, or change want",
            )

    def _near_faults(
        self, name: str, poor: tuple[float, ...] | None, ideal: tuple[float, ...] | None
    ) -> Iterator[Fault]:
        where = self.at("responses", name, "goal")
        if ideal is None:
            yield Fault(f"{name} is wanted near, but no ideal is stated", where, "state ideal")
            return
        if poor is not None and len(poor) != 2:
            yield Fault(f"poor of {name} is one number", where, "write poor = [lower, upper]")
            return
        ends = (poor[0] if poor else float("-inf"), poor[1] if poor else float("inf"))
        if not ends[0] < ideal[0] <= ideal[-1] < ends[1]:
            yield Fault(
                f"poor and ideal of {name} are not in order",
                where,
                "they must rise: poor low, ideal, poor high",
            )

    def _constraint_faults(self) -> Iterator[Fault]:
        for i, table in enumerate(self.tables.constraints):
            where = self.at("constraints", i)
            if table.at_most is None and table.at_least is None:
                yield Fault(
                    f"constraint {table.name} bounds nothing", where, "state at_most or at_least"
                )
            elif (
                table.at_most is not None
                and table.at_least is not None
                and table.at_least > table.at_most
            ):
                yield Fault(
                    f"constraint {table.name} asks for at least {table.at_least:g} and at most"
                    f" {table.at_most:g}",
                    where,
                    "swap the two",
                )
            for name in table.sum:
                factor = self.tables.factors.get(name)
                if factor is None or factor.levels is not None:
                    yield Fault(
                        f"constraint {table.name} names no numeric factor: {name}",
                        self.at("constraints", i, "sum", name),
                        nearest(name, self._numeric_names(), "use the names of numeric factors"),
                    )
                elif factor.scale == "log":
                    yield Fault(
                        f"constraint {table.name} uses {name}, which is on a log scale",
                        where,
                        "constraints take factors on a linear scale",
                    )

    def _leave_out_faults(self) -> Iterator[Fault]:
        measured = self._measured_names()
        for i, table in enumerate(self.tables.leave_out):
            for name in table.responses or ():
                if name not in measured:
                    yield Fault(
                        f"[[leave_out]] names no measured response: {name}",
                        self.at("leave_out", i, "responses"),
                        nearest(name, measured, "use the names of measured responses"),
                    )

    def _today_faults(self) -> Iterator[Fault]:
        for name, value in self.tables.today.items():
            where = self.at("today", name)
            factor = self.tables.factors.get(name)
            if factor is None:
                yield Fault(
                    f"[today] names no factor: {name}",
                    where,
                    nearest(name, list(self.tables.factors), "use the names of factors"),
                )
            elif factor.levels is not None and value not in factor.levels:
                yield Fault(
                    f"{name} has no level {value}", where, f"use {', '.join(factor.levels)}"
                )
            elif factor.levels is None and isinstance(value, str):
                yield Fault(f"{name} is '{value}'", where, "give a number without quotes")

    def block_faults(self, sheet: SheetContent) -> Iterator[Fault]:
        """Check ``[blocks]`` against the sheet."""
        if sheet.runs is None:
            return
        blocks, stated = sheet.runs.blocks, self.tables.blocks
        if len(blocks) > 1 and stated is None:
            yield Fault(
                f"the sheet has blocks ({', '.join(blocks)}), but [blocks] is not stated",
                STUDY_FILE,
                "state future = 'recur' if the same blocks come again (two reactors), 'sample' if"
                " they are a sample of many (days, lots)",
            )
        sample = stated is not None and stated.future == "sample"
        for name, table in self.tables.responses.items():
            if table.block_sd is not None and not sample:
                yield Fault(
                    f"{name} has a block_sd, but the blocks are not a sample",
                    self.at("responses", name, "block_sd"),
                    "state [blocks] future = 'sample', or take block_sd out",
                )
            if sample and table.limit is not None and table.limit.guard == "share":
                yield Fault(
                    f"{name} is guarded by a share of batches, which cannot be promised exactly"
                    " where blocks are a sample",
                    self.at("responses", name, "limit"),
                    "use guard = 'batch'",
                )
        if stated is not None and not blocks:
            yield Fault(
                "[blocks] is stated, but the sheet has no block column",
                self.at("blocks"),
                "add a column block, or take the table out",
            )

    def factors(self) -> tuple[Factor, ...]:
        """Give the factors as records, in the order stated."""
        return tuple(factor_record(name, table) for name, table in self.tables.factors.items())

    def left_out(self) -> tuple[LeftOut, ...]:
        """Give what is left out of the fit, as records."""
        derived = {name: self._parts(table) for name, table in self.tables.responses.items()}
        found = []
        for table in self.tables.leave_out:
            named = list(table.responses or ())
            # what is derived from a left-out value is left out with it
            named += [name for name, parts in derived.items() if set(parts) & set(named)]
            found.append(LeftOut(tuple(table.rows), table.reason, tuple(named)))
        return tuple(found)

    def responses(self) -> tuple[Response, ...]:
        """Give the responses as records, in the order stated."""
        return tuple(
            response_record(name, table, derived=bool(self._parts(table)))
            for name, table in self.tables.responses.items()
        )
