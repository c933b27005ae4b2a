"""Side by side: seconds of several ways to do the same work, in turns, and their ratios."""

from __future__ import annotations

import gc
import statistics
import time
from collections.abc import Callable
from dataclasses import replace

from pyomo_latpath.forms.linear_form import LinearForm, Memory


def medians(ways: dict[str, Callable[[], object]], repeats: int) -> dict[str, float]:
    """Time each way `repeats` times, taking turns, and return the median seconds of each."""
    seconds: dict[str, list[float]] = {name: [] for name in ways}
    for _ in range(repeats):
        for name, way in ways.items():
            gc.collect()
            begun = time.perf_counter()
            way()
            seconds[name].append(time.perf_counter() - begun)
    return {name: statistics.median(values) for name, values in seconds.items()}


def print_row(what: str, seconds: dict[str, float], ours: str = "latpath") -> None:
    """Print one line: our seconds, and how many times longer the others took."""
    others = "  ".join(
        f"{name} {value:.3f} s ({value / seconds[ours]:.1f}x)"
        for name, value in seconds.items()
        if name != ours
    )
    print(f"{what:34} {ours} {seconds[ours]:.3f} s  {others}", flush=True)


def anew(form: LinearForm) -> LinearForm:
    """The same form without what an earlier solve found out about it."""
    return replace(form, memory=Memory())
