"""Growth of time with size: one line of figures for each curve, and one plot of all of them."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from typing import NamedTuple

import numpy as np
from timing import medians


class Curve(NamedTuple):
    """Seconds by number of nonzeros."""

    name: str
    nonzeros: list[int]
    seconds: list[float]

    @property
    def exponent(self) -> float:
        """Slope of the curve where both axes are logarithmic: 1 is growth in proportion."""
        return float(np.polyfit(np.log(self.nonzeros), np.log(self.seconds), 1)[0])


def measure(name: str, work: Iterable[tuple[int, Callable[[], object]]], repeats: int = 3) -> Curve:
    """Time one piece of work per size, given with its nonzeros, and print the line."""
    curve = Curve(name, [], [])
    for nonzeros, way in work:
        curve.nonzeros.append(nonzeros)
        curve.seconds.append(medians({"": way}, repeats)[""])
    pairs = zip(curve.nonzeros, curve.seconds, strict=True)
    told = ", ".join(f"{n:,}: {s:.3g} s" for n, s in pairs)
    print(f"{name:24} {told}; growth exponent {curve.exponent:.2f}", flush=True)
    return curve


def plot(curves: list[Curve], path: str) -> None:
    """Draw all curves, with a line of exponent 1 beside them."""
    from matplotlib import pyplot

    figure, axes = pyplot.subplots()
    for curve in curves:
        label = f"{curve.name}, exponent {curve.exponent:.2f}"
        axes.loglog(curve.nonzeros, curve.seconds, marker="o", label=label)
    ends = [f(size for curve in curves for size in curve.nonzeros) for f in (min, max)]
    axes.loglog(ends, [size * 5e-6 for size in ends], "k:", label="5 µs a nonzero")
    axes.set(xlabel="nonzeros", ylabel="seconds")
    axes.legend(fontsize="small")
    figure.savefig(path, dpi=150)
