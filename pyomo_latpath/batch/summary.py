"""The summary of a batch, in one pass over its records."""

from __future__ import annotations

import heapq
from collections import Counter
from collections.abc import Iterable, Mapping

from .record import BatchRecord, Comparison, Slow, Summary, Unsolved

#: Slowest instances told, and unsolved ones told by name (as many with an error as without).
MOST_SLOW, MOST_UNSOLVED = 10, 1000


def summarise(
    records: Iterable[BatchRecord],
    *,
    waiting: int | None = 0,
    wall_seconds: float = 0.0,
    kept: int = 0,
) -> Summary:
    """Summarise records.

    Parameters
    ----------
    records : iterable of BatchRecord
        Read once, and not kept.
    waiting : int or None
        Instances without a record.
    wall_seconds : float
        Of this run.
    kept : int
        Records that earlier runs had left.

    Examples
    --------
    >>> records = [BatchRecord("mon.mps", "0f", "optimal", route="path", seconds={"solve": 0.5}),
    ...            BatchRecord("tue.mps", "", "error", error="tue.mps, line 3: no number")]
    >>> summary = summarise(records)
    >>> summary.statuses, summary.unsolved[0].reason, summary.slowest[0].instance
    ({'optimal': 1, 'error': 1}, 'tue.mps, line 3: no number', 'mon.mps')
    """
    counts: dict[str, Counter[str]] = {
        what: Counter() for what in ("status", "verdict", "structure", "route")
    }
    stages: Counter[str] = Counter()
    failed: list[Unsolved] = []
    others: list[Unsolved] = []
    slowest: list[tuple[float, int, Slow]] = []
    total = errors = unsolved = 0
    measured = _Measured()
    for record in records:
        total += 1
        for what, counter in counts.items():
            counter[getattr(record, what) or "-"] += 1
        stages.update(record.seconds)
        errors += record.error is not None
        if not record.solved:
            unsolved += 1
            told = failed if record.error is not None else others
            if len(told) < MOST_UNSOLVED:
                told.append(Unsolved(record.instance, record.status, record.reason))
        slow = Slow(record.instance, record.total_seconds, record.route)
        heapq.heappush(slowest, (slow.seconds, -total, slow))
        if len(slowest) > MOST_SLOW:
            heapq.heappop(slowest)
        measured.add(record)
    return Summary(
        records=total,
        waiting=waiting,
        statuses=_frequent_first(counts["status"]),
        verdicts=_frequent_first(counts["verdict"]),
        structures=_frequent_first(counts["structure"]),
        routes=_frequent_first(counts["route"]),
        errors=errors,
        unsolved=(*failed, *others),
        unsolved_count=unsolved,
        slowest=tuple(slow for _, _, slow in sorted(slowest, reverse=True)),
        stages=dict(stages),
        wall_seconds=wall_seconds,
        kept=kept,
        comparison=measured.comparison(),
    )


class _Measured:
    """Sums over the instances on which branch and bound was measured."""

    def __init__(self) -> None:
        self.count = self.unfinished = 0
        self.ours = self.highs = 0.0

    def add(self, record: BatchRecord) -> None:
        if record.highs_seconds is None:
            return
        self.count += 1
        self.unfinished += record.highs_status == "time_limit"
        self.ours += record.total_seconds - record.seconds.get("compile", 0.0)
        self.highs += record.highs_seconds

    def comparison(self) -> Comparison | None:
        if not self.count:
            return None
        return Comparison(self.count, self.ours, self.highs, self.unfinished)


def _frequent_first(counter: Counter[str]) -> Mapping[str, int]:
    return dict(counter.most_common())
