"""Tables of changed costs, sides and bounds, read one member at a time.

| layout  | files         | what stands in it                                                     |
|---------|---------------|-----------------------------------------------------------------------|
| entries | .csv .parquet | columns `instance,what,name,value`: a line for each changed entry     |
| costs   | .csv .parquet | `instance`, then names of columns: a line of costs for each member    |
| arrays  | .npz          | `cost`, `row_lower`, `row_upper`, `col_lower`, `col_upper`, as far as |
|         |               | they change, a row for each member, and `instance` with their names   |
| costs   | .npy          | an array of costs, a row for each member                              |

`what` is one of the array names above, and `name` a column or row of the form. The lines of a
member stand together. What is not told, or an empty cell among costs, keeps the form's number.
Sides and bounds may be `inf` or `-inf`.
"""

from __future__ import annotations

import csv
import gzip
import math
from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from itertools import groupby
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from ..forms.file_text import ModelFileError
from ..forms.linear_form import Floats, LinearForm

#: What can change from member to member.
KINDS = ("cost", "row_lower", "row_upper", "col_lower", "col_upper")
#: The header of the layout that has a line for each changed entry.
ENTRIES = ["instance", "what", "name", "value"]
#: Rows of a Parquet file held in memory at a time.
BATCH_ROWS = 10_000


@dataclass(frozen=True, eq=False)
class Entries:
    """Changed entries of one vector.

    Attributes
    ----------
    places : ndarray, int64, or None
        Which; None for all of them.
    values : ndarray, float64
    """

    places: NDArray[np.int64] | None
    values: Floats

    def put_into(self, vector: Floats) -> Floats:
        """Return the vector with these entries; the one given stays as it is."""
        if self.places is None:
            return self.values
        changed = vector.copy()
        changed[self.places] = self.values
        return changed


@dataclass(frozen=True, eq=False)
class Line:
    """What a table says of one member, or why that makes no sense."""

    instance: str
    changes: Mapping[str, Entries]
    error: ValueError | None = None


#: One row of a table: its number (for messages) and its cells.
Row = tuple[int, Sequence[Any]]


def lines_of_file(path: Path, form: LinearForm) -> Iterator[Line]:
    """Read a table, one member at a time.

    Raises
    ------
    FileNotFoundError
    ModelFileError
        For another kind of file, and for a header or a shape that does not fit the form.
    """
    kind = path.name.lower().removesuffix(".gz").rpartition(".")[2]
    if kind == "csv":
        rows = _csv_rows(path)
        return _lines_of_rows(path, form, next(rows, (1, ()))[1], rows)
    if kind == "parquet":
        header, rows = _parquet_rows(path)
        return _lines_of_rows(path, form, header, rows)
    if kind in ("npz", "npy"):
        try:
            # Costs alone may be larger than memory: they stay on disk until they are asked for.
            loaded = np.load(path, mmap_mode="r" if kind == "npy" else None, allow_pickle=False)
        except (ValueError, EOFError, OSError) as error:
            if isinstance(error, FileNotFoundError):
                raise
            raise ModelFileError(path, None, f"it holds no plain arrays ({error})") from error
        arrays = {"cost": loaded} if kind == "npy" else {name: loaded[name] for name in loaded}
        with _blaming(path):
            return lines_of_arrays(arrays, form)
    raise ModelFileError(path, None, "a table of changes is a .csv, .parquet, .npz or .npy file")


