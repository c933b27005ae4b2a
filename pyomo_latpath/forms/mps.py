"""Reader of MPS files, fixed and free, strict about what it does not understand.

Conventions (common practice, the same in most readers of this format):

- an integer column inside markers without any bound lies between 0 and 1; with any bound
  given, its default is 0 to infinity like that of other columns;
- a negative upper bound moves a default lower bound of 0 to minus infinity;
- a right-hand side of the objective row is minus the objective's constant;
- a range R makes an L row lie in [b - |R|, b], a G row in [b, b + |R|], an E row in
  [b, b + |R|] for R >= 0 and in [b - |R|, b] for R < 0;
- rows of type N after the first are dropped; numbers from 1e20 on are infinite.

Free format is tried first. Where the fields do not come out right (names with blanks), the
columns of the fixed format are.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import scipy.sparse as sp

from .file_text import ModelFileError, read_bytes
from .linear_form import LinearForm, Sense

INFINITE = 1e20

#: A data line as its type field, its name field, and the names and numbers that follow.
Fields = tuple[str, str, Sequence[str]]

_SENSES: dict[str, Sense] = {"MAX": "max", "MAXIMIZE": "max", "MIN": "min", "MINIMIZE": "min"}
_SECTIONS = ("NAME", "OBJSENSE", "ROWS", "COLUMNS", "RHS", "RANGES", "BOUNDS", "ENDATA")
_LOWER = ("LO", "LI", "FX")
_UPPER = ("UP", "UI", "FX", "SC", "SI")
_WITHOUT_NUMBER = ("FR", "MI", "PL", "BV")
_NOT_LINEAR = {
    "SOS": "special ordered sets",
    "SOS1": "special ordered sets",
    "SOS2": "special ordered sets",
    "SETS": "special ordered sets",
    "QUADOBJ": "a quadratic objective",
    "QMATRIX": "a quadratic objective",
    "QSECTION": "quadratic terms",
    "QUADS": "quadratic terms",
    "QCMATRIX": "quadratic rows",
    "CSECTION": "cone constraints",
    "INDICATORS": "indicator constraints",
    "GENCONS": "general constraints",
    "PWLOBJ": "a piecewise linear objective",
}


def read_mps(path: Path | str) -> LinearForm:
    """Read an .mps file, or .mps.gz.

    Raises
    ------
    ModelFileError
        With the line, for unknown sections and types, unknown, repeated or scattered names,
        text where a number is expected, contradicting values, a file cut off, and for parts
        that no linear model has.

    Examples
    --------
    >>> import tempfile
    >>> text = '''ROWS
    ...  N cost
    ...  G milk
    ... COLUMNS
    ...  goat cost 3 milk 2
    ... RHS
    ...  rhs milk 7
    ... ENDATA
    ... '''
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     file = Path(folder) / "milk.mps"
    ...     _ = file.write_text(text)
    ...     form = read_mps(file)
    >>> list(form.row_names), form.row_lower.tolist(), form.matrix.toarray().tolist()
    (['milk'], [7.0], [[2.0]])
    """
    path = Path(path)
    content = read_bytes(path)
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError:
        text = content.decode("latin-1")
    lines = text.split("\n")
    try:
        return _Reader(path, _free).read(lines)
    except ModelFileError as error:
        free = error
    try:
        return _Reader(path, _fixed).read(lines)
    except ModelFileError as fixed:
        # The format that got further is the one meant.
        raise (fixed if (fixed.line or 0) > (free.line or 0) else free) from None


def _free(line: str, section: str) -> Fields:
    """Split a data line at its blanks."""
    words = line.split()
    if section == "COLUMNS":
        return "", words[0], words[1:]
    if section in ("ROWS", "BOUNDS"):
        return words[0], "", words[1:]
    # Names and numbers come in pairs, so an odd word is the name of the set.
    return ("", words[0], words[1:]) if len(words) % 2 else ("", "", words)


def _fixed(line: str, section: str) -> Fields:
    """Cut a data line at the columns of the fixed format."""
    line = line.rstrip().ljust(61)
    gaps = (line[0], line[3], line[12:14], line[22:24], line[36:39], line[47:49], line[61:])
    if any(gap.strip() for gap in gaps):
        return "", "", ()
    words = [line[14:22].strip(), line[24:36].strip(), line[39:47].strip(), line[49:61].strip()]
    while words and not words[-1]:
        words.pop()
    name = line[4:12].strip()
    return (
        (line[1:3].strip(), "", (name,)) if section == "ROWS" else (line[1:3].strip(), name, words)
    )


@dataclass(slots=True)
class _Column:
    """One column: its cost, its type, and its bounds as far as they are known.

    `lower` and `upper` are the numbers given. They win over the bounds that types without a
    number set, which are `open_lower` and `open_upper`.
    """

    name: str
    integer: bool
    open_upper: float
    open_lower: float = 0.0
    lower: float | None = None
    upper: float | None = None
    cost: float = 0.0
    semicontinuous: bool = False
    bounded: bool = False

    def take_type(self, kind: str) -> None:
        """Apply FR, MI, PL or BV."""
        if kind in ("FR", "MI"):
            self.open_lower = -math.inf
        if kind in ("FR", "PL"):
            self.open_upper = math.inf
        if kind == "BV":
            self.integer, self.open_lower, self.open_upper = True, 0.0, 1.0

    def take_number(self, kind: str, value: float) -> str | None:
        """Apply a bound with a number; return what it contradicts, if anything."""
        self.integer |= kind in ("LI", "UI", "SI")
        self.semicontinuous |= kind in ("SC", "SI")
        if kind in _LOWER:
            if self.lower not in (None, value):
                return f"lower bound, {value:g} after {self.lower:g}"
            self.lower = value
        if kind in _UPPER:
            if self.upper not in (None, value):
                return f"upper bound, {value:g} after {self.upper:g}"
            self.upper = value
        return None

    def limits(self) -> tuple[float, float]:
        upper = self.open_upper if self.upper is None else self.upper
        if self.lower is not None:
            return self.lower, upper
        return (-math.inf if upper < 0 else self.open_lower), upper


class _Reader:
    """The model as far as it has been read, and the line that is being read."""

    def __init__(self, path: Path, split: Callable[[str, str], Fields]) -> None:
        self.path, self.split, self.place = path, split, 0
        self.sense: Sense = "min"
        self.objective: str | None = None  # the first row of type N
        self.rows: dict[str, int] = {}  # rows of type N have the index -1
        self.kinds: list[str] = []
        self.columns: dict[str, _Column] = {}
        self.column: _Column | None = None  # the one being read, and the rows it has met
        self.rows_met: set[str] = set()
        self.marked = False  # between integer markers
        self.entries: tuple[list[int], list[int], list[float]] = ([], [], [])
        self.sets: dict[str, str] = {}
        self.sides: dict[str, float] = {}
        self.ranges: dict[str, float] = {}

    def error(self, sentence: str) -> ModelFileError:
        return ModelFileError(self.path, self.place, sentence)

    def read(self, lines: Sequence[str]) -> LinearForm:
        """Walk through the lines and build the form."""
        takers: dict[str, Callable[[str, str, Sequence[str]], None]] = {
            "ROWS": self.take_row,
            "COLUMNS": self.take_entries,
            "RHS": self.take_sides,
            "RANGES": self.take_ranges,
            "BOUNDS": self.take_bound,
        }
        section = ""
        for place, line in enumerate(lines, start=1):
            self.place = place
            if not line.strip() or line[0] == "*":
                continue
            if line[0] not in " \t":
                section = self.take_header(line.split())
                if section == "ENDATA":
                    return self.form()
            elif section == "OBJSENSE":
                self.take_sense(line.strip())
            elif section in takers:
                takers[section](*self.split(line, section))
            else:
                raise self.error("data outside the sections that hold data")
        raise self.error("the file ends without ENDATA; it may be cut off")

    def take_header(self, words: list[str]) -> str:
        section = words[0].upper()
        if section in _NOT_LINEAR:
            raise self.error(
                f"the file holds {_NOT_LINEAR[section]}; only linear models can be read"
            )
        if section not in _SECTIONS:
            raise self.error(f"unknown section {words[0]!r}")
        if section == "OBJSENSE" and len(words) > 1:
            self.take_sense(words[1])
        return section

    def take_sense(self, word: str) -> None:
        if word.upper() not in _SENSES:
            raise self.error(f"the sense of the objective is {word!r}; expected MIN or MAX")
        self.sense = _SENSES[word.upper()]

    def take_row(self, kind: str, _: str, words: Sequence[str]) -> None:
        if len(words) != 1 or not words[0]:
            raise self.error("expected the type and the name of a row")
        name, kind = words[0], kind.upper()
        if name in self.rows:
            raise self.error(f"a second row is named {name!r}")
        if kind == "N":
            self.objective = self.objective or name
            self.rows[name] = -1
        elif kind in ("L", "G", "E"):
            self.rows[name] = len(self.kinds)
            self.kinds.append(kind)
        else:
            raise self.error(f"row {name!r} has the type {kind!r}; expected N, L, G or E")

    def take_entries(self, _: str, name: str, words: Sequence[str]) -> None:
        if words and words[0] == "'MARKER'":
            if words[-1] not in ("'INTORG'", "'INTEND'"):
                raise self.error(f"unknown marker {words[-1]}; expected 'INTORG' or 'INTEND'")
            self.marked = words[-1] == "'INTORG'"
            return
        column = self.column
        if column is None or column.name != name:
            if name in self.columns:
                raise self.error(f"column {name!r} begins a second time")
            column = _Column(name, self.marked, open_upper=1.0 if self.marked else math.inf)
            self.column = self.columns[name] = column
            self.rows_met = set()
        rows, columns, values = self.entries
        for row, text in self.pairs(words):
            i = self.row(row)
            if row in self.rows_met:
                raise self.error(f"column {name!r} has a second coefficient in row {row!r}")
            self.rows_met.add(row)
            if i >= 0:
                rows.append(i)
                columns.append(len(self.columns) - 1)
                values.append(self.number(text))
            elif row == self.objective:
                column.cost = self.number(text)

    def take_sides(self, _: str, name: str, words: Sequence[str]) -> None:
        self.same_set("RHS", name)
        self.note(self.sides, "right-hand side", words)

    def take_ranges(self, _: str, name: str, words: Sequence[str]) -> None:
        self.same_set("RANGES", name)
        self.note(self.ranges, "range", words)

    def note(self, values: dict[str, float], what: str, words: Sequence[str]) -> None:
        for row, text in self.pairs(words):
            self.row(row)
            value = self.limit(text)
            if values.setdefault(row, value) != value:
                raise self.error(
                    f"row {row!r} has a second {what}, {value:g} after {values[row]:g}"
                )

    def take_bound(self, kind: str, name: str, words: Sequence[str]) -> None:
        kind = kind.upper()
        numbered = kind in _LOWER + _UPPER
        if not numbered and kind not in _WITHOUT_NUMBER:
            raise self.error(f"unknown type of bound {kind!r}")
        # Free format may leave out the set's name, and put a number behind FR, MI, PL and BV.
        if len(words) == 3 or (len(words) == 2 and not numbered and words[1] in self.columns):
            name, words = words[0], words[1:]
        self.same_set("BOUNDS", name)
        if len(words) != 2 and (numbered or len(words) != 1):
            raise self.error(f"a bound {kind} needs a column{' and a number' * numbered}")
        column = self.columns.get(words[0])
        if column is None:
            raise self.error(f"column {words[0]!r} is not in COLUMNS")
        if not column.bounded:
            column.bounded, column.open_upper = True, math.inf
        if numbered:
            contradiction = column.take_number(kind, self.limit(words[1]))
            if contradiction:
                raise self.error(f"column {column.name!r} has a second {contradiction}")
        else:
            column.take_type(kind)

    def same_set(self, section: str, name: str) -> None:
        if name and self.sets.setdefault(section, name) != name:
            raise self.error(
                f"{section} has a second set {name!r} after {self.sets[section]!r}; keep one"
            )

    def pairs(self, words: Sequence[str]) -> Iterator[tuple[str, str]]:
        """Rows and the texts of their numbers, one or two of each on a line."""
        if len(words) not in (2, 4):
            raise self.error("expected one or two pairs of a row and a number")
        return zip(words[::2], words[1::2], strict=True)

    def row(self, name: str) -> int:
        try:
            return self.rows[name]
        except KeyError:
            raise self.error(f"row {name!r} is not in ROWS") from None

    def number(self, text: str) -> float:
        """Read a finite number."""
        value = self.limit(text)
        if value in (-math.inf, math.inf):
            raise self.error(f"{text!r} stands where a finite number is expected")
        return value

    def limit(self, text: str) -> float:
        """Read a number that may be infinite."""
        try:
            value = float(text)
        except ValueError:
            value = math.nan
        if -INFINITE < value < INFINITE and "_" not in text:
            return value
        if math.isnan(value) or "_" in text:
            raise self.error(f"{text!r} stands where a number is expected")
        return math.copysign(math.inf, value)

    def form(self) -> LinearForm:
        """Put the arrays together."""
        rows, positions, values = self.entries
        columns = list(self.columns.values())
        names = [name for name, i in self.rows.items() if i >= 0]
        row_limits = [
            self.row_limits(name, kind) for name, kind in zip(names, self.kinds, strict=True)
        ]
        col_limits = [column.limits() for column in columns]
        return LinearForm.from_arrays(
            sp.coo_array(
                (
                    np.array(values, np.float64),
                    (np.array(rows, np.int64), np.array(positions, np.int64)),
                ),
                shape=(len(names), len(columns)),
            ),
            row_lower=[lower for lower, _ in row_limits],
            row_upper=[upper for _, upper in row_limits],
            col_lower=[lower for lower, _ in col_limits],
            col_upper=[upper for _, upper in col_limits],
            cost=[column.cost for column in columns],
            offset=0.0 - self.sides.get(self.objective, 0.0) if self.objective else 0.0,
            sense=self.sense,
            integer=[column.integer for column in columns],
            semicontinuous=[column.semicontinuous for column in columns],
            row_names=names,
            col_names=list(self.columns),
        )

    def row_limits(self, name: str, kind: str) -> tuple[float, float]:
        side, width = self.sides.get(name, 0.0), self.ranges.get(name)
        if width is None:
            return (-math.inf if kind == "L" else side), (math.inf if kind == "G" else side)
        if kind == "L" or (kind == "E" and width < 0):
            return side - abs(width), side
        return side, side + abs(width)
