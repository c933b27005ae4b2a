"""Lines of DIMACS files as arrays.

The whole file is turned into arrays at once. Only a file that this cannot make sense of is
read again line by line, to say where it is wrong.
"""

from __future__ import annotations

import re
import warnings
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from .file_text import ModelFileError

Floats = NDArray[np.float64]
Indices = NDArray[np.int64]

_NUMBER = re.compile(rb"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?")
_BLANK = np.isin(np.arange(256), np.frombuffer(b" \t\r\n\v\f", np.uint8))
_IN_NUMBERS = np.isin(np.arange(256), np.frombuffer(b"0123456789+-.eE", np.uint8)) | _BLANK


@dataclass(frozen=True)
class Dialect:
    """What the lines of one kind of file hold after their letter."""

    word: str
    fields: dict[str, tuple[str, ...]]

    @property
    def problem_line(self) -> str:
        return f"p {self.word} NODES ARCS"

    def line(self, letter: str) -> str:
        return " ".join([letter, *(field.upper() for field in self.fields[letter])])


@dataclass(frozen=True, eq=False)
class Lines:
    """All lines that start with one letter.

    Attributes
    ----------
    numbers : ndarray, shape (k, fields), float64
    places : ndarray, shape (k,), int64
        Line numbers in the file, from 1.
    """

    numbers: Floats
    places: Indices


@dataclass(frozen=True, eq=False)
class Content:
    """A file as arrays, its numbers not yet checked for sense.

    Attributes
    ----------
    nodes, arcs : int
        As the problem line announces them.
    problem_place : int
        Number of the problem line.
    lines : dict of str to Lines
        By their letter, 'n' and 'a'.
    """

    nodes: int
    arcs: int
    problem_place: int
    lines: dict[str, Lines]


def parse(path: Path, text: bytes, dialect: Dialect) -> Content:
    """Read a file's lines.

    Raises
    ------
    ModelFileError
        With the line that cannot be read.
    """
    return parse_at_once(text, dialect) or parse_line_by_line(path, text, dialect)


def parse_at_once(text: bytes, dialect: Dialect) -> Content | None:
    """Read everything with array operations; None for a file with anything out of order."""
    data = np.frombuffer(text, np.uint8)
    blank = _BLANK[data]
    token_at = np.flatnonzero(~blank & np.concatenate([[True], blank[:-1]]))
    line_end = np.append(np.flatnonzero(data == 10), data.size)
    last = np.searchsorted(token_at, line_end)
    first = np.concatenate([[0], last[:-1]])
    tokens = last - first
    filled = np.flatnonzero(tokens)
    letter = np.zeros(tokens.size, dtype=np.uint8)
    letter[filled] = data[token_at[first[filled]]]
    if not np.isin(letter[filled], np.frombuffer(b"cpna", np.uint8)).all():
        return None
    problem = np.flatnonzero(letter == ord("p"))
    entries = np.flatnonzero((letter == ord("n")) | (letter == ord("a")))
    if problem.size != 1 or (entries.size and entries[0] < problem[0]):
        return None
    place = int(problem[0])
    line_start = np.concatenate([[0], line_end[:-1] + 1])
    length = np.diff(np.append(line_start, data.size))
    sizes = _problem_sizes(text[line_start[place] : line_end[place]].split(), dialect)
    if isinstance(sizes, str):
        return None
    lines = {}
    for kind, fields in dialect.fields.items():
        chosen = letter == ord(kind)
        if (tokens[chosen] != len(fields) + 1).any():
            return None
        letters_at = token_at[first[chosen]]
        # With the letters wiped out only numbers are left; a letter glued to a word ("a1")
        # leaves one number too many.
        kept = data[np.repeat(chosen, length)]
        kept[np.cumsum(length[chosen]) - length[chosen] + letters_at - line_start[chosen]] = 32
        numbers = _parse_numbers(kept, letters_at.size * len(fields))
        if numbers is None:
            return None
        lines[kind] = Lines(numbers.reshape(-1, len(fields)), np.flatnonzero(chosen) + 1)
    return Content(*sizes, place + 1, lines)


