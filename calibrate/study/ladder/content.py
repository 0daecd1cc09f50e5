"""The ladder as plain data, for machines."""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Sequence
from typing import Any

from calibrate.study.ladder.check import LadderRow

FORMAT = "calibrate-selfcheck/1"


def ladder_content(rows: Sequence[LadderRow]) -> dict[str, Any]:
    """Return format, every check with all it says, and whether all passed; a figure that does not exist is None."""
    cases = [{name: _plain(v) for name, v in dataclasses.asdict(row).items()} for row in rows]
    return {"format": FORMAT, "cases": cases, "passed": all(row.passed for row in rows)}


def _plain(value: Any) -> Any:
    return None if isinstance(value, float) and not math.isfinite(value) else value
