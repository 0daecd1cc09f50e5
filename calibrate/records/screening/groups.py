"""Which specimens carry which label."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from calibrate.records.observations import Array


def coded(labels: Sequence[str | None]) -> tuple[tuple[str, ...], NDArray[np.int64]]:
    """Return the different labels in order of first appearance, and the number of each specimen's, from 0.

    None and blanks are no label and get -1.
    """
    numbers: dict[str, int] = {"": -1}
    codes = [
        numbers.setdefault("" if label is None else str(label).strip(), len(numbers) - 1) for label in labels
    ]
    return tuple(numbers)[1:], np.array(codes, dtype=np.int64)


def group_medians(x: Array, codes: NDArray[np.int64], groups: int) -> tuple[Array, NDArray[np.int64]]:
    """Return median and size of each group, shapes (groups,); nan and 0 where a group is empty."""
    sizes = np.bincount(codes[codes >= 0], minlength=groups)
    ordered = x[np.lexsort((x, codes))][np.count_nonzero(codes < 0) :]
    start = np.cumsum(sizes) - sizes
    medians = np.full(groups, np.nan)
    full = sizes > 0
    low, high = (start + (sizes - 1) // 2)[full], (start + sizes // 2)[full]
    medians[full] = 0.5 * (ordered[low] + ordered[high])
    return medians, sizes.astype(np.int64)
