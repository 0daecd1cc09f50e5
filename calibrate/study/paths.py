"""Where a study's project begins, which files a study may name, where its results go."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from calibrate.errors import InputError, Problem, nearest

if TYPE_CHECKING:
    from calibrate.study.model import Study

_FILES_OF_A_PROJECT = (".git", "pyproject.toml")
_STUDY_FILE = "study.toml"


def first_reason(error: Exception) -> str:
    """Return what the operating system says about a failed access, without the path."""
    return getattr(error, "strerror", None) or str(error).splitlines()[0]


def project_folder(study_file: Path) -> Path:
    """Return the folder within which a study may name files.

    Parameters
    ----------
    study_file : Path
        Resolved through symlinks.

    Returns
    -------
    Path
        The nearest folder around the file that holds ``.git``,
        ``pyproject.toml`` or a folder ``studies``, else the file's own folder.
    """
    for folder in study_file.parents:
        if any((folder / name).exists() for name in _FILES_OF_A_PROJECT) or (folder / "studies").is_dir():
            return folder
    return study_file.parent


def resolve_inside(text: str, study_file: Path, project: Path, *, allow_outside: bool) -> Path:
    """Return the existing file that a study names.

    Parameters
    ----------
    text : str
        As written in the study; relative to the study file.
    study_file, project : Path
        Both resolved.
    allow_outside : bool
        Whether files outside the project folder may be read.

    Raises
    ------
    InputError
        The file lies outside the project, does not exist or is a folder; the
        problem has no place yet.
    """
    if not text.strip():
        raise InputError("the name of the file is empty.")
    try:
        path = (study_file.parent / text).resolve()
        if not allow_outside and not path.is_relative_to(project):
            raise InputError(
                Problem(
                    f"'{text}' lies outside the project folder: it leads to '{path}', the project is "
                    f"'{project}'.",
                    suggestion="Move the file into the project, or allow it with --allow-outside.",
                )
            )
        if path.is_dir():
            raise InputError(f"'{text}' is a folder; a file is needed.")
        if not path.exists():
            raise InputError(
                Problem(f"'{text}' does not exist (looked for '{path}').", suggestion=_similar(path))
            )
        if not path.is_file():
            raise InputError(f"'{text}' is not an ordinary file.")
    except (OSError, RuntimeError, ValueError) as error:
        if isinstance(error, InputError):
            raise
        raise InputError(f"'{text}' cannot be read: {first_reason(error)}.") from None
    return path


def _similar(path: Path) -> str | None:
    if not path.parent.is_dir():
        return f"The folder '{path.parent}' does not exist."
    close = nearest(path.name, sorted(p.name for p in path.parent.iterdir() if p.is_file()))
    return f"Did you mean '{close}'?" if close else None


def default_output(study: Study) -> Path:
    """Return the folder for the results of a study when none is given.

    ``reports/NAME`` in the study's project; NAME is the name of the study's
    folder if the file is called ``study.toml``, else the file's name without
    its ending.
    """
    return study.project / "reports" / output_name(study.path)


def output_name(study_file: Path) -> str:
    """Return the name of a study's results: its folder's, or the file's own."""
    if study_file.name == _STUDY_FILE:
        return study_file.parent.name or study_file.stem
    return study_file.stem
