"""Sixty nights at once, each with caves, towns and orders of its own.

Every night gets a record, which a journal keeps. Run this again, or kill it and run it again: what
is finished is not solved twice.

    python examples/nightly_batch.py [FOLDER]
"""

import sys
from collections.abc import Iterator
from pathlib import Path

import pyomo.environ as pyo
from wheels_to_towns import build

import pyomo_latpath as latpath
from pyomo_latpath.batch.output import summary_text
from pyomo_latpath.batch.summary import summarise

NIGHTS = 60


def nights() -> Iterator[tuple[str, pyo.ConcreteModel]]:
    """Build the models one by one, as the batch asks for them."""
    for night in range(1, NIGHTS + 1):
        yield f"night {night}", build(caves=10, towns=40, seed=night)


def main() -> None:
    """Solve all nights, and tell what became of them."""
    folder = Path(sys.argv[1] if len(sys.argv) > 1 else "nights")
    folder.mkdir(exist_ok=True)
    records = list(
        latpath.solve_many(nights(), journal=folder / "journal.jsonl", plans=folder / "plans")
    )
    print(summary_text(summarise(records)))
    print(f"road costs of all nights: {sum(record.objective or 0 for record in records):,.2f}")


if __name__ == "__main__":
    main()
