"""The folder of a result: it appears whole or not at all, and never replaces what is not a result."""

from __future__ import annotations

import json
import os
import shutil
import tempfile
from collections.abc import Callable, Iterable, Mapping
from pathlib import Path
from typing import TYPE_CHECKING

from calibrate.errors import InputError, Problem

if TYPE_CHECKING:
    from calibrate.study.model import Study
    from calibrate.study.result import Result

RESULT_FILE = "result.json"
RESULT_FORMAT = "calibrate-result/1"


def result_files(result: Result) -> dict[str, bytes]:
    """Return every file of a result by its path within the folder."""
    from calibrate.report.figures import figures
    from calibrate.report.html import prepare, report_html
    from calibrate.study.export import table_files

    drawn = figures(result, meanwhile=prepare)
    files = table_files(result)
    files["report.html"] = report_html(result, drawn)
    for name, figure in drawn.items():
        files[f"figures/{name}.svg"] = figure.svg
        files[f"figures/{name}.png"] = figure.png
    return files


def write_result(result: Result, directory: Path, *, force: bool = False) -> None:
    """Write a result; see :func:`write_files`."""
    files = result_files(result)
    write_files(files, directory, force=force, recognise=holds_result, inputs=input_files(result.study))


def input_files(study: Study) -> list[Path]:
    """Return the files that a study was read from, which no result may replace."""
    names = [s.file for s in study.records.values()] + ([study.table] if study.table else [])
    names += [t.file for t in study.sites.values() if t.file is not None]
    return [study.path, *(study.path.parent / name for name in names)]


def holds_result(directory: Path) -> bool:
    """Whether a folder holds a result of this tool."""
    return _format_of(directory / RESULT_FILE) == RESULT_FORMAT


def _format_of(path: Path) -> object:
    try:
        content = json.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError):
        return None
    return content.get("format") if isinstance(content, dict) else None


def replaceable(
    directory: Path, *, force: bool, recognise: Callable[[Path], bool], inputs: Iterable[Path] = ()
) -> None:
    """Refuse a directory that must not be replaced.

    Raises
    ------
    InputError
        It is a file, it holds the home or working directory or one of the ``inputs``, or it holds something
        that is not a result of this tool and ``force`` is not set.
    """
    shown = str(directory)
    if directory.is_symlink():
        raise InputError(
            Problem(f"{shown} is a symbolic link.", suggestion="Name the folder that it points to.")
        )
    if directory.exists() and not directory.is_dir():
        raise InputError(
            Problem(f"{shown} is a file.", suggestion="Name a folder for the results with --out.")
        )
    place = directory.resolve()
    kept = (Path.home(), Path.cwd(), *(path.resolve() for path in inputs))
    if directory.exists() and any(path.is_relative_to(place) for path in kept):
        raise InputError(
            Problem(
                f"{shown} holds the working directory, your home or a file that was read; results cannot replace it.",
                suggestion="Name a folder of its own with --out.",
            )
        )
    if not directory.is_dir() or force or not any(directory.iterdir()) or recognise(directory):
        return
    raise InputError(
        Problem(
            f"The folder {shown} is not empty and does not hold a result of this tool.",
            suggestion="Choose another with --out, or replace it with --force.",
        )
    )


def write_files(
    files: Mapping[str, bytes],
    directory: Path,
    *,
    force: bool = False,
    recognise: Callable[[Path], bool] = holds_result,
    inputs: Iterable[Path] = (),
) -> None:
    """Write files into a folder that appears whole or not at all.

    Parameters
    ----------
    files : mapping of str to bytes
        By path within the folder.
    directory : Path
        Replaced as a whole if ``recognise`` says that it is ours, used if empty, created if missing.
    force : bool
        Replace it whatever it holds.
    recognise : callable
        Says whether an existing folder may be replaced.
    inputs : iterable of Path
        Files that must not be replaced.

    Raises
    ------
    InputError
        The folder may not be replaced, or cannot be written.
    """
    replaceable(directory, force=force, recognise=recognise, inputs=inputs)
    parent = directory.absolute().parent
    try:
        parent.mkdir(parents=True, exist_ok=True)
        fresh = Path(tempfile.mkdtemp(prefix=f".{directory.name}-", dir=parent))
    except OSError as error:
        raise InputError(f"The folder {directory} cannot be written: {error.strerror}.") from error
    try:
        for name, content in files.items():
            path = fresh / name
            path.parent.mkdir(parents=True, exist_ok=True)
            path.write_bytes(content)
        fresh.chmod(0o777 & ~_umask())
        _exchange(fresh, directory)
    except OSError as error:
        raise InputError(f"The folder {directory} cannot be written: {error.strerror}.") from error
    finally:
        shutil.rmtree(fresh, ignore_errors=True)


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask


def _exchange(fresh: Path, directory: Path) -> None:
    """Put the fresh folder in the place of the old one; the old one comes back if that fails."""
    if not directory.exists():
        fresh.rename(directory)
        return
    old = Path(tempfile.mkdtemp(prefix=f".{directory.name}-old-", dir=directory.absolute().parent))
    kept = old / "kept"
    directory.rename(kept)
    try:
        fresh.rename(directory)
    except OSError:
        kept.rename(directory)
        raise
    finally:
        shutil.rmtree(old, ignore_errors=True)
