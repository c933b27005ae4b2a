"""How far a batch is: a bar on a terminal, elsewhere a line now and then."""

from __future__ import annotations

import sys
import time
from collections import Counter

from tqdm import tqdm

from .record import BatchRecord

#: Seconds between two lines.
PAUSE = 30.0


class Progress:
    """Shows on stderr how far a batch is.

    Parameters
    ----------
    total : int or None
        Instances, where known.
    shown : bool
        Nothing but notes is shown otherwise.
    """

    def __init__(self, total: int | None, shown: bool = True) -> None:
        terminal = sys.stderr.isatty()
        self.counts: Counter[str] = Counter()
        self.total, self.lines = total, shown and not terminal
        self.begun = self.told = time.monotonic()
        self.kept = self.count = 0
        self.bar = tqdm(
            total=total, unit="", disable=not (shown and terminal), dynamic_ncols=True, leave=False
        )

    def __enter__(self) -> Progress:
        return self

    def __exit__(self, *_: object) -> None:
        self.bar.close()

    def add(self, record: BatchRecord, kept: bool) -> None:
        """Count a record."""
        self.counts[record.route if record.error is None and record.route else "error"] += 1
        self.count += 1
        self.kept += kept
        if not self.bar.disable:
            self.bar.initial = self.kept  # they took no time, and do not count for the rate
            self.bar.set_postfix_str(self._routes(), refresh=False)
            self.bar.update()
        if self.lines and time.monotonic() >= self.told + PAUSE:
            self.told = time.monotonic()
            self.say(self._line())

    def say(self, text: str) -> None:
        """Write a line to stderr, above the bar."""
        tqdm.write(f"latpath: {text}", file=sys.stderr)

    def _routes(self) -> str:
        return ", ".join(f"{route} {count}" for route, count in self.counts.most_common())

    def _line(self) -> str:
        rate = (self.count - self.kept) / max(time.monotonic() - self.begun, 1e-9)
        line = f"{self.count} done ({self._routes()}), {rate:.3g} a second"
        if self.total is None:
            return line
        left = f"{(self.total - self.count) / rate:.0f} s" if rate > 0 else "?"
        return f"{line}, {self.total - self.count} to go in about {left}"