def _parse_numbers(data: NDArray[np.uint8], count: int) -> Floats | None:
    if count == 0:
        return np.zeros(0)
    if not _IN_NUMBERS[data].all():
        return None
    try:
        with warnings.catch_warnings():
            # NumPy stops at the first token that is no number, and only warns of it.
            warnings.simplefilter("error", DeprecationWarning)
            numbers = np.fromstring(data.tobytes(), dtype=np.float64, sep=" ")
    except (DeprecationWarning, ValueError):
        return None
    return numbers if numbers.size == count else None


def _problem_sizes(words: list[bytes], dialect: Dialect) -> tuple[int, int] | str:
    """Return the numbers of nodes and arcs, or what is wrong with the problem line."""
    expected = f"expected '{dialect.problem_line}'"
    if len(words) != 4 or words[0] != b"p":
        return f"the problem line has {len(words)} words; {expected}"
    if words[1] != dialect.word.encode():
        return f"the problem line speaks of {_show(words[1])}; {expected} in this kind of file"
    if not (words[2].isdigit() and words[3].isdigit()):
        return f"the problem line's sizes are not whole numbers; {expected}"
    sizes = int(words[2]), int(words[3])
    return (
        sizes if max(sizes) < 2**31 else f"the problem line announces {max(sizes)} lines or nodes"
    )


def parse_line_by_line(path: Path, text: bytes, dialect: Dialect) -> Content:
    """Read as `parse_at_once` does, slowly, and raise at the first line that is wrong."""
    sizes: tuple[int, int] | None = None
    problem_place = 0
    numbers: dict[str, list[list[float]]] = {letter: [] for letter in dialect.fields}
    places: dict[str, list[int]] = {letter: [] for letter in dialect.fields}
    for place, line in enumerate(text.split(b"\n"), start=1):
        words = line.split()
        if not words or words[0].startswith(b"c"):
            continue
        letter = words[0].decode("latin-1")
        if letter == "p":
            if sizes is not None:
                raise ModelFileError(path, place, f"a second problem line after {problem_place}")
            read = _problem_sizes(words, dialect)
            if isinstance(read, str):
                raise ModelFileError(path, place, read)
            sizes, problem_place = read, place
        elif letter not in dialect.fields:
            raise ModelFileError(
                path, place, f"the line starts with {letter!r}; expected one of c, p, n and a"
            )
        elif sizes is None:
            raise ModelFileError(
                path, place, f"'{dialect.problem_line}' must come before the first '{letter}' line"
            )
        else:
            numbers[letter].append(_line_numbers(path, place, words, dialect))
            places[letter].append(place)
    if sizes is None:
        raise ModelFileError(path, None, f"the problem line '{dialect.problem_line}' is missing")
    lines = {
        letter: Lines(
            np.array(numbers[letter], dtype=np.float64).reshape(-1, len(fields)),
            np.array(places[letter], dtype=np.int64),
        )
        for letter, fields in dialect.fields.items()
    }
    return Content(*sizes, problem_place, lines)


def _line_numbers(path: Path, place: int, words: list[bytes], dialect: Dialect) -> list[float]:
    letter = words[0].decode()
    fields = dialect.fields[letter]
    if len(words) != len(fields) + 1:
        raise ModelFileError(
            path,
            place,
            f"the line has {len(words) - 1} values after '{letter}'; expected "
            f"'{dialect.line(letter)}'",
        )
    for field, word in zip(fields, words[1:], strict=True):
        if not _NUMBER.fullmatch(word):
            raise ModelFileError(
                path, place, f"{_show(word)} stands where a number is expected (the {field})"
            )
    return [float(word) for word in words[1:]]


def _show(word: bytes) -> str:
    return repr(word.decode("utf-8", errors="replace"))
