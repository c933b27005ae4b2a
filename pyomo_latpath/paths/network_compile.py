"""The kernels of the network simplex, to be called with arrays: compiled, or as plain Python.

Compiling takes some seconds, once: machine code is kept on disk where the package can write
(its own `__pycache__`, else the user's cache folder, or the folder named by the environment
variable NUMBA_CACHE_DIR). Importing this module compiles nothing and does not even import numba.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import cache, wraps
from pathlib import Path
from typing import Any, NamedTuple

import numpy as np

from . import network_forest, network_kernel

Kernel = Callable[..., Any]

#: Called by other kernels only.
_INNER = (
    network_kernel.price,
    network_kernel.blocking,
    network_kernel.push,
    network_kernel.resize,
    network_kernel.shift_run,
    network_kernel.rehang,
    network_kernel.pivot,
    network_forest.drop_joined,
)


class Kernels(NamedTuple):
    """What the engine calls; see `network_kernel` and `network_forest` for each."""

    walk: Kernel
    settle: Kernel
    grow: Kernel
    hang: Kernel
    string: Kernel
    set_potentials: Kernel
    label: Kernel
    cheapest_paths: Kernel
    join: Kernel


_OUTER = Kernels(
    network_kernel.walk,
    network_kernel.settle,
    network_forest.grow,
    network_forest.hang,
    network_forest.string,
    network_forest.set_potentials,
    network_forest.label,
    network_forest.cheapest_paths,
    network_forest.join,
)


@cache
def compiled() -> Kernels:
    """Kernels that compile, or come from the cache on disk, at their first call."""
    from numba import njit
    from numba.extending import register_jitable

    how: dict[str, Any] = {"nogil": True, "error_model": "numpy"}
    for kernel in _INNER:
        register_jitable(**how)(kernel)

    def compile_lazily(kernel: Kernel) -> Kernel:
        try:
            return njit(cache=True, **how)(kernel)
        except RuntimeError:
            # No folder for a cache can be written: compile anew in each process.
            return njit(**how)(kernel)

    return Kernels(*map(compile_lazily, _OUTER))


def compiled_before() -> bool:
    """Whether machine code lies ready in this process or on disk, so that compiling is cheap.

    A look at file names only: code of an older version of the package may deceive it.
    """
    walk: Any = compiled().walk
    if walk.overloads:
        return True
    place = walk.stats.cache_path
    return place is not None and any(Path(place).glob("network_kernel.walk-*.nbi"))


@cache
def plain() -> Kernels:
    """The same kernels without compiling, for small problems and as a check on the compiled."""
    return Kernels(*map(_on_lists, _OUTER))


def _on_lists(kernel: Kernel) -> Kernel:
    """Let a kernel work on lists, whose items plain Python reads far faster than an array's."""

    @wraps(kernel)
    def call(*arguments: Any) -> Any:
        lists = [_to_lists(argument) for argument in arguments]
        result = kernel(*lists)
        for array, values in zip(arguments, lists, strict=True):
            _write_back(array, values)
        return result

    return call


def _to_lists(argument: Any) -> Any:
    if isinstance(argument, np.ndarray):
        return argument.tolist()
    if isinstance(argument, tuple):
        return type(argument)(*map(_to_lists, argument))
    return argument


def _write_back(array: Any, values: Any) -> None:
    if isinstance(array, np.ndarray):
        array[:] = values
    elif isinstance(array, tuple):
        for inner, inner_values in zip(array, values, strict=True):
            _write_back(inner, inner_values)
