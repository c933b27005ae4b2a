"""The bytes of a model file, plain or gzipped, and the error that names its file and line."""

from __future__ import annotations

import gzip
import zlib
from pathlib import Path


class ModelFileError(ValueError):
    """A file that does not hold a model we can read.

    The text starts with the file and, where one line is to blame, its number.

    Examples
    --------
    >>> print(ModelFileError("caves.min", 7, "node 9 does not exist"))
    caves.min, line 7: node 9 does not exist
    >>> print(ModelFileError("caves.min", None, "the file is empty"))
    caves.min: the file is empty
    """

    def __init__(self, path: Path | str, line: int | None, sentence: str) -> None:
        self.path, self.line, self.sentence = str(path), line, sentence
        place = self.path if line is None else f"{self.path}, line {line}"
        super().__init__(f"{place}: {sentence}")

    def __reduce__(self) -> tuple[type[ModelFileError], tuple[str, int | None, str]]:
        # Exceptions with their own signature must say how to come back from another process.
        return (ModelFileError, (self.path, self.line, self.sentence))


def read_bytes(path: Path) -> bytes:
    """Return the whole content of a file, unpacked if its name ends in .gz.

    Raises
    ------
    FileNotFoundError, PermissionError, IsADirectoryError
        From the operating system, as they are.
    ModelFileError
        When a .gz file is damaged or cut off.
    """
    content = path.read_bytes()
    if path.suffix.lower() != ".gz":
        return content
    try:
        return gzip.decompress(content)
    except (gzip.BadGzipFile, EOFError, zlib.error) as error:
        raise ModelFileError(
            path, None, f"the gzip data is damaged or cut off ({error}); get the file anew"
        ) from error
