"""Where the small number of component tests enters the factors of a study: once on each path."""

from __future__ import annotations

from typing import TYPE_CHECKING

from calibrate.resistance import Ledger, LedgerEntry, ledger

if TYPE_CHECKING:
    from calibrate.study.component_tests import ResistanceResult
    from calibrate.study.model import Study


def uncertainty_ledger(study: Study, found: ResistanceResult) -> Ledger:
    """Return how each route and each variable of the study allows for the number of tests.

    Raises
    ------
    InputError
        A path allows for it twice.

    Notes
    -----
    Every route goes from the same tests to a factor of its own, and a variable to the factors of the study, so that
    each has a path of its own.
    """
    name, annex = found.records.name, found.annex
    subject = f"resistance.{name}"

    def to(end: str) -> str:
        return f"{subject} to {end}"

    entries = [
        LedgerEntry(
            subject,
            "none" if annex.many else "k_n",
            to("γ_M of EN 1990 D.8"),
            annex.error.size,
            "EN 1990 D.8",
        ),
        LedgerEntry(subject, "k_n", to("γ_M from the sample of ratios"), found.direct.n, "EN 1990 D.7"),
    ]
    if found.clusters is not None:
        entries.append(
            LedgerEntry(
                subject, "k_n", to("γ_M with scatter between clusters"), found.direct.n, "EN 1990 D.7"
            )
        )
    if (american := found.north_american) is not None:
        path = to(f"φ of {american.format.name}")
        entries.append(LedgerEntry(subject, "C_P", path, american.n, "AISI S100"))
        if american.floor_governs:
            entries.append(LedgerEntry(subject, "floor on V", path, american.n, "AISI S100"))
    if found.mean_value is not None:
        entries.append(LedgerEntry(subject, "none", to("φ from bias statistics"), annex.error.size))
    entries += [
        LedgerEntry(
            f"variables.{variable.name}",
            "predictive variable" if variable.predictive else "none",
            to(f"variables.{variable.name} and the factors of the study"),
            found.records.tests.n_failed,
        )
        for variable in study.variables.values()
        if variable.resistance == name
    ]
    return ledger(entries)
