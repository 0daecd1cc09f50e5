"""Calibrate partial factors, or resistance and load factors, from records to a target reliability.

The Python interface; everything loads on first use.

>>> import calibrate
>>> margin = calibrate.form(
...     "R - S",
...     {"R": calibrate.distribution("normal", mean=350.0, sd=35.0),
...      "S": calibrate.distribution("normal", mean=200.0, sd=40.0)},
... )
>>> round(float(margin.beta), 6)
2.822163
"""

from __future__ import annotations

import importlib
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from calibrate.distributions import distribution
    from calibrate.errors import Doubt, InputError
    from calibrate.fitting import fit
    from calibrate.reliability import public_form as form
    from calibrate.study import read_study, run

__version__ = "0.1.0"
__all__ = ["Doubt", "InputError", "distribution", "fit", "form", "read_study", "run"]

_HOMES = {
    "Doubt": ("calibrate.errors", "Doubt"),
    "InputError": ("calibrate.errors", "InputError"),
    "distribution": ("calibrate.distributions", "distribution"),
    "fit": ("calibrate.fitting", "fit"),
    "form": ("calibrate.reliability", "public_form"),
    "read_study": ("calibrate.study", "read_study"),
    "run": ("calibrate.study", "run"),
}


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module 'calibrate' has no attribute '{name}'")
    module, attribute = _HOMES[name]
    value = getattr(importlib.import_module(module), attribute)
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    return sorted({*globals(), *__all__})
