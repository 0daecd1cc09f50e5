"""From a file to TOML data with the line of every key; refuses what is no study file at all."""

from __future__ import annotations

import hashlib
import re
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any, NoReturn

from calibrate.errors import InputError, Problem, ProblemList
from calibrate.study.paths import first_reason
from calibrate.study.reading.sentences import describe
from calibrate.study.reading.toml_lines import KeyLines, key_lines

FORMAT = 1
MAX_BYTES = 2_000_000
"""A study refers to its data; a larger text is some other file."""

_PLACE = re.compile(r" \(at (?:line (\d+), column (\d+)|end of document)\)$")
_REPEATED = re.compile(r"Cannot (?:overwrite|declare|redefine|mutate)|Duplicate")

# What tomllib says, and what a person can do about it; the first that fits.
_PLAINLY = (
    (
        "Expected '=' after a key",
        "a key must be followed by '='.",
        "A section header stands in square brackets, text in quotation marks.",
    ),
    (
        "Expected newline or end",
        "something follows a complete value.",
        "One key and one value per line; text stands in quotation marks.",
    ),
    (
        "Invalid value",
        "this is not a value.",
        "Text, units and expressions stand in quotation marks; numbers are written like 0.5, not .5 or 0,5.",
    ),
    (
        "Invalid initial character for a key",
        "a key is expected here.",
        "Keys hold letters, digits, '_' and '-'; others stand in quotation marks.",
    ),
    (
        "Invalid statement",
        "a key or a section header is expected here.",
        "Keys hold letters A to Z, digits, '_' and '-'.",
    ),
    ("Unclosed array", "an array is not closed.", "Look for a missing ']' or comma."),
    (
        "Unclosed inline table",
        "an inline table is not closed.",
        "Look for a missing '}' or comma; it must end on the line on which it begins.",
    ),
    ("Unterminated string", "a text is not closed.", "Look for a missing quotation mark."),
    ("Expected '\"", "a text is not closed.", "Look for a missing quotation mark."),
    ("Expected \"'", "a text is not closed.", "Look for a missing quotation mark."),
    (
        "Illegal character '\\n'",
        "a text is not closed on its line.",
        "Look for a missing quotation mark; longer texts stand between triple quotation marks.",
    ),
    (
        "Unescaped '\\'",
        "a backslash in this text has no meaning.",
        "Write paths with '/', or the text between single quotation marks.",
    ),
    ("Expected ']", "a section header is not closed.", "Look for a missing ']'."),
)


@dataclass(frozen=True, slots=True)
class Document:
    """A TOML file as read: ``data`` by ``tomllib``, ``lines`` by the scanner.

    ``path`` is resolved through symlinks; ``shown`` is what the user typed.
    """

    path: Path
    shown: str
    text: str
    sha256: str
    data: Mapping[str, Any]
    lines: KeyLines


def read_document(path: str | Path) -> Document:
    """Read a study file as TOML.

    Raises
    ------
    InputError
        No such file, a folder, not readable, too large, not UTF-8, not TOML
        (with line).
    """
    shown = str(path)
    resolved, content = _read(path, shown)
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = content.count(b"\n", 0, error.start) + 1
        found = f"byte {content[error.start]:#04x}"
        raise _refusal(f"the file is not UTF-8 text ({found}).", shown, line, "Save it as UTF-8.") from None
    text = text.replace("\r\n", "\n")
    try:
        data = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        _not_toml(str(error), text, shown)
    except RecursionError:
        raise _refusal("arrays or tables are nested too deeply.", shown) from None
    except ValueError:  # Python refuses to read whole numbers of more than 4300 digits
        raise _refusal("a whole number in this file is too long.", shown) from None
    return Document(resolved, shown, text, hashlib.sha256(content).hexdigest(), data, key_lines(text))


def _read(path: str | Path, shown: str) -> tuple[Path, bytes]:
    try:
        resolved = Path(path).resolve()
        if resolved.is_dir():
            inside = resolved / "study.toml"
            hint = f"Did you mean '{Path(path) / 'study.toml'}'?" if inside.is_file() else None
            raise _refusal("this is a folder; a study is one TOML file.", shown, None, hint)
        if not resolved.exists():
            raise _refusal("no such file.", shown, None, _similar_file(resolved))
        if not resolved.is_file():
            raise _refusal("this is not an ordinary file.", shown)
        with resolved.open("rb") as stream:
            content = stream.read(MAX_BYTES + 1)
    except (OSError, RuntimeError, ValueError) as error:
        if isinstance(error, InputError):
            raise
        raise _refusal(f"the file cannot be read: {first_reason(error)}.", shown) from None
    if len(content) > MAX_BYTES:
        raise _refusal(
            f"the file is larger than {MAX_BYTES // 1_000_000} MB; a study is a short text.", shown
        )
    return resolved, content


def _similar_file(path: Path) -> str | None:
    if not path.parent.is_dir():
        return f"The folder '{path.parent}' does not exist either."
    others = sorted(p.name for p in path.parent.glob("*.toml"))
    return f"TOML files in that folder: {', '.join(others[:8])}." if others else None


def _refusal(message: str, shown: str, line: int | None = None, suggestion: str | None = None) -> InputError:
    return InputError(Problem(message, shown, line, suggestion))


def _not_toml(said: str, text: str, shown: str) -> NoReturn:
    place = _PLACE.search(said)
    reason = said[: place.start()] if place else said
    if place and place[1]:
        line, column = int(place[1]), int(place[2])
        at = f" (column {column})"
    else:
        line, at = text.rstrip("\n").count("\n") + 1, " (end of the file)"
    if _REPEATED.match(reason):
        above = text if place is None or place[1] is None else "\n".join(text.split("\n")[:line])
        for path, (first, second) in key_lines(above).repeated.items():
            name = ".".join(map(str, path))
            message = f"'{name}' is set twice: in lines {first} and {second}."
            raise _refusal(message, shown, second, "Keep one of the two.")
        raise _refusal("a key or section is set twice, or in two ways.", shown, line, "Keep one of the two.")
    for start, message, suggestion in _PLAINLY:
        if reason.startswith(start):
            raise _refusal(f"not valid TOML: {message[:-1]}{at}.", shown, line, suggestion)
    raise _refusal(f"not valid TOML: {reason[:1].lower()}{reason[1:]}{at}.", shown, line)


def check_format(document: Document, problems: ProblemList) -> None:
    """Report a missing or wrong ``format``; that of another version ends the reading."""
    found = document.data.get("format")
    line = document.lines.line(("format",))
    if "format" not in document.data:
        inside = next((k for k, v in document.data.items() if isinstance(v, dict) and "format" in v), None)
        problems.add(
            f"the key 'format' is missing: 'format = {FORMAT}' must stand above the first section.",
            1 if inside is None else document.lines.line((inside, "format")),
            None if inside is None else f"Here it belongs to the section [{inside}].",
        )
    elif type(found) is not int or found != FORMAT:
        newer = type(found) is int and found > FORMAT
        problems.add(
            f"format must be {FORMAT}; got {describe(found)}.",
            line,
            "The file may be meant for a newer version of this tool." if newer else None,
        )
        if type(found) is int:
            problems.stop()
