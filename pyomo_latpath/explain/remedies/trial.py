"""Remedies tried on the model: what each does to the relaxation alone, and what all do together."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

from ...deadline import Deadline
from ...forms.linear_form import LinearForm
from ...forms.normalise import NormalForm, normalise
from ...highs import Basis
from ..declared import Optimum, optimum_of
from .bases import normalised_basis
from .drafts import Draft, Namer, by_group, combined
from .remedy import Remedy
from .unchanged import Explained

#: Relative change of a bound that counts.
BETTER = 1e-7
#: So many groups of one kind get remedies of their own, at most.
MOST_GROUPS = 6


@dataclass(frozen=True, eq=False)
class Tried:
    """A remedy made on the model alone.

    Attributes
    ----------
    remedy : Remedy
        It tells what it does alone.
    form : LinearForm
        The model with it.
    optimum : Optimum
        Of that.
    """

    remedy: Remedy
    form: LinearForm
    optimum: Optimum


class Trial:
    """Remedies tried one after the other.

    Parameters
    ----------
    normal : NormalForm
        Of the model.
    first : Optimum
        Of the model's relaxation as declared.
    deadline : Deadline

    Attributes
    ----------
    form : LinearForm
        The model with all remedies kept so far.
    now : Optimum
        Of that.
    namer : Namer
    """

    def __init__(self, normal: NormalForm, first: Optimum, deadline: Deadline) -> None:
        self._declared, self._first, self._deadline = normal.form, first, deadline
        self._sign = 1.0 if normal.form.sense == "min" else -1.0
        self._normal = normal
        self._explained: Explained | None = None
        self.form, self.now, self.namer = normal.form, first, Namer(normal.form)

    @property
    def normal(self) -> NormalForm:
        """The model with all remedies kept so far, normalised."""
        if self._normal.form is not self.form:
            self._normal = normalise(self.form)
        return self._normal

    @property
    def near(self) -> Basis | None:
        """The optimal basis of `form`, as one of `normal` where it is one."""
        return normalised_basis(self.normal, self.now.basis)

    def kept_of(self, drafts: Sequence[Draft]) -> Iterator[Remedy]:
        """Keep what helps of drafts of one kind: group by group, or else all in one."""
        joint = self.tried(combined(drafts, self.namer)) if drafts else None
        if joint is None or not self.helps(joint):
            return
        groups, single = by_group(drafts), []
        if 1 < len(groups) <= MOST_GROUPS:
            tried = [self.tried(combined(group, self.namer)) for group in groups]
            single = [each for each in tried if each is not None and self.helps(each)]
        for each in sorted(single, key=self._gain, reverse=True) or [joint]:
            yield from self.kept(each)

    def tried(self, remedy: Remedy) -> Tried | None:
        """Work out what a remedy does alone; None where the time ran out."""
        form = remedy.apply_to(self._declared)
        after = optimum_of(form, self._deadline, self._first.basis)
        if after is None:
            return None
        told = replace(
            remedy,
            bound_before=self._first.bound,
            bound_after=after.bound,
            fractional_before=self._first.fractional,
            fractional_after=after.fractional,
        )
        return Tried(told, form, after)

    def helps(self, tried: Tried) -> bool:
        """Whether a remedy, alone or after those kept, makes the relaxation better.

        That is a better bound, or the same with fewer fractional columns.
        """
        if self._better(tried.optimum, self._first):
            return True
        if self.form is self._declared:
            return False
        form = tried.remedy.apply_to(self.form)
        reached = optimum_of(form, self._deadline, self.now.basis)
        return reached is not None and self._better(reached, self.now)

    def kept(self, tried: Tried) -> Iterator[Remedy]:
        """Keep a remedy, and work out what all that are kept do together."""
        told = self.namer.settled(tried.remedy)
        form, reached = tried.form, tried.optimum
        if self.form is not self._declared:
            form = told.apply_to(self.form)
            together = optimum_of(form, self._deadline, self.now.basis)
            if together is None:
                return
            reached = together
        self.form, self.now = form, reached
        bound, fractional = reached.bound, reached.fractional
        if self._explained is None:
            self._explained = Explained.of(self._declared)
        told = replace(
            told,
            bound_together=bound,
            fractional_together=fractional,
            explained=self._explained,
        )
        self._explained.remedies.append(told)
        yield told

    def _gain(self, tried: Tried) -> tuple[float, int]:
        return self._sign * tried.optimum.bound, -tried.optimum.fractional

    def _better(self, reached: Optimum, than: Optimum) -> bool:
        gain = self._sign * (reached.bound - than.bound) if reached.bound != than.bound else 0.0
        noise = BETTER * max(1.0, abs(than.bound))
        return gain > noise or (gain >= -noise and reached.fractional < than.fractional)