def lines_of_arrays(arrays: Mapping[str, ArrayLike], form: LinearForm) -> Iterator[Line]:
    """Members from arrays that have a row for each.

    Parameters
    ----------
    arrays : mapping of str to array_like, shape (k, m) or (k, n)
        By what is changed; 'instance', shape (k,), names the members, else they are numbered.
    form : LinearForm

    Raises
    ------
    ValueError
        For an unknown array, one whose shape does not fit, and members of one name.

    Examples
    --------
    >>> form = LinearForm.from_arrays([[1, 1]], row_lower=1, row_upper=1, col_lower=0,
    ...                               col_upper=1, cost=0)
    >>> [line.instance for line in lines_of_arrays({"row_upper": [[1], [2]]}, form)]
    ['1', '2']
    """
    unknown = [name for name in arrays if name not in (*KINDS, "instance")]
    if unknown:
        known = "', '".join(KINDS)
        raise ValueError(f"there is an array {unknown[0]!r}; known are '{known}'")
    given = {name: np.asanyarray(values) for name, values in arrays.items()}
    counts = {name: values.shape[0] if values.ndim else 0 for name, values in given.items()}
    if len(set(counts.values())) > 1:
        told = ", ".join(f"{name} {count}" for name, count in counts.items())
        raise ValueError(f"each array needs a row for each member, but there are {told}")
    for name, values in given.items():
        wide = form.shape[0] if name.startswith("row") else form.shape[1]
        if name != "instance" and values.shape[1:] != (wide,):
            raise ValueError(f"{name!r} has shape {values.shape}; it needs {wide} numbers a member")
        if name != "instance" and values.dtype.kind not in "fiub":
            raise ValueError(f"{name!r} holds {values.dtype} in place of numbers")
    names = given.pop("instance", np.arange(1, max(counts.values(), default=0) + 1))
    different, times = np.unique(names, return_counts=True)
    if different.size < len(names):
        raise ValueError(f"'instance' names {str(different[np.argmax(times)])!r} more than once")
    return _lines_of_checked(names, given)


def _lines_of_checked(names: NDArray[Any], given: dict[str, NDArray[Any]]) -> Iterator[Line]:
    for k in range(len(names)):
        yield Line(
            str(names[k]),
            {name: Entries(None, np.array(v[k], np.float64)) for name, v in given.items()},
        )


def _csv_rows(path: Path) -> Iterator[Row]:
    """Rows that are not empty, with the number of their (last) line."""
    opened = gzip.open if path.suffix.lower() == ".gz" else open
    with opened(path, "rt", newline="", encoding="utf-8-sig") as text:
        reader = csv.reader(text)
        try:
            for cells in reader:
                if cells:
                    yield reader.line_num, [cell.strip() for cell in cells]
        except (csv.Error, UnicodeDecodeError, gzip.BadGzipFile, EOFError) as error:
            where = reader.line_num + 1
            reason = "it is not in UTF-8" if isinstance(error, UnicodeDecodeError) else error
            raise ModelFileError(path, where, f"it cannot be read as CSV ({reason})") from error


def _parquet_rows(path: Path) -> tuple[list[str], Iterator[Row]]:
    """Column names, and rows with their number."""
    try:
        import pyarrow as pa
        import pyarrow.parquet as pq
    except ImportError as error:
        told = "reading Parquet needs pyarrow: pip install 'pyomo_latpath[tables]'"
        raise ModelFileError(path, None, told) from error
    try:
        table = pq.ParquetFile(path)
    except pa.ArrowInvalid as error:
        raise ModelFileError(path, None, f"it is no Parquet file ({error})") from error

    def rows() -> Iterator[Row]:
        number = 0
        for batch in table.iter_batches(batch_size=BATCH_ROWS):
            for cells in zip(*(column.to_pylist() for column in batch.columns), strict=True):
                number += 1
                yield number, cells

    return list(table.schema_arrow.names), rows()


def _lines_of_rows(
    path: Path, form: LinearForm, header: Sequence[Any], rows: Iterator[Row]
) -> Iterator[Line]:
    """Tell the layout by the header, and read the rows by it."""
    if not header or header[0] != "instance":
        told = "the first line must name the columns, separated by commas, 'instance' first"
        raise ModelFileError(path, 1, told)
    if list(header) == ENTRIES:
        return _lines_of_entries(path, form, rows)
    place = _places(form.col_names, "column")
    unknown = [name for name in header[1:] if name not in place]
    if unknown:
        told = f"the form has no column {unknown[0]!r}; {_layouts()}"
        raise ModelFileError(path, 1, told)
    if len(set(header)) < len(header):
        twice = next(name for k, name in enumerate(header) if name in header[:k])
        raise ModelFileError(path, 1, f"column {twice!r} stands there twice")
    places = np.array([place[name] for name in header[1:]], dtype=np.int64)
    return _lines_of_costs(path, list(header[1:]), places, rows)


