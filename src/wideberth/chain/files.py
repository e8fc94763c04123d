"""Writing files so that a reader finds the old ones or the new ones, never half of one."""

from __future__ import annotations

import os
import tempfile
from collections.abc import Mapping
from pathlib import Path

from wideberth.errors import Fault, InputError


def check_writable(folder: Path) -> None:
    """Find out before a long job whether its files can be written at its end.

    Raises
    ------
    InputError
        When the folder cannot be made or written.
    """
    try:
        folder.mkdir(parents=True, exist_ok=True)
        with tempfile.TemporaryFile(dir=folder):
            pass
    except OSError as error:
        raise _unwritable(folder, error) from error


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
        raise _unwritable(next(iter(files)).parent, error) from error
    finally:
        for ready in waiting.values():
            ready.unlink(missing_ok=True)


def _unwritable(folder: Path, error: OSError) -> InputError:
    reason = (error.strerror or "cannot be written").lower()
    return InputError(
        [Fault(f"the folder cannot be written: {reason}", str(folder), "choose another folder")]
    )
