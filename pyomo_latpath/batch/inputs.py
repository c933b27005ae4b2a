"""What the user gives, as instances: paths, patterns, folders, models, forms, families."""

from __future__ import annotations

import glob
import os
import time
from collections.abc import Iterable, Iterator, Sequence
from pathlib import Path
from typing import Any, cast

from ..forms.file_text import ModelFileError
from ..forms.from_file import READERS
from ..forms.from_pyomo import compile_model
from ..forms.linear_form import LinearForm
from .family import Family
from .instance import BrokenInstance, FileInstance, FormInstance, Instance
from .scripts import ScriptInstance

#: What Pyomo calls a model that has no name.
NAMELESS = ("ConcreteModel", "AbstractModel", "unknown")


#: What the names of model files end in.
MODEL_ENDINGS = tuple(ending + packed for ending in READERS for packed in ("", ".gz"))


class InputError(ValueError):
    """A path that leads to no instance; the text names it."""


def instances_of(given: Any) -> Iterable[Instance]:
    """Take whatever `solve_many` takes.

    Parameters
    ----------
    given : path-like, Family, or iterable
        Of paths, Pyomo models, `LinearForm`s, pairs of a name and a model or form, and objects
        with `name`, `fingerprint()` and `load()`. It is consumed one by one.

    Returns
    -------
    iterable of Instance
        With a length where `given` tells how many there are.

    Raises
    ------
    InputError
        For a path that leads nowhere, if only paths are given.
    TypeError
        For anything else, also while it is consumed.
    """
    if isinstance(given, str | os.PathLike):
        return from_paths([os.fspath(given)])
    if isinstance(given, Sequence) and all(isinstance(item, str | os.PathLike) for item in given):
        return from_paths([os.fspath(item) for item in given])
    if isinstance(given, Family):
        return given
    single = isinstance(given, LinearForm) or hasattr(given, "component_data_objects")
    if single or not isinstance(given, Iterable):
        kind = type(given).__name__
        raise TypeError(f"a batch is made of many instances, not of one thing of type {kind}")
    return _Each(given)


class _Each:
    """Instances made of a caller's items, one by one."""

    def __init__(self, items: Iterable[Any]) -> None:
        self.items = items

    def __iter__(self) -> Iterator[Instance]:
        for number, item in enumerate(self.items, 1):
            yield from _from_item(number, item)

    def __length_hint__(self) -> int:
        return len(self.items) if isinstance(self.items, Sequence) else 0


def _from_item(number: int, item: Any) -> Iterable[Instance]:
    name = None
    if isinstance(item, tuple) and len(item) == 2 and isinstance(item[0], str):
        name, item = item
    if isinstance(item, str | os.PathLike):
        return _from_path(os.fspath(item))
    if isinstance(item, LinearForm):
        return [FormInstance(name or f"instance {number}", item)]
    if hasattr(item, "fingerprint") and hasattr(item, "load"):
        return [cast(Instance, item)]
    if not hasattr(item, "component_data_objects"):
        kind = type(item).__name__
        raise TypeError(f"item {number} of the batch is of type {kind}, and no instance")
    own = "" if item.name in NAMELESS else item.name
    return [_from_model(name or own or f"instance {number}", item)]


def _from_path(path: str) -> Iterable[Instance]:
    try:
        return from_paths([path])
    except InputError as error:  # it must not cost the items that follow
        return [BrokenInstance(path, str(error))]


def _from_model(name: str, model: Any) -> Instance:
    """Compile a model here and now: its arrays travel faster than the model does."""
    begun = time.perf_counter()
    try:
        form = compile_model(model)
    except ValueError as error:
        return BrokenInstance(name, str(error))
    return FormInstance(name, form, time.perf_counter() - begun)


def from_paths(paths: Sequence[str], data: Sequence[str] = ()) -> list[Instance]:
    """Find the instances behind paths.

    Parameters
    ----------
    paths : sequence of str
        Model files; Python files that build a model (see `scripts`); folders, of which all model
        files are taken, those in folders below as well; patterns such as `days/*.mps`.
    data : sequence of str
        JSON files, folders of such, or patterns: each Python file builds one model of each.

    Returns
    -------
    list of Instance
        In the order given, each once; within a folder or pattern by name.

    Raises
    ------
    InputError
        For a path, folder or pattern behind which there is nothing, and for data without a
        Python file.
    """
    files = list(dict.fromkeys(file for path in paths for file in _files(path, MODEL_ENDINGS)))
    data_files = list(dict.fromkeys(file for path in data for file in _files(path, (".json",))))
    scripts = [file for file in files if file.endswith(".py")]
    if data_files and not scripts:
        raise InputError("data are for Python files that define create_model, and none is given")
    instances: list[Instance] = []
    for file in files:
        if not file.endswith(".py"):
            instances.append(FileInstance(file))
        elif data_files:
            instances += [ScriptInstance(file, each) for each in data_files]
        else:
            instances.append(ScriptInstance(file))
    return instances


def _files(path: str, endings: tuple[str, ...]) -> list[str]:
    """The files behind one path; of a folder only those with these endings."""
    if os.path.isdir(path):
        found = [
            os.path.join(place, name)
            for place, _, names in os.walk(path)
            for name in names
            if name.lower().endswith(endings)
        ]
        if not found:
            raise InputError(f"{path}: the folder holds no file that ends in {', '.join(endings)}")
        return sorted(found)
    if os.path.exists(path):
        return [path]
    found = [file for file in glob.glob(path, recursive=True) if not os.path.isdir(file)]
    if not found:
        kind = "no file matches" if glob.has_magic(path) else "no such file or directory"
        raise InputError(f"{path}: {kind}")
    return sorted(found)


def passed_over(paths: Sequence[str]) -> int:
    """Count what `from_paths` leaves out of folders: files of other kinds, and folders that are
    called like a model file.
    """
    count = 0
    for path in paths:
        for _, folders, files in os.walk(path):
            count += sum(name.lower().endswith(MODEL_ENDINGS) for name in folders)
            count += sum(not name.lower().endswith(MODEL_ENDINGS) for name in files)
    return count


def family_of(path: str, changes: str) -> Family:
    """A family from a file that holds its form and a table of changes.

    Raises
    ------
    InputError
        When the path leads to several instances, or one of the files cannot be read.
    """
    instances = from_paths([path])
    if len(instances) != 1:
        raise InputError(f"{path}: changes are made to one model, and here are {len(instances)}")
    try:
        return Family(instances[0].load(), Path(changes))
    except OSError as error:
        raise InputError(f"{error.filename}: {(error.strerror or '').lower()}") from error
    except ValueError as error:
        named = isinstance(error, ModelFileError)
        raise InputError(str(error) if named else f"{changes}: {error}") from error
