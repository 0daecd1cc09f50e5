"""``[sites.NAME]``: classes of sites with their weights, as a table in a file or written out in the study."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibrate.errors import InputError, Problem, did_you_mean
from calibrate.records import Table, read_table
from calibrate.study.model import SiteTable
from calibrate.study.paths import resolve_inside
from calibrate.study.reading import entries
from calibrate.study.reading.context import Reading
from calibrate.study.reading.grid import in_one_unit
from calibrate.study.reading.names import NameSpace, check_name
from calibrate.study.reading.schema import SitesEntry
from calibrate.study.reading.sentences import describe
from calibrate.study.reading.toml_lines import Place
from calibrate.study.reading.values import number_text, read_unit
from calibrate.units import ONE, Unit, split_value

_FORMS = 'Write table = "sites.csv", or columns = { class = ["coast", "inland"], q_mean = ["0.4 kPa", "0.3 kPa"] }.'


@dataclass(slots=True)
class _Columns:
    """Columns as read: numbers in SI units, texts, and where texts are not numbers."""

    n: int
    numbers: dict[str, NDArray[np.float64]] = field(default_factory=dict)
    units: dict[str, Unit] = field(default_factory=dict)
    texts: dict[str, list[str]] = field(default_factory=dict)
    slips: dict[str, Sequence[Problem]] = field(default_factory=dict)
    shown: str = ""
    file: str | None = None
    sha256: str = ""

    @property
    def names(self) -> list[str]:
        return [*self.numbers, *self.texts]


def read_sites(reading: Reading, names: NameSpace, raw: Any) -> dict[str, SiteTable | None]:
    """Read every site table; None stands for one that exists but is faulty (reported).

    The names of the columns are noted, so that an expression which uses them in a wrong place can be told.
    """
    found = {}
    for name, entry in entries.read_table(reading, raw, ("sites",)).items():
        found[name] = _site_table(reading, name, entry)
        if (table := found[name]) is not None:
            names.elsewhere.update(dict.fromkeys(table.columns, f"sites.{name}"))
    return found


def _site_table(reading: Reading, name: str, raw: Any) -> SiteTable | None:
    place: Place = ("sites", name)
    check_name(reading, name, "sites", place)
    entry = entries.read_entry(reading, SitesEntry, raw, place)
    content = entry.content
    if content is None or entry.dropped:
        return None
    if (content.table is None) == (content.columns is None):
        reading.problem("needs either 'table' or 'columns'.", place, _FORMS)
        return None
    before = len(reading.problems)
    if content.table is not None:
        columns = _from_file(reading, content, place)
    else:
        columns = _written_out(reading, content, place)
    if columns is None:
        return None
    labels = _labels(reading, content, columns, place)
    weights = _weights(reading, content, columns, place)
    if len(reading.problems) > before:
        return None
    return SiteTable(
        name=name,
        labels=labels,
        weights=weights,
        columns=columns.numbers,
        units=columns.units,
        texts={k: _not_numbers(columns.slips.get(k, ())) for k in columns.texts},
        file=columns.file,
        sha256=columns.sha256,
        description=content.description.strip(),
        line=reading.line(place),
    )


def _not_numbers(slips: Sequence[Problem]) -> str:
    return f"Not all of its cells are numbers: {slips[0]}" if slips else ""


# Columns ------------------------------


def _from_file(reading: Reading, content: SitesEntry, place: Place) -> _Columns | None:
    assert content.table is not None
    try:
        path = resolve_inside(
            content.table, reading.document.path, reading.project, allow_outside=reading.allow_outside
        )
        table = read_table(path, display=content.table, sheet=content.sheet)
    except InputError as error:
        reading.collect(error, (*place, "table"))
        return None
    found = _Columns(table.n, shown=f"the table '{content.table}'", file=table.file, sha256=table.sha256)
    units = _units(reading, content, list(table.columns), found.shown, place)
    if units is None:
        return None
    for name in table.columns:
        _add_column(reading, table, name, units, found, place)
    return found


def _add_column(
    reading: Reading, table: Table, name: str, units: Mapping[str, Unit], found: _Columns, place: Place
) -> None:
    if table.is_number(name):
        unit = units.get(name, ONE)
        found.numbers[name] = table.numbers(name) * unit.factor
        found.units[name] = unit
        return
    slips = table.not_numbers[name]
    if name in units:
        reading.collect(InputError(slips), (*place, "table"))
    found.texts[name] = [str(v) for v in table.columns[name]]
    found.slips[name] = slips if len(slips) < table.n else ()


def _written_out(reading: Reading, content: SitesEntry, place: Place) -> _Columns | None:
    here = (*place, "columns")
    columns = content.columns or {}
    lengths = {name: len(cells) for name, cells in columns.items()}
    if not columns or min(lengths.values()) == 0:
        reading.problem("holds no class of sites.", here, _FORMS)
        return None
    if len(set(lengths.values())) > 1:
        shown = ", ".join(f"{name} {n}" for name, n in lengths.items())
        reading.problem(f"has columns of different lengths: {shown}.", here)
        return None
    if content.sheet is not None:
        reading.problem("names the sheet of a file, but the columns are written out.", (*place, "sheet"))
    found = _Columns(next(iter(lengths.values())), shown="'columns'")
    units = _units(reading, content, list(columns), found.shown, place)
    if units is None:
        return None
    for name, cells in columns.items():
        where: list[Place] = [(*here, name, i) for i in range(found.n)]
        wrong = [
            i for i, c in enumerate(cells) if isinstance(c, bool) or not isinstance(c, (str, int, float))
        ]
        if wrong:
            reading.problem(f"must be a text or a number; got {describe(cells[wrong[0]])}.", where[wrong[0]])
            continue
        if name == content.label or all(_is_label(c) for c in cells):
            found.texts[name] = [c if isinstance(c, str) else number_text(c) for c in cells]
            continue
        typed = [entries.read_plain(reading, "value", c, w) for c, w in zip(cells, where, strict=True)]
        numbers = None if None in typed else in_one_unit(reading, typed, units.get(name), where, "column")
        if numbers is not None:
            values, unit = numbers
            found.numbers[name] = np.array([float(v) for v in values], dtype=np.float64) * unit.factor
            found.units[name] = unit
    return found


def _is_label(cell: Any) -> bool:
    if not isinstance(cell, str):
        return False
    try:
        return split_value(cell) is None
    except InputError:
        return False


def _units(
    reading: Reading, content: SitesEntry, columns: list[str], shown: str, place: Place
) -> dict[str, Unit] | None:
    """Return the unit of each column that has one; None with problems."""
    units: dict[str, Unit] = {}
    before = len(reading.problems)
    for name, text in content.units.items():
        here = (*place, "units", name)
        if name not in columns:
            reading.problem(
                f"names '{name}', but {shown} has no such column.", here, did_you_mean(name, columns)
            )
        elif (unit := read_unit(reading, text, here)) is not None:
            units[name] = unit
    return units if len(reading.problems) == before else None


# Classes ------------------------------


def _labels(reading: Reading, content: SitesEntry, columns: _Columns, place: Place) -> tuple[str, ...]:
    """Return the names of the classes: a column, else the numbers of the rows."""
    name, here = content.label, (*place, "label")
    if name is None:
        return tuple(str(i) for i in range(1, columns.n + 1))
    if name in columns.texts:
        labels = [" ".join(text.split()) for text in columns.texts[name]]
    elif name in columns.numbers:
        values = columns.numbers[name] / columns.units[name].factor
        labels = [number_text(float(v)) for v in values]
    else:
        _no_column(reading, name, columns, here)
        return ()
    again = next((label for i, label in enumerate(labels) if label in labels[:i]), None)
    if again is not None:
        reading.problem(
            f"names the column '{name}', in which '{again}' stands twice.",
            here,
            "Each class of sites needs a name of its own; leave 'label' out to number them.",
        )
    elif "" in labels:
        reading.problem(f"names the column '{name}', in which a name is empty.", here)
    return tuple(labels)


def _weights(reading: Reading, content: SitesEntry, columns: _Columns, place: Place) -> NDArray[np.float64]:
    """Return the weights of the classes, sum 1; equal ones where none are given."""
    equal = np.full(columns.n, 1.0 / columns.n)
    name, here = content.weight, (*place, "weight")
    if name is None:
        return equal
    if name not in columns.numbers:
        if name in columns.texts:
            hint = _not_numbers(columns.slips.get(name, ()))
            reading.problem(f"names the column '{name}', which holds text.", here, hint or None)
        else:
            _no_column(reading, name, columns, here)
        return equal
    weights = columns.numbers[name]
    wrong = np.flatnonzero(~(np.isfinite(weights) & (weights >= 0.0)))
    if wrong.size:
        row = int(wrong[0])
        value = weights[row] / columns.units[name].factor
        reading.problem(
            f"names the column '{name}', in which row {row + 1} is {value:g}; weights are zero or positive.",
            here,
        )
        return equal
    if not weights.sum() > 0.0:
        reading.problem(f"names the column '{name}', in which every weight is zero.", here)
        return equal
    return np.asarray(weights / weights.sum())


def _no_column(reading: Reading, name: str, columns: _Columns, place: Place) -> None:
    reading.problem(
        f"names the column '{name}', but {columns.shown} has no such column.",
        place,
        did_you_mean(name, columns.names),
    )
