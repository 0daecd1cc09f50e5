"""What the parts of the reader share while one study is read."""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path

from calibrate.errors import Doubt, InputError, ProblemList
from calibrate.study.reading.document import Document
from calibrate.study.reading.toml_lines import Place


@dataclass(slots=True)
class Reading:
    """The file, where files may lie, and the problems and doubts found so far."""

    document: Document
    project: Path
    allow_outside: bool
    problems: ProblemList
    doubts: list[Doubt] = field(default_factory=list)

    @staticmethod
    def dotted(place: Place) -> str:
        """Return a place as a reader would write it: ``situations.axes.chi.values[2]`` (from 1)."""
        text = ""
        for part in place:
            text += f"[{part + 1}]" if isinstance(part, int) else f".{part}"
        return text.removeprefix(".")

    def line(self, place: Place) -> int | None:
        """Return the line of a place in the study file."""
        return self.document.lines.line(place)

    def problem(self, message: str, place: Place, suggestion: str | None = None) -> None:
        """Record a problem whose message continues the name of the place."""
        self.raw_problem(f"{self.dotted(place)} {message}", place, suggestion)

    def raw_problem(self, message: str, place: Place, suggestion: str | None = None) -> None:
        """Record a problem whose message speaks for itself."""
        hint = None if suggestion is None else printable(suggestion)
        self.problems.add(printable(message), self.line(place), hint)

    def collect(self, error: InputError, place: Place) -> None:
        """Record the problems of a lower layer; those without a line of their own belong to ``place``."""
        for p in error.problems:
            if p.file is not None and p.line is not None:
                self.problems.extend(InputError(p))
                continue
            inside = "" if p.file is None else f" {p.file}:"
            self.raw_problem(f"{self.dotted(place)}:{inside} {p.message}", place, p.suggestion)

    def doubt(self, code: str, message: str, where: str) -> None:
        """Record a reservation that does not stop anything."""
        self.doubts.append(Doubt(code, message, where))


def printable(text: str) -> str:
    """Return a text for a terminal: what a file holds must not move the cursor or change colours."""
    return "".join(c if c.isprintable() or c == "\n" else ascii(c)[1:-1] for c in text)
