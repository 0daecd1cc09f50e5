"""The report: a result becomes figures, one HTML page and the files of a folder.

Content is made at full precision; ``numbers.py`` is the only place that rounds.
"""

from __future__ import annotations

import importlib
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from calibrate.report.folder import replaceable, result_files, write_files, write_result

__all__ = ["replaceable", "result_files", "write_files", "write_result"]


def __getattr__(name: str) -> Any:
    if name not in __all__:
        raise AttributeError(f"module 'calibrate.report' has no attribute '{name}'")
    return getattr(importlib.import_module("calibrate.report.folder"), name)
