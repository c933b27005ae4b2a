"""What a batch keeps: one record for each instance, and the summary of all of them."""

from __future__ import annotations

import json
import math
from collections.abc import Mapping
from dataclasses import asdict, dataclass, field, fields
from typing import Any


@dataclass(frozen=True)
class BatchRecord:
    """What became of one instance; None stands for what is not known.

    Attributes
    ----------
    instance : str
        Its name, unique in the batch.
    fingerprint : str
        Digest of its source (file, script and data, or arrays); another one means other data.
    status : str
        As `Solution.status`; 'error' where there is no solution.
    rows, columns, integers, nonzeros : int or None
    verdict : str or None
        'proven', 'sampled' (no proof: it rests on `samples` vertices), 'refuted' or 'undecided'.
    structure : str or None
        The structures of its blocks, the largest block's first, with commas.
    samples : int
        Vertices looked at in blocks whose verdict is 'sampled'.
    route : str or None
        'path', 'highs' or 'split'.
    why : str or None
        One sentence on the route.
    proof : str or None
        'exact' or 'tolerance'.
    objective, bound : float or None
    steps, pivots : int or None
        Of the walk.
    seconds : mapping of str to float
        By stage: 'compile' (reading included), 'assess', 'solve', 'proof'.
    recognition : str or None
        'found' where the matrix was looked at, 'stored' where the store had proofs of it,
        'remembered' where the last member of its family had left them.
    plan : str or None
        Name of the file with the plan, where plans are written.
    attempts : int
        2 where a first worker died under the instance.
    time_limit : float or None
        Seconds that it was given.
    highs_seconds, highs_status : float, str, or None
        Seconds and outcome of branch and bound on the whole instance, where that was measured.
    error : str or None
        What went wrong: one sentence, or for a defect of this package its whole traceback.
        Beside a solution: its plan could not be written.
    """

    instance: str
    fingerprint: str
    status: str
    rows: int | None = None
    columns: int | None = None
    integers: int | None = None
    nonzeros: int | None = None
    verdict: str | None = None
    structure: str | None = None
    samples: int = 0
    route: str | None = None
    why: str | None = None
    proof: str | None = None
    objective: float | None = None
    bound: float | None = None
    steps: int | None = None
    pivots: int | None = None
    seconds: Mapping[str, float] = field(default_factory=dict)
    recognition: str | None = None
    plan: str | None = None
    attempts: int = 1
    time_limit: float | None = None
    highs_seconds: float | None = None
    highs_status: str | None = None
    error: str | None = None

    @property
    def solved(self) -> bool:
        """Whether all went well: an optimum, and nothing else to tell."""
        return self.status == "optimal" and self.error is None

    @property
    def total_seconds(self) -> float:
        """Seconds of all stages."""
        return math.fsum(self.seconds.values())

    @property
    def reason(self) -> str:
        """One sentence on an instance that is not solved: the error, or what the solve says."""
        lines = (self.error or self.why or "").strip().splitlines()
        return lines[-1] if lines else self.status

    def to_dict(self) -> dict[str, Any]:
        """Plain data, ready for JSON: infinities as text, no NaN."""
        return {key: _plain(value) for key, value in asdict(self).items()}

    def to_json(self) -> str:
        """One line of JSON.

        Examples
        --------
        >>> record = BatchRecord("monday.mps", "0f", "optimal", objective=0.1, bound=-math.inf)
        >>> BatchRecord.from_json(record.to_json()) == record
        True
        """
        return json.dumps(self.to_dict(), allow_nan=False, separators=(",", ":"))

    @classmethod
    def from_dict(cls, data: Any) -> BatchRecord:
        """Read what `to_dict` wrote.

        Raises
        ------
        ValueError
            If it is no record.
        """
        known = {item.name for item in fields(cls)}
        if not isinstance(data, dict) or set(data) != known:
            raise ValueError("not a record of a batch")
        numbers = {key: _number(data[key]) for key in ("objective", "bound")}
        return cls(**data | numbers)

    @classmethod
    def from_json(cls, line: str | bytes) -> BatchRecord:
        """Read one line.

        Raises
        ------
        ValueError
            If it is no record.
        """
        return cls.from_dict(json.loads(line))


