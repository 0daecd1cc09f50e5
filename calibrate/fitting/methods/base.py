"""What an estimator declares: the samples it honours, the families it knows, the options it takes."""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Mapping
from typing import ClassVar

from calibrate.errors import InputError
from calibrate.fitting.likelihood import Estimate
from calibrate.fitting.model import Model
from calibrate.records.observations import Observations

RIGHT, LEFT, INTERVAL, TRUNCATED = "right-censored", "left-censored", "interval", "truncated"


class Method(ABC):
    """An estimator; stateless.

    Attributes
    ----------
    name : str
        In study files and on the command line.
    title : str
        In sentences of the report.
    source : str
        Where the method comes from.
    honours : frozenset of str
        Kinds of incomplete samples that it treats as what they are.
    families : tuple of str
        Families that it can estimate; empty for all.
    options : mapping of str to str
        Options that it takes, each with what it means; ``required`` names those without default.
    """

    name: ClassVar[str]
    title: ClassVar[str]
    source: ClassVar[str]
    honours: ClassVar[frozenset[str]] = frozenset()
    families: ClassVar[tuple[str, ...]] = ()
    options: ClassVar[Mapping[str, str]] = {}
    required: ClassVar[tuple[str, ...]] = ()

    @abstractmethod
    def estimate(
        self,
        seen: Observations,
        model: Model,
        fixed: Mapping[str, float],
        free: tuple[str, ...],
        options: Mapping[str, float],
    ) -> Estimate:
        """Estimate the free parameters from observations that the method honours."""

    def check(self, seen: Observations, family: str, options: Mapping[str, float]) -> None:
        """Refuse what the method does not honour.

        Raises
        ------
        InputError
            The kind of sample, the family or an option.
        """
        if self.families and family not in self.families:
            raise InputError(
                f"The method '{self.name}' cannot estimate the family '{family}'; it knows {listed(self.families)}."
            )
        there = kinds_of(seen)
        refused = [kind for kind in there if kind not in self.honours]
        if refused:
            honoured = (
                f"it honours {listed(sorted(self.honours))}" if self.honours else "it needs a complete sample"
            )
            raise InputError(
                f"The sample holds {listed(refused)} observations, which the method '{self.name}' would misread; "
                f"{honoured}. Use 'likelihood'."
            )
        self.check_options(options)

    def check_options(self, options: Mapping[str, float]) -> None:
        """Refuse options that the method does not take, and the lack of those that it needs.

        Raises
        ------
        InputError
            All of one kind at once.
        """
        unknown = [name for name in options if name not in self.options]
        if unknown:
            takes = f"it takes {listed(sorted(self.options))}" if self.options else "it takes none"
            raise InputError(f"The method '{self.name}' has no option {listed(unknown)}; {takes}.")
        missing = [name for name in self.required if name not in options]
        if missing:
            meant = "; ".join(f"{name}: {self.options[name]}" for name in missing)
            raise InputError(f"The method '{self.name}' needs {listed(missing)} ({meant}).")


def kinds_of(seen: Observations) -> tuple[str, ...]:
    """Return the kinds of incompleteness that a sample shows."""
    kinds = []
    if seen.right.any():
        kinds.append(RIGHT)
    if seen.left.any():
        kinds.append(LEFT)
    if seen.interval.any():
        kinds.append(INTERVAL)
    if seen.truncated:
        kinds.append(TRUNCATED)
    return tuple(kinds)


def listed(names: object) -> str:
    """Return names as a phrase."""
    texts = [str(n) for n in names]  # type: ignore[attr-defined]
    return texts[0] if len(texts) == 1 else f"{', '.join(texts[:-1])} and {texts[-1]}"
