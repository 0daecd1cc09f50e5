"""Screening of every sample of a study."""

from __future__ import annotations

from collections.abc import Mapping

from calibrate.records import Sample
from calibrate.records.screening import Screening, screen
from calibrate.study.model import Study


def screen_records(study: Study) -> dict[str, Screening]:
    """Screen every sample that a variable uses, by name of the records."""
    used = {name: v.role for v in study.variables.values() for name in v.pooled_shape}
    used |= {v.records: v.role for v in study.variables.values() if v.records is not None}
    return {
        name: screen_sample(
            sample, study.declared.get(name), resistance=used[name] == "resistance", seed=study.seed
        )
        for name, sample in study.records.items()
        if name in used
    }


def screen_sample(
    sample: Sample, declared: tuple[float, float] | None = None, *, resistance: bool = False, seed: int = 0
) -> Screening:
    """Screen one sample with its labels."""
    labels: Mapping[str, object] = sample.labels
    nominal = declared[0] if declared is not None and declared[0] == declared[1] else None
    return screen(
        sample.observations,
        lots=list(sample.labels["lot"]) if "lot" in labels else None,
        order=sample.order,
        modes=[m or None for m in sample.labels["mode"]] if "mode" in labels else None,
        declared_range=declared if nominal is None else None,
        nominal=nominal,
        resistance=resistance,
        unit=sample.unit.text,
        names=_names(sample),
        seed=seed,
    )


def _names(sample: Sample) -> list[str]:
    """Return what messages call the specimens: their own names, else their rows."""
    if "specimen" in sample.labels:
        return [str(n) or f"row {r}" for n, r in zip(sample.labels["specimen"], sample.rows, strict=True)]
    return [f"row {r}" for r in sample.rows]
