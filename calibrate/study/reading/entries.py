"""Checks one entry of a study file against its schema and reports every fault in it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Generic, Literal, TypeVar

from pydantic import ValidationError
from pydantic_core import PydanticCustomError

from calibrate.errors import did_you_mean, nearest
from calibrate.study.reading.context import Reading
from calibrate.study.reading.schema import Section, plain_value
from calibrate.study.reading.sentences import describe, sentence
from calibrate.study.reading.toml_lines import Place

M = TypeVar("M", bound=Section)


@dataclass(frozen=True, slots=True)
class Entry(Generic[M]):
    """What could be read of an entry; ``dropped`` are its keys with faulty values."""

    content: M | None
    dropped: frozenset[str] = frozenset()

    @property
    def sound(self) -> bool:
        """Whether nothing had to be left out."""
        return self.content is not None and not self.dropped


def keys_of(model: type[Section]) -> list[str]:
    """Return the keys that a section may hold, as they are typed."""
    return [field.alias or name for name, field in model.model_fields.items()]


def read_entry(
    reading: Reading, model: type[M], raw: Any, place: Place, *, more_keys: tuple[str, ...] = ()
) -> Entry[M]:
    """Check one section against its schema and report every fault in it.

    Parameters
    ----------
    raw : object
        As TOML gave it.
    place : tuple
        Where it stands; () for the whole file.
    more_keys : tuple of str
        Keys that are legal here but read elsewhere; they must not be in ``raw``.

    Returns
    -------
    Entry
        Keys with faulty values are left out and named in ``dropped``;
        ``content`` is None if what remains is not enough.
    """
    if not isinstance(raw, dict):
        reading.problem(f"must be a section with keys; got {describe(raw)}.", place)
        return Entry(None)
    try:
        return Entry(model.model_validate(raw))
    except ValidationError as error:
        faults = error.errors(include_url=False)
    known = [*keys_of(model), *more_keys]
    unknown = [str(f["loc"][0]) for f in faults if f["type"] == "extra_forbidden"]
    meant = {nearest(name, known) for name in unknown}
    for fault in faults:
        loc: Place = fault["loc"]
        if fault["type"] == "extra_forbidden":
            section = f"in [{reading.dotted(place)}]" if place else "at the top of the file"
            reading.raw_problem(
                f"unknown key '{loc[-1]}' {section}.", (*place, *loc), did_you_mean(str(loc[-1]), known)
            )
        elif fault["type"] == "missing":
            if loc[0] not in meant:
                inside = (*place, *loc[:-1])
                reading.raw_problem(f"the key '{loc[-1]}' is missing in [{reading.dotted(inside)}].", inside)
        else:
            reading.problem(*_told(fault, (*place, *loc)))
    dropped = frozenset(str(f["loc"][0]) for f in faults if f["type"] != "missing")
    try:
        content = model.model_validate({k: v for k, v in raw.items() if k not in dropped})
    except ValidationError:
        return Entry(None, dropped)
    return Entry(content, dropped)


def _told(fault: Any, place: Place) -> tuple[str, Place, str | None]:
    message, suggestion = sentence(fault["type"], fault["input"], fault.get("ctx", {}))
    return message, place, suggestion


def read_table(reading: Reading, raw: Any, place: Place) -> dict[str, Any]:
    """Return a section whose keys are names of the user; {} with a problem if it is none."""
    if raw is None:
        return {}
    if isinstance(raw, dict):
        return raw
    reading.problem(f"must be a section of named entries; got {describe(raw)}.", place)
    return {}


def read_plain(reading: Reading, kind: Literal["value", "text"], raw: Any, place: Place) -> Any:
    """Return one value or text that stands for itself, or None with a problem."""
    fault = "string_type"
    if kind == "text" and isinstance(raw, str):
        return raw
    if kind == "value":
        try:
            return plain_value(raw)
        except PydanticCustomError as error:
            fault = error.type
    message, suggestion = sentence(fault, raw, {})
    reading.problem(message, place, suggestion)
    return None
