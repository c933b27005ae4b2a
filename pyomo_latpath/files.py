"""Files that are whole or not there at all, and how errors with them are told."""

from __future__ import annotations

import os
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import IO, Any


@contextmanager
def whole_file(path: Path, binary: bool = False) -> Iterator[IO[Any]]:
    """Open a file that takes its place only once it is on disk to the end."""
    draft = path.with_name(f".{path.name}.{os.getpid()}")
    try:
        with draft.open("wb") if binary else draft.open("w", encoding="utf-8", newline="") as file:
            yield file
            file.flush()
            os.fsync(file.fileno())
        os.replace(draft, path)
    except BaseException as error:
        draft.unlink(missing_ok=True)
        if isinstance(error, OSError):  # of a full disk, which names no file, or of the draft
            error.filename = str(path)
        raise


def sentence(error: Exception) -> str:
    """An error that a file can cause, as one sentence that names the file where it is known.

    Examples
    --------
    >>> sentence(FileNotFoundError(2, "No such file or directory", "vans.mps"))
    'vans.mps: no such file or directory'
    """
    if isinstance(error, OSError) and error.strerror is not None:
        place = "" if error.filename is None else f"{error.filename}: "
        return f"{place}{error.strerror.lower()}"
    return str(error) or type(error).__name__