@dataclass(frozen=True)
class Unsolved:
    """An instance without an optimum (or without its plan file), and the reason."""

    instance: str
    status: str
    reason: str


@dataclass(frozen=True)
class Slow:
    """One of the slowest instances."""

    instance: str
    seconds: float
    route: str | None


@dataclass(frozen=True)
class Comparison:
    """Branch and bound on the whole instance beside us, on a sample of the instances.

    Attributes
    ----------
    instances : int
        How many were measured.
    seconds, highs_seconds : float
        Sums of assessing, solving and proving, and of branch and bound, on the same arrays.
    unfinished : int
        Instances on which branch and bound ran into the time limit, so that its true time is
        longer.
    """

    instances: int
    seconds: float
    highs_seconds: float
    unfinished: int

    @property
    def ratio(self) -> float:
        """How many times longer branch and bound took; NaN where nothing was measured."""
        return self.highs_seconds / self.seconds if self.seconds > 0 else math.nan


@dataclass(frozen=True)
class Summary:
    """A batch in numbers.

    Attributes
    ----------
    records : int
        Instances with a record.
    waiting : int or None
        Instances without one yet (a limit or Ctrl-C stopped the batch); None where not known.
    statuses, verdicts, structures, routes : mapping of str to int
        Records by each of these, most frequent first; '-' where not known.
    errors : int
        Records with an error.
    unsolved : tuple of Unsolved
        Records without an optimum, those with an error first; the first ones only where there
        are very many.
    unsolved_count : int
        All of them.
    slowest : tuple of Slow
        Slowest first.
    stages : mapping of str to float
        Seconds by stage, over all records.
    wall_seconds : float
        Of this run from start to end; records of earlier runs took their time before.
    kept : int
        Records that earlier runs had left.
    comparison : Comparison or None
    """

    records: int
    waiting: int | None
    statuses: Mapping[str, int]
    verdicts: Mapping[str, int]
    structures: Mapping[str, int]
    routes: Mapping[str, int]
    errors: int
    unsolved: tuple[Unsolved, ...]
    unsolved_count: int
    slowest: tuple[Slow, ...]
    stages: Mapping[str, float]
    wall_seconds: float
    kept: int = 0
    comparison: Comparison | None = None

    @property
    def seconds(self) -> float:
        """Seconds of all stages and all records."""
        return math.fsum(self.stages.values())

    @property
    def saved_seconds(self) -> float:
        """Seconds that branch and bound would have taken longer for all, going by the sample.

        Below 0 where it would have been faster; NaN where nothing was measured.
        """
        if self.comparison is None:
            return math.nan
        return (self.comparison.ratio - 1) * (self.seconds - self.stages.get("compile", 0.0))

    def to_dict(self) -> dict[str, Any]:
        """Plain data, ready for JSON."""
        return asdict(self)

    @classmethod
    def from_dict(cls, data: dict[str, Any]) -> Summary:
        """Read what `to_dict` wrote, also after its way through JSON.

        Examples
        --------
        >>> summary = Summary(1, 0, {"optimal": 1}, {"proven": 1}, {"interval": 1}, {"path": 1},
        ...                   0, (), 0, (Slow("monday.mps", 0.5, "path"),), {"solve": 0.5}, 1.5)
        >>> Summary.from_dict(json.loads(json.dumps(summary.to_dict()))) == summary
        True
        """
        comparison = data["comparison"]
        return cls(
            **data
            | {
                "unsolved": tuple(Unsolved(**item) for item in data["unsolved"]),
                "slowest": tuple(Slow(**item) for item in data["slowest"]),
                "comparison": None if comparison is None else Comparison(**comparison),
            }
        )


def _plain(value: Any) -> Any:
    if isinstance(value, float) and not math.isfinite(value):
        return None if math.isnan(value) else str(value)
    return value


def _number(value: Any) -> float | None:
    return None if value is None else float(value)
