"""Where a result comes from: versions, digests, command, time."""

from __future__ import annotations

import hashlib
import importlib.metadata
import platform
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

PACKAGES = ("numpy", "scipy", "pandas", "matplotlib", "pint")


@dataclass(frozen=True, slots=True)
class Provenance:
    """The part of a result that may differ between two equal runs.

    Parameters
    ----------
    versions : mapping
        Version of this tool, of Python and of the libraries that compute.
    started : str
        Start of the run, ISO 8601 in UTC.
    seconds : float
        Duration of the run.
    command : str
        The command as typed, or ``python`` when run from Python.
    """

    versions: Mapping[str, str]
    started: str
    seconds: float
    command: str


def versions() -> dict[str, str]:
    """Return the versions of this tool, Python and the computing libraries."""
    found = {"calibrate": importlib.metadata.version("calibrate"), "python": platform.python_version()}
    for name in PACKAGES:
        found[name] = importlib.metadata.version(name)
    return found


def sha256_of(path: Path) -> str:
    """Return the SHA-256 digest of a file, in hexadecimal."""
    with path.open("rb") as stream:
        return hashlib.file_digest(stream, "sha256").hexdigest()
