"""Writing files so that a reader finds the old ones or the new ones, never half of one."""

from __future__ import annotations

import os
import tempfile
from collections.abc import Mapping
from pathlib import Path

from wideberth.errors import Fault, InputError


def write_all(files: Mapping[Path, bytes]) -> None:
    """Write all files, each replaced in one step after every one of them is safely on disk.

    Raises
    ------
    InputError
        When a folder cannot be written; every old file is still whole then.
    """
    waiting: dict[Path, Path] = {}
    try:
        for path, content in files.items():
            path.parent.mkdir(parents=True, exist_ok=True)
            handle, name = tempfile.mkstemp(prefix=f".{path.name}.", dir=path.parent)
            waiting[path] = Path(name)
            with os.fdopen(handle, "wb") as target:
                target.write(content)
                target.flush()
                os.fsync(target.fileno())
            waiting[path].chmod(0o644)
        for path, ready in waiting.items():
            ready.replace(path)
    except OSError as error:
        where = str(next(iter(files)).parent)
        reason = (error.strerror or "cannot be written").lower()
        raise InputError(
            [Fault(f"the folder cannot be written: {reason}", where, "choose another folder")]
        ) from error
    finally:
        for ready in waiting.values():
            ready.unlink(missing_ok=True)
