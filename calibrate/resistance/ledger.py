"""Where the uncertainty of an estimate from few tests enters a factor: once on each path, neither twice nor never."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Literal, get_args

from calibrate.errors import Doubt, InputError, Problem, did_you_mean

Mechanism = Literal["k_n", "predictive variable", "C_P", "floor on V", "none"]

ENOUGH = 30
"""Tests from which plain estimates pass without a doubt (common practice, no source)."""

_SPOKEN = {
    "k_n": "a factor k_n for the number of tests",
    "predictive variable": "a predictive distribution",
    "C_P": "the correction C_P for the number of tests",
    "floor on V": "a lower limit on the coefficient of variation",
}


@dataclass(frozen=True, slots=True)
class LedgerEntry:
    """One place at which a sample enters.

    Attributes
    ----------
    subject : str
        The variable or value, for example ``variables.theta`` or ``values.R_k``.
    mechanism : {"k_n", "predictive variable", "C_P", "floor on V", "none"}
        How it allows for the number of tests; "none" is a plain estimate.
    path : str
        From which sample to which factor, for example ``resistance.screws to rules.pull_out``. Whoever fills the ledger
        names it so that entries have the same path if, and only if, they carry the same tests into the same factor.
    n : int
        Tests of the sample.
    procedure : str
        The published procedure that has this mechanism, such as ``AISI S100``; otherwise empty. Mechanisms of one
        procedure are one allowance: its target was chosen with both.
    """

    subject: str
    mechanism: Mechanism
    path: str
    n: int
    procedure: str = ""

    def __post_init__(self) -> None:
        known = get_args(Mechanism)
        if self.mechanism not in known:
            raise InputError(
                Problem(
                    f"Statistical uncertainty enters by {', '.join(repr(k) for k in known)}; got "
                    f"{self.mechanism!r} for '{self.subject}'.",
                    suggestion=did_you_mean(str(self.mechanism), known),
                )
            )
        if self.n < 1:
            raise InputError(f"'{self.subject}' rests on {self.n} tests; at least 1 is needed.")


@dataclass(frozen=True, slots=True)
class Ledger:
    """The entries, checked.

    Attributes
    ----------
    entries : tuple of LedgerEntry
        In the order given.
    doubts : tuple of Doubt
        Paths on which few tests are allowed for nowhere, and procedures with two mechanisms.
    """

    entries: tuple[LedgerEntry, ...]
    doubts: tuple[Doubt, ...]

    @property
    def paths(self) -> tuple[str, ...]:
        """All paths, in order of first appearance."""
        return tuple(dict.fromkeys(e.path for e in self.entries))

    def on(self, path: str) -> tuple[LedgerEntry, ...]:
        """Return the entries of a path."""
        return tuple(e for e in self.entries if e.path == path)


def ledger(entries: Iterable[LedgerEntry]) -> Ledger:
    """Check that no path allows for its tests twice.

    Parameters
    ----------
    entries : iterable of LedgerEntry
        Plain estimates too, as "none": a path that is not in the ledger cannot be doubted.

    Raises
    ------
    InputError
        Two or more allowances on one path, all such paths at once. The same mechanism for two subjects is two
        allowances; mechanisms of one published procedure for one subject are one.
    """
    given = tuple(entries)
    problems, doubts = [], []
    for path in dict.fromkeys(e.path for e in given):
        on = [e for e in given if e.path == path]
        acting = list(dict.fromkeys(e for e in on if e.mechanism != "none"))
        if not acting:
            doubts += _never(path, on)
            continue
        procedures = {(e.procedure, e.subject) for e in acting}
        if len(acting) > 1 and (len(procedures) > 1 or not acting[0].procedure):
            problems.append(_twice(path, acting))
        elif len(acting) > 1:
            text = (
                f"On the path {path} {acting[0].procedure} allows for few tests by {_listed(acting)}. This is one "
                "procedure and counts once; its target was chosen with both."
            )
            doubts.append(Doubt("one-procedure-two-allowances", text, acting[0].subject))
    if problems:
        raise InputError(problems)
    return Ledger(given, tuple(doubts))


def _twice(path: str, acting: list[LedgerEntry]) -> Problem:
    n = min(e.n for e in acting)
    ways = " and by ".join(f"{_SPOKEN[e.mechanism]} in '{e.subject}'" for e in acting)
    times = {2: "twice", 3: "three times"}.get(len(acting), f"{len(acting)} times")
    text = f"On the path {path} the small number of tests (n = {n}) is allowed for {times}: by {ways}."
    return Problem(text, suggestion="Keep one, and take plain estimates for the rest.")


def _never(path: str, on: list[LedgerEntry]) -> list[Doubt]:
    least = min(on, key=lambda e: e.n)
    if least.n >= ENOUGH:
        return []
    text = (
        f"On the path {path} nothing allows for the number of tests, although there are only {least.n}: mean and "
        f"scatter of '{least.subject}' are taken as known. Use a factor k_n, a predictive distribution "
        "or a factor with C_P."
    )
    return [Doubt("few-tests-not-allowed-for", text, least.subject)]


def _listed(acting: list[LedgerEntry]) -> str:
    return " and ".join(_SPOKEN[e.mechanism] for e in acting)