def _layouts() -> str:
    return f"a table has the columns {','.join(ENTRIES)}, or instance and names of columns"


def _places(names: Sequence[str], kind: str) -> dict[str, int]:
    place = {name: k for k, name in enumerate(names)}
    if len(place) < len(names):
        raise ValueError(f"two {kind}s of the form share a name, so a table cannot tell them apart")
    return place


def _lines_of_costs(
    path: Path, names: list[str], places: NDArray[np.int64], rows: Iterator[Row]
) -> Iterator[Line]:
    done: set[str] = set()
    for number, cells in rows:
        instance = str(cells[0])
        try:
            with _blaming(path, number):
                if instance in done:
                    raise ValueError(f"a line of {instance!r} stands further up, too")
                entries = _costs(cells, names, places)
            yield Line(instance, {"cost": entries})
        except ModelFileError as error:
            yield Line(instance, {}, error)
        done.add(instance)


def _costs(cells: Sequence[Any], names: list[str], places: NDArray[np.int64]) -> Entries:
    if len(cells) != len(names) + 1:
        raise ValueError(f"there are {len(cells)} cells; the header has {len(names) + 1}")
    told = [k for k, cell in enumerate(cells[1:]) if cell not in ("", None)]
    values = [_number(cells[k + 1], f"cost of {names[k]!r}", "cost") for k in told]
    return Entries(places[told], np.array(values, np.float64))


def _lines_of_entries(path: Path, form: LinearForm, rows: Iterator[Row]) -> Iterator[Line]:
    places = {"col": _places(form.col_names, "column"), "row": _places(form.row_names, "row")}
    done: set[str] = set()
    for instance, group in groupby(rows, key=lambda row: str(row[1][0])):
        lines = list(group)
        try:
            if instance in done:
                told = f"lines of {instance!r} stand further up, too; keep them together"
                raise ModelFileError(path, lines[0][0], told)
            yield Line(instance, _changes(path, lines, places))
        except ModelFileError as error:
            yield Line(instance, {}, error)
        done.add(instance)


def _changes(path: Path, lines: list[Row], places: dict[str, dict[str, int]]) -> dict[str, Entries]:
    """The changes of one member, or the error of its first line that makes no sense."""
    told: dict[str, dict[int, float]] = {}
    for number, cells in lines:
        with _blaming(path, number):
            what, place, value = _entry(cells, places)
            if place in told.setdefault(what, {}):
                raise ValueError(f"the {what} of {cells[2]!r} is told twice")
            told[what][place] = value
    return {what: _entries_of(vector) for what, vector in told.items()}


@contextmanager
def _blaming(path: Path, number: int | None = None) -> Iterator[None]:
    """Let errors name the file and the line."""
    try:
        yield
    except ValueError as error:
        raise ModelFileError(path, number, str(error)) from None


def _entries_of(vector: dict[int, float]) -> Entries:
    return Entries(np.array([*vector], np.int64), np.array([*vector.values()], np.float64))


def _entry(cells: Sequence[Any], places: dict[str, dict[str, int]]) -> tuple[str, int, float]:
    """What is changed, where, and to which number."""
    if len(cells) != len(ENTRIES):
        raise ValueError(f"there are {len(cells)} cells; it needs {', '.join(ENTRIES)}")
    _, what, name, text = cells
    if what not in KINDS:
        raise ValueError(f"{what!r} cannot change; 'what' is one of {', '.join(KINDS)}")
    kind = "row" if what.startswith("row") else "col"
    place = places[kind].get(str(name))
    if place is None:
        raise ValueError(f"the form has no {'row' if kind == 'row' else 'column'} {name!r}")
    return what, place, _number(text, f"{what} of {name!r}", what)


def _number(cell: Any, told: str, what: str) -> float:
    try:
        value = float(cell)
    except (TypeError, ValueError):
        raise ValueError(f"the {told} is {cell!r}, not a number") from None
    if math.isnan(value) or (what == "cost" and math.isinf(value)):
        raise ValueError(f"the {told} is {value}; it must be a number")
    if value == (-math.inf if what.endswith("upper") else math.inf):
        raise ValueError(f"the {told} is {value}, which no number can keep to")
    return value
