"""Reader of .lp files (the CPLEX format), which leaves the parsing to HiGHS."""

from __future__ import annotations

import re
import tempfile
from pathlib import Path
from typing import Any

import highspy
import numpy as np
import scipy.sparse as sp

from .file_text import ModelFileError, read_bytes
from .linear_form import LinearForm

_WHERE = re.compile(r"-->.*:(\d+):\d+")
#: Bytes that no text has.
_NO_TEXT = re.compile(rb"[\x00-\x08\x0e-\x1f]")
_TYPE = highspy.HighsVarType


class _Parser(highspy.Highs):  # type: ignore[misc]
    """HiGHS with its messages collected instead of printed."""

    def __init__(self) -> None:
        super().__init__()
        self.messages: list[str] = []
        self.cbLogging.subscribe(lambda event: self.messages.append(event.message))
        # Coefficients below this are dropped without a word; 1e-12 is the least it may be.
        self._set("small_matrix_value", 1e-12)

    def enableCallbacks(self) -> None:
        self._set("log_to_console", False)  # before the banner, which comes next
        super().enableCallbacks()

    def _set(self, name: str, value: Any) -> None:
        if self.setOptionValue(name, value) != highspy.HighsStatus.kOk:
            raise RuntimeError(f"HiGHS does not take {value!r} for its option {name!r}")


def read_lp(path: Path | str) -> LinearForm:
    """Read an .lp file, or .lp.gz.

    Rows that share a name are told apart by their number: the second "limit" becomes
    "limit (row 7)".

    Raises
    ------
    ModelFileError
        For a file that is no text; for one that HiGHS refuses (special ordered sets, indicators
        and quadratic rows among them), with its message and line where it has them; for a
        quadratic objective; for a file without columns.

    Examples
    --------
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     file = Path(folder) / "wheels.lp"
    ...     _ = file.write_text("max\\n [ turned ^ 2 ] / 2\\nst\\n shelf: turned <= 8\\nend")
    ...     try:
    ...         read_lp(file)
    ...     except ModelFileError as error:
    ...         print(error.sentence)
    the objective is quadratic in 'turned'; only linear models can be read
    """
    path = Path(path)
    content = read_bytes(path)
    if _NO_TEXT.search(content):
        raise ModelFileError(path, None, "this is no text file")
    parser = _Parser()
    with tempfile.TemporaryDirectory() as folder:
        # A plain name in a folder of its own: HiGHS never meets .gz, capitals or odd letters.
        plain = Path(folder) / "model.lp"
        plain.write_bytes(_as_utf8(content))
        status = parser.readModel(str(plain))
    if status == highspy.HighsStatus.kError:
        raise _refusal(path, parser.messages)
    lp = parser.getLp()
    _refuse_quadratic(path, parser, lp)
    if lp.num_col_ == 0:
        raise ModelFileError(path, None, "the file holds no columns")
    return _form(lp)


def _as_utf8(content: bytes) -> bytes:
    """The same text as UTF-8, which HiGHS's messages and names are read as."""
    try:
        content.decode()
    except UnicodeDecodeError:
        return content.decode("latin-1").encode()
    return content


def _refusal(path: Path, messages: list[str]) -> ModelFileError:
    """Turn the parser's messages into one sentence and a line number."""
    for message in messages:
        sentence = message.removeprefix("ERROR:").strip().split("\n")[0]
        if message.startswith("ERROR") and not sentence.startswith("Parser error reading"):
            place = _WHERE.search(message)
            return ModelFileError(path, int(place.group(1)) if place else None, sentence)
    sentence = "this is no .lp model that HiGHS can read; highspy from 1.16 on names the line"
    return ModelFileError(path, None, sentence)


def _refuse_quadratic(path: Path, parser: _Parser, lp: Any) -> None:
    hessian = parser.getModel().hessian_
    if hessian.dim_ and np.any(hessian.value_):
        counts = np.diff(np.asarray(hessian.start_))
        name = lp.col_names_[int(np.argmax(counts > 0))]
        raise ModelFileError(
            path, None, f"the objective is quadratic in {name!r}; only linear models can be read"
        )


def _form(lp: Any) -> LinearForm:
    matrix = lp.a_matrix_
    if matrix.format_ != highspy.MatrixFormat.kColwise:
        raise RuntimeError("HiGHS keeps a model it has read by rows; it is expected by columns")
    kinds = list(lp.integrality_) or [_TYPE.kContinuous] * lp.num_col_
    semicontinuous = [kind in (_TYPE.kSemiContinuous, _TYPE.kSemiInteger) for kind in kinds]
    return LinearForm.from_arrays(
        sp.csc_array(
            (
                np.asarray(matrix.value_, dtype=np.float64),
                np.asarray(matrix.index_, dtype=np.int64),
                np.asarray(matrix.start_, dtype=np.int64),
            ),
            shape=(lp.num_row_, lp.num_col_),
        ),
        row_lower=np.asarray(lp.row_lower_, dtype=np.float64),
        row_upper=np.asarray(lp.row_upper_, dtype=np.float64),
        col_lower=np.asarray(lp.col_lower_, dtype=np.float64),
        col_upper=np.asarray(lp.col_upper_, dtype=np.float64),
        cost=np.asarray(lp.col_cost_, dtype=np.float64),
        offset=lp.offset_,
        sense="max" if lp.sense_ == highspy.ObjSense.kMaximize else "min",
        integer=[kind in (_TYPE.kInteger, _TYPE.kSemiInteger) for kind in kinds],
        semicontinuous=semicontinuous,
        row_names=_distinct(list(lp.row_names_), lp.num_row_, "row"),
        col_names=_distinct(list(lp.col_names_), lp.num_col_, "column"),
    )


def _distinct(names: list[str], count: int, what: str) -> list[str]:
    """Name what has no name, and tell apart what shares one."""
    names = names or [""] * count
    met: set[str] = set()
    distinct = []
    for number, name in enumerate(names, start=1):
        if not name:
            name = f"{what} {number}"
        elif name in met:
            name = f"{name} ({what} {number})"
        met.add(name)
        distinct.append(name)
    return distinct
