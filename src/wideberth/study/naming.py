"""What names factors and responses may have, and which known name was probably meant."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterable, Iterator
from difflib import get_close_matches

from wideberth.errors import Fault

RESERVED = ("constant", "per", "run", "block", "kind", "note", "weight", "sample")
AS_RUN = " as run"
"""Ending of the columns that hold what a setting really was."""
_NAME = re.compile(r"[^\W\d_][\w .\-]*")


def name_faults(
    factors: Iterable[str], responses: Iterable[str], at: Callable[..., str]
) -> Iterator[Fault]:
    """Check all names; ``at`` says where a key path stands."""
    seen: dict[str, str] = {}
    for table, names in (("factors", factors), ("responses", responses)):
        for name in names:
            where = at(table, name)
            if not _NAME.fullmatch(name) or name != name.strip():
                yield Fault(
                    f"'{name}' cannot be a name",
                    where,
                    "start with a letter; use letters, digits, spaces, _, - and .",
                )
            elif name.endswith(AS_RUN):
                mend = f"only columns of the run sheet end in '{AS_RUN.strip()}'"
                yield Fault(f"'{name}' would read as a setting as run", where, mend)
            elif name.lower() in RESERVED:
                yield Fault(f"'{name}' has a meaning of its own here", where, "choose another name")
            if name in seen:
                yield Fault(
                    f"'{name}' is used in {seen[name]} and in {table}", where, "rename one of them"
                )
            seen[name] = table


def nearest(name: str, known: Iterable[str], otherwise: str) -> str:
    """Suggest the known name that was probably meant, or say what to do instead."""
    near = get_close_matches(name, list(known), n=1, cutoff=0.6)
    return f"did you mean '{near[0]}'?" if near else otherwise
