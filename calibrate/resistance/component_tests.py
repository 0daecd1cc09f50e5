"""Component tests: what was measured beside what the resistance model predicts for the same specimen."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibrate.errors import InputError, Problem, did_you_mean

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]
Labels = NDArray[np.object_]

LEAST_TESTS = 4
"""Tests below which a model is not evaluated: the printed factors for an unknown scatter start there (EN 1990, D2)."""

_SHOWN = 5
"""Rows that a message lists before it counts the rest."""


@dataclass(frozen=True, slots=True, eq=False)
class ComponentTests:
    """n tests of components, each with the prediction of the model that is evaluated.

    Parameters
    ----------
    experimental : array, shape (n,)
        Measured resistance of each test, above zero; of a survivor the largest effect that it withstood.
    predicted : array, shape (n,)
        Resistance by the model from the *measured* properties of the same specimen, above zero, in the same unit.
    survived : array of bool, shape (n,), optional
        The test was stopped without failure, so that ``experimental`` is a lower bound. Default: none was.
    inputs : mapping of str to array, shape (n,)
        Measured inputs of the prediction, finite, by name.
    subgroup, cluster : array of labels, shape (n,), optional
        Subset to which a test belongs, and the study, site or laboratory from which it comes; no label may be blank.
    rows : array of int, shape (n,), optional
        Row of each test in its table, for messages. Default: 1 to n.

    Raises
    ------
    InputError
        With every problem and the rows that have it: fewer than 4 tests, unequal lengths, values that are not finite
        or not above zero, blank labels.
    """

    experimental: Array
    predicted: Array
    survived: Flags = field(default_factory=lambda: np.zeros(0, dtype=bool))
    inputs: Mapping[str, Array] = field(default_factory=dict)
    subgroup: Labels | None = None
    cluster: Labels | None = None
    rows: NDArray[np.int64] = field(default_factory=lambda: np.zeros(0, dtype=np.int64))

    def __post_init__(self) -> None:
        problems: list[Problem] = []
        size = int(np.size(self.experimental))
        rows = self.rows if np.size(self.rows) else np.arange(1, size + 1)
        survived = self.survived if np.size(self.survived) else np.zeros(size, dtype=bool)
        check = _Check(size, np.asarray(rows, dtype=np.int64), problems)
        own: dict[str, Any] = {
            "experimental": check.numbers("The measured resistance", self.experimental, positive=True),
            "predicted": check.numbers("The predicted resistance", self.predicted, positive=True),
            "survived": check.flags("The mark of a survivor", survived),
            "rows": check.column("The row numbers", rows, np.int64),
            "inputs": MappingProxyType(
                {name: check.numbers(f"The input '{name}'", x) for name, x in self.inputs.items()}
            ),
            "subgroup": check.labels("subgroup", self.subgroup),
            "cluster": check.labels("cluster", self.cluster),
        }
        if size < LEAST_TESTS:
            problems.append(
                Problem(
                    f"There {'is 1 test' if size == 1 else f'are {size} tests'}; a resistance model needs at least "
                    f"{LEAST_TESTS}."
                )
            )
        if problems:
            raise InputError(problems)
        for name, value in own.items():
            object.__setattr__(self, name, value)

    @property
    def n(self) -> int:
        """Number of tests."""
        return int(self.experimental.size)

    @property
    def n_failed(self) -> int:
        """Number of tests that ended with failure."""
        return int(np.count_nonzero(~self.survived))

    @property
    def ratio(self) -> Array:
        """Measured over predicted resistance, shape (n,); of a survivor a lower bound."""
        return self.experimental / self.predicted

    @property
    def subgroups(self) -> tuple[Any, ...]:
        """Labels of the subgroups in the order of their first test; none without a column of them."""
        return () if self.subgroup is None else tuple(dict.fromkeys(self.subgroup.tolist()))

    def in_subgroup(self, label: Any) -> Flags:
        """Return which tests belong to a subgroup, shape (n,).

        Raises
        ------
        InputError
            No test does.
        """
        if self.subgroup is None:
            raise InputError(f"The tests have no column of subgroups, so there is no subgroup '{label}'.")
        chosen = np.array([x == label for x in self.subgroup.tolist()], dtype=bool)
        if not chosen.any():
            known = [str(x) for x in self.subgroups]
            raise InputError(
                Problem(f"The subgroup '{label}' has no tests.", suggestion=did_you_mean(str(label), known))
            )
        return chosen

    def taken(self, chosen: Any) -> ComponentTests:
        """Return some of the tests, by mask or index; at least 4 must remain."""

        def part(x: Any) -> Any:
            return None if x is None else x[chosen]

        return ComponentTests(
            self.experimental[chosen],
            self.predicted[chosen],
            self.survived[chosen],
            {name: x[chosen] for name, x in self.inputs.items()},
            part(self.subgroup),
            part(self.cluster),
            self.rows[chosen],
        )


@dataclass(frozen=True, slots=True, eq=False)
class _Check:
    """Turns columns into arrays that cannot be written to, and collects what is wrong with them."""

    size: int
    rows: NDArray[np.int64]
    problems: list[Problem]

    def numbers(self, what: str, given: Any, positive: bool = False) -> Array:
        x: Array = self.column(what, given, np.float64)
        if x.size != self.size:
            return x
        self._each(what, x, ~np.isfinite(x), "must be a finite number")
        if positive:
            self._each(what, x, np.isfinite(x) & (x <= 0.0), "must be above zero")
        return x

    def flags(self, what: str, given: Any) -> Flags:
        # Converted as truth values, every text and every number but zero would mark a survivor in silence.
        x = np.asarray(given)
        wrong = ~np.isin(x, [False, True]) if x.dtype.kind in "biuf" else np.ones(x.shape, dtype=bool)
        if x.shape == (self.size,) and wrong.any():
            shown = x[wrong].tolist()[0]
            message = f"{what} in {self._named(wrong)} is {shown!r}; it must be true or false."
            self.problems.append(Problem(message))
        marks: Flags = self.column(what, given, np.bool_)
        return marks

    def column(self, what: str, given: Any, kind: type) -> Any:
        try:
            x: Any = np.array(given, dtype=kind)
        except (TypeError, ValueError):
            self.problems.append(Problem(f"{what}: not all entries are numbers."))
            return np.zeros(0, dtype=kind)
        if x.shape != (self.size,):
            self.problems.append(
                Problem(
                    f"{what} has {x.size} {'entry' if x.size == 1 else 'entries'}; each of the {self.size} measured "
                    "resistances needs one."
                )
            )
        x.flags.writeable = False
        return x

    def labels(self, what: str, given: Any) -> Labels | None:
        if given is None:
            return None
        x: Labels = self.column(f"The column of labels '{what}'", given, object)
        if x.shape == (self.size,):
            blank = np.array([_blank(label) for label in x.tolist()], dtype=bool)
            if blank.any():
                message = f"The {what} is blank in {self._named(blank)}; every test needs one."
                self.problems.append(
                    Problem(message, suggestion="Give the label, or leave the column out for all tests.")
                )
        return x

    def _each(self, what: str, x: Array, wrong: Flags, rule: str) -> None:
        if not wrong.any():
            return
        first = float(x[wrong][0])
        count = int(np.count_nonzero(wrong))
        value = f"is {first:g}" if count == 1 else f"is not in order (the first is {first:g})"
        self.problems.append(Problem(f"{what} in {self._named(wrong)} {value}; it {rule}."))

    def _named(self, wrong: Flags) -> str:
        rows = [str(row) for row in self.rows[wrong][:_SHOWN].tolist()]
        rest = int(np.count_nonzero(wrong)) - len(rows)
        if rest:
            return f"rows {', '.join(rows)} and {rest} more"
        return f"row {rows[0]}" if len(rows) == 1 else f"rows {', '.join(rows[:-1])} and {rows[-1]}"


def _blank(label: Any) -> bool:
    if label is None or (isinstance(label, float) and math.isnan(label)):
        return True
    return isinstance(label, str) and not label.strip()
