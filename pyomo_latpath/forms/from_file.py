"""The way in for model files: the ending of the name says who reads it."""

from __future__ import annotations

import os
from collections.abc import Callable
from pathlib import Path

from .dimacs import read_assignment, read_flow
from .file_text import ModelFileError
from .linear_form import LinearForm
from .lp_file import read_lp
from .mps import read_mps

__all__ = ["READERS", "ModelFileError", "read"]

#: Who reads what; each ending may be followed by .gz.
READERS: dict[str, Callable[[Path], LinearForm]] = {
    ".mps": read_mps,
    ".lp": read_lp,
    ".min": read_flow,
    ".asn": read_assignment,
}


def read(path: str | os.PathLike[str]) -> LinearForm:
    """Read a model file.

    Parameters
    ----------
    path : path-like
        .mps (fixed or free), .lp (the CPLEX format), .min (DIMACS minimum-cost flow) or .asn
        (DIMACS assignment), each also with .gz behind it.

    Returns
    -------
    LinearForm
        With the names of the file; semicontinuous columns are marked in `semicontinuous`.

    Raises
    ------
    FileNotFoundError, PermissionError, IsADirectoryError
        From the operating system, as they are.
    ModelFileError
        For an ending not in the list, for a model that is not linear, and for whatever in the
        file cannot be read, with the line where there is one to name. It is a `ValueError`.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     file = Path(folder) / "cellar.lp"
    ...     _ = file.write_text("min\\n 3 early + 2 late\\nst\\n night: early + late >= 1\\nend")
    ...     form = read(file)
    >>> list(form.col_names), list(form.row_names), form.cost.tolist()
    (['early', 'late'], ['night'], [3.0, 2.0])
    """
    path = Path(path)
    endings = [suffix.lower() for suffix in path.suffixes[-2:]]
    if endings and endings[-1] == ".gz":
        endings.pop()
    reader = READERS.get(endings[-1]) if endings else None
    if reader is None:
        raise ModelFileError(
            path, None, f"unknown kind of file; known are {', '.join(READERS)}, each also .gz"
        )
    try:
        return reader(path)
    except ModelFileError:
        raise
    except ValueError as error:  # the form's own check of its numbers, which knows no file
        raise ModelFileError(path, None, str(error)) from error
