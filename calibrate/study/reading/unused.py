"""What a study defines but never uses: harmless, but often a slip."""

from __future__ import annotations

from collections.abc import Mapping

from calibrate.factors import Factor
from calibrate.records import Sample
from calibrate.study.model import Variable
from calibrate.study.reading.context import Reading
from calibrate.study.reading.names import NameSpace

_SECTIONS = {
    "quantity": ("quantities", "The quantity"),
    "derived": ("situations.derived", "The derived quantity"),
    "axis": ("situations.axes", "The axis"),
    "variable": ("variables", "The basic variable"),
}


def note_unused(
    reading: Reading,
    names: NameSpace,
    factors: tuple[Factor, ...],
    variables: Mapping[str, Variable | None],
    records: Mapping[str, Sample | None],
    sites: Mapping[str, object],
) -> None:
    """Refuse free factors that nothing uses; record a doubt for everything else that is not used.

    Table columns may serve as labels and are never mentioned.
    """
    for factor in factors:
        if factor.name in names.used:
            continue
        if factor.held:
            _doubt(reading, "factor", f"factors.{factor.name}", f"The factor '{factor.name}'")
        else:
            reading.raw_problem(
                f"factors.{factor.name} is free, but no design check and no limit state uses it.",
                ("factors", factor.name),
                "Use it in a design check, or remove it.",
            )
    for name in names.names.values():
        if name.kind in _SECTIONS and name.name not in names.used:
            section, what = _SECTIONS[name.kind]
            _doubt(reading, name.kind, f"{section}.{name.name}", f"{what} '{name.name}'")
    fitted = {name for v in variables.values() if v is not None for name in (v.records, *v.pooled_shape)}
    for name_of_records in records:
        if name_of_records not in fitted:
            _doubt(reading, "records", f"records.{name_of_records}", f"The records '{name_of_records}'")
    over = {v.sites for v in variables.values() if v is not None}
    for name_of_sites in sites:
        if name_of_sites not in over:
            _doubt(reading, "sites", f"sites.{name_of_sites}", f"The site table '{name_of_sites}'")


def _doubt(reading: Reading, kind: str, where: str, what: str) -> None:
    verb = "are" if kind == "records" else "is"
    reading.doubt(f"unused-{kind}", f"{what} {verb} defined but not used.", where)
