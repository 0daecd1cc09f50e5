"""The one way in which input is refused, and the one way in which doubt is recorded."""

from __future__ import annotations

import difflib
from collections.abc import Iterable
from dataclasses import dataclass
from typing import NoReturn


@dataclass(frozen=True, slots=True)
class Problem:
    """One thing that is wrong with the input, told to a person.

    Parameters
    ----------
    message : str
        What is wrong, with the offending value, and what is allowed.
    file : str, optional
        The file in which it stands, as the user named it.
    line : int, optional
        Line in that file, from 1.
    suggestion : str, optional
        What to try, a full sentence.
    """

    message: str
    file: str | None = None
    line: int | None = None
    suggestion: str | None = None

    def __str__(self) -> str:
        place = "" if self.file is None else self.file
        if self.line is not None:
            place = f"{place}:{self.line}" if place else f"line {self.line}"
        text = f"{place}: {self.message}" if place else self.message
        return f"{text} {self.suggestion}" if self.suggestion else text


class InputError(ValueError):
    """The input is wrong; every problem that was found is in ``problems``.

    The command line prints the problems and ends with exit code 2.
    """

    def __init__(self, problems: Problem | str | Iterable[Problem]) -> None:
        if isinstance(problems, str):
            problems = Problem(problems)
        if isinstance(problems, Problem):
            problems = (problems,)
        self.problems: tuple[Problem, ...] = tuple(problems)
        super().__init__("\n".join(str(p) for p in self.problems))


class ProblemList:
    """Collects problems of one file so that all of them are told at once."""

    def __init__(self, file: str | None = None) -> None:
        self.file = file
        self._problems: list[Problem] = []

    def __bool__(self) -> bool:
        return bool(self._problems)

    def __len__(self) -> int:
        return len(self._problems)

    def add(self, message: str, line: int | None = None, suggestion: str | None = None) -> None:
        """Record one problem of this file."""
        problem = Problem(message, self.file, line, suggestion)
        if problem not in self._problems:
            self._problems.append(problem)

    def extend(self, error: InputError, line: int | None = None) -> None:
        """Record the problems of an error from a lower layer; ``line`` serves those without a place."""
        for p in error.problems:
            if p.file is None and p.line is None:
                self.add(p.message, line, p.suggestion)
            elif p not in self._problems:
                self._problems.append(p)

    def stop(self) -> NoReturn:
        """Raise what was recorded, sorted by line."""
        raise InputError(sorted(self._problems, key=lambda p: (p.file != self.file, p.line or 0)))

    def stop_if_any(self) -> None:
        """Raise if anything was recorded."""
        if self._problems:
            self.stop()


def nearest(name: str, known: Iterable[str]) -> str | None:
    """Return the known name that looks most like ``name``, or None."""
    names = list(known)
    close = difflib.get_close_matches(name, names, n=1, cutoff=0.6)
    if close:
        return close[0]
    folded = {k.casefold(): k for k in names}
    return folded.get(name.casefold())


def did_you_mean(name: str, known: Iterable[str]) -> str:
    """Return a sentence that names the nearest known name, or lists what is known."""
    names = list(known)
    close = nearest(name, names)
    if close is not None:
        return f"Did you mean '{close}'?"
    return "Known: " + ", ".join(names) + "." if names else "None is known here."


@dataclass(frozen=True, slots=True)
class Doubt:
    """A reservation recorded next to a number; it never stops the run.

    Parameters
    ----------
    code : str
        Short stable name, lower case with hyphens, for example ``few-values``.
    message : str
        Full sentences for the reader.
    where : str
        What it concerns, for example ``variables.f_u`` or ``rules.bar_rupture``.
    """

    code: str
    message: str
    where: str
