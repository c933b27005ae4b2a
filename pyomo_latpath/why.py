"""The one sentence that says which route a model took, and why."""

from __future__ import annotations

from collections import Counter

from .answers import PartAnswer
from .integrality.finding import BlockFinding, Verdict

#: Structures as a sentence names them.
IN_WORDS = {
    "trivial": "nothing but bounds",
    "incidence": "an incidence structure (at most two entries a column or row)",
    "interval": "an interval structure (consecutive ones)",
    "network": "a network structure",
    "conetwork": "a transposed network structure",
    "sum": "a sum of networks",
    "unimodular": "a unimodular system of equations",
}


def why(parts: list[PartAnswer], status: str) -> str:
    """Say in one sentence which way the parts went, and why.

    Parameters
    ----------
    parts : list of PartAnswer
    status : str
        Of the whole model.
    """
    if not parts:
        return "the model has no free columns"
    ended = next((part for part in parts if part.status == status), parts[0])
    if status in ("infeasible", "unbounded"):
        what = "its relaxation is" if ended.route == "path" else "branch and bound showed it"
        proof = ", proven in exact arithmetic" if ended.exact else ""
        return f"{what} {status}{proof}{_short(ended)}"
    clauses = [_clause(part) for part in telling(parts)]
    counted = Counter(clauses)
    told = [clause if k == 1 else f"{clause} ({k} blocks)" for clause, k in counted.items()]
    return "; ".join(told)


def _short(part: PartAnswer) -> str:
    """How much too much is asked, and by how many rows."""
    if part.short_by is None or part.farkas is None:
        return ""
    names, suspects = part.normal.form.row_names, part.normal.rows[part.farkas.nonzero()[0]]
    rows = ", ".join(str(names[int(i)]) for i in suspects[:3])
    rows += f" and {suspects.size - 3} more" if suspects.size > 3 else ""
    return f": {rows} ask for {part.short_by} more than can be had"


def telling(parts: list[PartAnswer]) -> list[PartAnswer]:
    """Return the parts worth telling of: what is nothing but bounds is not, beside others."""
    others = [part for part in parts if {f.structure for f in part.findings} != {"trivial"}]
    return others or parts


def _clause(part: PartAnswer) -> str:
    if not part.findings:
        return "semicontinuous columns cannot be relaxed, so branch and bound solved it"
    if not part.normal.integer.any():
        return "there are no integer columns, so it is a linear program"
    if part.route == "path":
        finding = part.findings[0]
        if finding.verdict is Verdict.PROVEN:
            return f"every vertex is whole: {_structures(part.findings)}"
        return (
            "the relaxation has a whole optimum at this objective, which is the model's, too; "
            f"about other objectives {_about(finding)}"
        )
    if part.status == "time_limit":
        return "the time ran out in branch and bound"
    fractional = part.findings[0].verdict is Verdict.REFUTED
    what = "'s optimum is fractional" if fractional else " gave no whole optimum"
    return f"the relaxation{what}, so branch and bound solved it{_spared(part)}"


def _spared(part: PartAnswer) -> str:
    """How many declarations branch and bound could do without."""
    declared = int(part.normal.integer.sum())
    if part.told == declared:
        return ""
    return f" with {part.told} of {declared} integer declarations, which imply the others"


def _structures(findings: tuple[BlockFinding, ...]) -> str:
    counted = Counter(f.structure for f in findings if f.structure != "trivial")
    if not counted:
        return IN_WORDS["trivial"]
    return " and ".join(
        IN_WORDS.get(str(structure), str(structure)) + (f" ({k} blocks)" if k > 1 else "")
        for structure, k in counted.items()
    )


def _about(finding: BlockFinding) -> str:
    if finding.verdict is Verdict.REFUTED:
        return "it is known to have fractional vertices"
    if finding.verdict is Verdict.SAMPLED:
        seen = "1 sampled vertex was" if finding.samples == 1 else f"{finding.samples} sampled were"
        return f"there is no proof: {seen} whole"
    return "nothing is known"
