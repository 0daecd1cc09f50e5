"""The study: a study file becomes a validated ``Study``, a ``Study`` becomes a ``Result``.

Owns the study file's structure and messages, the run of the whole chain, and
the result files.  The only room that sees every layer below; each name loads
on first use, so that reading a study does not load what only a run needs.
"""

from __future__ import annotations

import importlib
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from calibrate.study.model import Study
    from calibrate.study.reading import read_study
    from calibrate.study.result import Result
    from calibrate.study.run import run
    from calibrate.study.summary import check_summary

__all__ = ["Result", "Study", "check_summary", "read_study", "run"]

_HOMES = {
    "Result": "calibrate.study.result",
    "Study": "calibrate.study.model",
    "check_summary": "calibrate.study.summary",
    "read_study": "calibrate.study.reading",
    "run": "calibrate.study.run",
}


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module 'calibrate.study' has no attribute '{name}'")
    return getattr(importlib.import_module(_HOMES[name]), name)
