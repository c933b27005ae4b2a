"""The journal of a batch: what is finished, on disk as soon as it is, and never twice.

One JSON line for each record, behind a first line that says what batch this is. Lines are only
ever appended, and synced before anyone is told of them; so a kill at any moment leaves whole lines
and at most one half line at the end, which is cut off when the journal is opened again. Of two
lines for one instance (its file has changed in between) the later one counts.
"""

from __future__ import annotations

import json
import os
import sys
from collections.abc import Container, Iterator, Mapping, Sequence
from pathlib import Path
from typing import IO, Any

from .record import BatchRecord

SCHEMA = "latpath-journal/1"


class JournalError(Exception):
    """A journal that cannot be used or written; the text says which, why, and what to do."""


class Journal:
    """The records of one batch on disk.

    Parameters
    ----------
    path : Path
        Made if it is not there.
    options : mapping of str to plain data
        What a record depends on besides its instance. A journal of other options is refused.

    Attributes
    ----------
    notes : list of str
        What was found amiss and mended.
    replaced : int
        Records written for instances that had one already.

    Raises
    ------
    JournalError
        When another process writes this journal, when it belongs to another batch, when the
        file is something else, or when it cannot be written.

    Examples
    --------
    >>> import tempfile
    >>> folder = tempfile.TemporaryDirectory()
    >>> path = Path(folder.name) / "journal.jsonl"
    >>> with Journal(path, {"seed": 0}) as journal:
    ...     journal.append([BatchRecord("monday.mps", "0f", "optimal")])
    >>> with Journal(path, {"seed": 0}) as journal:
    ...     [record.instance for record in journal.records()]
    ['monday.mps']
    >>> Journal(path, {"seed": 1})
    Traceback (most recent call last):
    ...
    pyomo_latpath.batch.journal.JournalError: ... was begun with seed = 0, now it is 1; ...
    >>> folder.cleanup()
    """

    def __init__(self, path: Path, options: Mapping[str, Any]) -> None:
        self.path, self._options = path, dict(options)
        self.notes: list[str] = []
        self.replaced = 0
        try:
            self._file: IO[bytes] = open(path, "ab", buffering=0)  # noqa: SIM115
        except OSError as error:
            raise JournalError(f"{path}: {_words(error)}") from error
        try:
            _lock(self._file, path)
            self.read()
            self._reader: IO[bytes] = open(path, "rb")  # noqa: SIM115
        except BaseException:
            self._file.close()
            raise

    def __enter__(self) -> Journal:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()

    def close(self) -> None:
        """Let other processes write."""
        self._reader.close()
        self._file.close()

    def __len__(self) -> int:
        return len(self._places)

    def __contains__(self, name: str) -> bool:
        return name in self._places

    def get(self, name: str) -> BatchRecord | None:
        """Read the record of an instance, if there is one."""
        return self._at(self._places[name]) if name in self._places else None

    def records(self, names: Container[str] | None = None) -> Iterator[BatchRecord]:
        """Read all records anew, or those of some instances, one at a time, as written."""
        for name, place in list(self._places.items()):
            if names is None or name in names:
                yield self._at(place)

    def _at(self, place: int) -> BatchRecord:
        self._reader.seek(place)
        return BatchRecord.from_json(self._reader.readline())

    def append(self, records: Sequence[BatchRecord]) -> None:
        """Write records and see them safe on disk.

        Raises
        ------
        JournalError
            If they cannot be written; the journal is left as it was.
        """
        lines = [record.to_json().encode() + b"\n" for record in records]
        self._write(b"".join(lines))
        for record, line in zip(records, lines, strict=True):
            self.replaced += self._places.pop(record.instance, None) is not None
            self._places[record.instance] = self._end
            self._end += len(line)

    def _write(self, data: bytes) -> None:
        try:
            left = memoryview(data)
            while left:
                left = left[self._file.write(left) :]
            os.fsync(self._file.fileno())
        except OSError as error:
            self._file.truncate(self._end)
            raise JournalError(
                f"{self.path}: {_words(error)}; the {len(self)} records in it are safe"
            ) from error

    def read(self) -> None:
        """Find the records anew, and cut off a half line; an interrupt may have left both."""
        self._places: dict[str, int] = {}
        head = {"schema": SCHEMA, "options": self._options}
        end = place = 0
        first = json.dumps(head).encode() + b"\n"
        with open(self.path, "rb") as lines:
            for number, line in enumerate(lines, 1):
                place, end = end, end + len(line)
                if not line.endswith(b"\n"):
                    if number == 1 and not first.startswith(line):
                        raise self._no_journal()
                    end = self._cut(place, number)
                elif number == 1:
                    self._check_head(line, head)
                else:
                    self._note_place(place, number, line)
        self._end = end
        if end == 0:
            self._write(first)
            self._end = len(first)
            _sync_folder(self.path.parent)

    def _cut(self, place: int, number: int) -> int:
        self._file.truncate(place)
        self.notes.append(
            f"line {number} of {self.path} was only half written when an earlier run ended; it is "
            "cut off, and its instance solved again"
        )
        return place

    def _check_head(self, line: bytes, head: dict[str, Any]) -> None:
        try:
            found = json.loads(line)
        except ValueError:
            found = None
        if not isinstance(found, dict) or found.get("schema") != SCHEMA:
            raise self._no_journal()
        now, then = json.loads(json.dumps(head["options"])), found.get("options", {})
        for key in sorted(now.keys() | then.keys()):
            if now.get(key) != then.get(key):
                raise JournalError(
                    f"{self.path} was begun with {key} = {_shown(then.get(key))}, now it is "
                    f"{_shown(now.get(key))}; a batch has one set of inputs and options: use the "
                    "same ones, or another folder, or delete this one"
                )

    def _no_journal(self) -> JournalError:
        return JournalError(
            f"{self.path} is no journal of a batch that this version can read; it is left as it "
            "is: use another place, or move it away"
        )

    def _note_place(self, place: int, number: int, line: bytes) -> None:
        try:
            name = BatchRecord.from_json(line).instance
        except ValueError:
            self.notes.append(
                f"line {number} of {self.path} is no record; it is passed over, and its instance "
                "solved again"
            )
            return
        self._places.pop(name, None)
        self._places[name] = place


def _lock(file: IO[bytes], path: Path) -> None:
    """Keep other processes out for as long as the file is open."""
    try:
        if sys.platform == "win32":
            import msvcrt

            # A byte far behind the end: locked bytes cannot be read there.
            file.seek(2**40)
            msvcrt.locking(file.fileno(), msvcrt.LK_NBLCK, 1)
        else:
            import fcntl

            fcntl.flock(file, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except OSError as error:
        raise JournalError(
            f"{path} is being written by another process; wait for its end, or use another place"
        ) from error


def _sync_folder(folder: Path) -> None:
    """See a new name in a folder safe on disk, where the system can."""
    if sys.platform != "win32":
        handle = os.open(folder, os.O_RDONLY)
        try:
            os.fsync(handle)
        finally:
            os.close(handle)


def _words(error: OSError) -> str:
    return (error.strerror or str(error)).lower()


def _shown(value: Any) -> str:
    return "not given" if value is None else json.dumps(value)
