"""Instances that a Python file builds.

The file defines a Pyomo `model`, or a function `create_model` whose keyword arguments are the data;
a JSON file that holds one object gives them. It is run once in each worker, as often as it changes.
"""

from __future__ import annotations

import hashlib
import importlib.util
import inspect
import json
import sys
import traceback
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path
from types import ModuleType
from typing import Any

from ..forms.file_text import ModelFileError
from ..forms.from_pyomo import compile_model
from ..forms.linear_form import LinearForm


@dataclass(frozen=True)
class ScriptInstance:
    """A model that a Python file builds, from a JSON file where it asks for data."""

    script: str
    data: str | None = None

    @property
    def name(self) -> str:
        return self.script if self.data is None else f"{self.script}:{self.data}"

    def fingerprint(self) -> str:
        digest = hashlib.sha256(Path(self.script).read_bytes())
        if self.data is not None:
            digest.update(Path(self.data).read_bytes())
        return digest.hexdigest()

    def load(self) -> LinearForm:
        """Build the model and compile it.

        Raises
        ------
        ModelFileError
            Names the file, and the line of the script where it failed.
        """
        script = Path(self.script)
        module = _module(script, script.stat().st_mtime_ns)
        model = getattr(module, "model", None)
        build = getattr(module, "create_model", None)
        if callable(build) and (model is None or self.data is not None):
            model = self._built(build)
        elif self.data is not None:
            raise ModelFileError(script, None, "it has no function create_model to give data to")
        elif model is None:
            what = "it defines neither a `model` nor a function `create_model`"
            raise ModelFileError(script, None, what)
        try:
            return compile_model(model)
        except ValueError as error:
            raise ModelFileError(self.name, None, str(error)) from error
        except AttributeError as error:
            kind = type(model).__name__
            told = f"what it gives is of type {kind}, and no Pyomo model"
            raise ModelFileError(script, None, told) from error

    def _built(self, build: Any) -> Any:
        arguments = {} if self.data is None else _arguments(Path(self.data))
        try:
            inspect.signature(build).bind(**arguments)
        except TypeError as error:
            told = f"create_model does not take these data ({error})"
            raise ModelFileError(self.name, None, told) from error
        return _run(Path(self.script), build, **arguments)


def _arguments(path: Path) -> dict[str, Any]:
    try:
        data = json.loads(path.read_bytes())
    except json.JSONDecodeError as error:
        raise ModelFileError(path, error.lineno, f"no JSON ({error.msg})") from error
    except UnicodeDecodeError as error:
        raise ModelFileError(path, None, "no JSON, since it is no text in UTF-8") from error
    if not isinstance(data, dict):
        raise ModelFileError(path, None, "it must hold one JSON object, the arguments by name")
    return data


@lru_cache(maxsize=16)
def _module(path: Path, changed: int) -> ModuleType:
    """Run a script, as if it were imported; files beside it can be imported by it."""
    del changed
    place = path.resolve()
    spec = importlib.util.spec_from_file_location(f"latpath_script_{abs(hash(place))}", place)
    if spec is None or spec.loader is None:
        raise ModelFileError(path, None, "it is no Python file")
    module = importlib.util.module_from_spec(spec)
    sys.modules[spec.name] = module
    sys.path.insert(0, str(place.parent))
    try:
        _run(path, spec.loader.exec_module, module)
    finally:
        sys.path.remove(str(place.parent))
    return module


def _run(path: Path, function: Any, *arguments: Any, **keywords: Any) -> Any:
    """Run somebody's code; whatever it raises becomes a sentence with file and line."""
    try:
        return function(*arguments, **keywords)
    except (KeyboardInterrupt, MemoryError):
        raise
    except BaseException as error:
        frames = traceback.extract_tb(error.__traceback__)
        place = str(path.resolve())
        line = next((f.lineno for f in reversed(frames) if f.filename == place), None)
        line = error.lineno if isinstance(error, SyntaxError) else line
        told = f"{type(error).__name__}: {error}".strip(": ")
        raise ModelFileError(path, line, f"it fails with {told}") from error
