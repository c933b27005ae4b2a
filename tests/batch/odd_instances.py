"""Instances that misbehave in every way a batch must live with, and a few that do not."""

from __future__ import annotations

import os
import signal
import time
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from pyomo_latpath.forms.linear_form import LinearForm

# Wheels of cheese from a dairy (node 1) to a market (node 4); the cheapest plan costs 14.
FLOW = """p min 4 5
n 1 4
n 4 -4
a 1 2 0 4 2
a 1 3 0 2 2
a 2 3 0 2 1
a 2 4 0 3 3
a 3 4 0 5 1
"""
FLOW_OPTIMUM = 14
CROWDED = FLOW.replace("n 1 4", "n 1 7").replace("n 4 -4", "n 4 -7")
BROKEN = FLOW.replace("a 1 3 0 2 2", "a 1 9 0 2 2")
ENDLESS = "Maximize\n value: a\nSubject To\n r: a - b <= 1\nGeneral\n a b\nEnd\n"


def turning(crew: int = 3, seed: int = 0) -> LinearForm:
    """Who turns the wheels in which cave: a small assignment, its costs drawn."""
    rng = np.random.default_rng(seed)
    who, where = np.divmod(np.arange(crew * crew), crew)
    matrix = np.vstack([who == k for k in range(crew)] + [where == k for k in range(crew)])
    return LinearForm.from_arrays(
        matrix.astype(float),
        row_lower=1,
        row_upper=1,
        col_lower=0,
        col_upper=1,
        cost=rng.integers(1, 30, crew * crew),
    )


@dataclass(frozen=True)
class Quick:
    """Behaves; notes in a file that it was loaded."""

    name: str
    log: str | None = None

    def fingerprint(self) -> str:
        return self.name

    def load(self) -> LinearForm:
        if self.log is not None:
            with open(self.log, "a") as file:
                file.write(self.name + "\n")
        return turning(seed=sum(self.name.encode()))


@dataclass(frozen=True)
class Deadly(Quick):
    """Kills its process; only the first time, where `scar` names a file to remember it by."""

    scar: str | None = None

    def load(self) -> LinearForm:
        if self.scar is None or not Path(self.scar).exists():
            if self.scar is not None:
                Path(self.scar).touch()
            os.kill(os.getpid(), signal.SIGKILL)
        return super().load()


class Hungry(Quick):
    """Eats up the memory."""

    def load(self) -> LinearForm:
        raise MemoryError


class Stuck(Quick):
    """Never comes back."""

    def load(self) -> LinearForm:
        while True:
            time.sleep(1)


class Faulty(Quick):
    """Meets a defect."""

    def load(self) -> LinearForm:
        raise RuntimeError("a wheel came off")


class Chatty(Quick):
    """Prints, as models of users do."""

    def load(self) -> LinearForm:
        print("building a model")
        return super().load()


class Unsendable(Quick):
    """Cannot be pickled."""

    def __reduce__(self) -> str:
        raise TypeError("cannot pickle a cellar")
