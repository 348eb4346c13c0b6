"""Writing a file whole or not at all."""

from __future__ import annotations

import contextlib
import os
from collections.abc import Iterator
from pathlib import Path

from clockfall.errors import ClockfallError


class CannotWrite(ClockfallError, OSError):
    """A file could not be written; what was there before is untouched."""


def check_target(path: Path, *, overwrite: bool) -> None:
    """Raise CannotWrite where `path` could not be written; called before long work, and again by `written_whole`."""
    if path.is_dir():
        raise CannotWrite(f"{path}: is a directory; name a file, such as {path / 'result.h5'}")
    if path.exists() and not overwrite:
        raise CannotWrite(f"{path}: exists already; use --overwrite to replace it")
    if not path.parent.is_dir():
        raise CannotWrite(f"{path}: there is no directory {path.parent}")


@contextlib.contextmanager
def written_whole(path: Path, *, overwrite: bool) -> Iterator[Path]:
    """Give a place beside `path` to write to; what was written there is flushed to disk and moved to `path` at the end.

    Where anything fails, nothing is left behind.

    Raises
    ------
    CannotWrite
        As `check_target` raises it, or where the system refuses.
    """
    check_target(path, overwrite=overwrite)
    unfinished = path.with_name(f".{path.name}.{os.getpid()}.part")
    try:
        yield unfinished
        with unfinished.open("rb+") as raw:
            os.fsync(raw.fileno())
        check_target(path, overwrite=overwrite)
        unfinished.replace(path)
    except OSError as error:
        if isinstance(error, CannotWrite):
            raise
        raise CannotWrite(f"{path}: {error.strerror or error}") from error
    finally:
        with contextlib.suppress(OSError):
            unfinished.unlink(missing_ok=True)
