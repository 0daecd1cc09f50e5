"""The folder of ``calibrate index``: index.json, tables as CSV, figures."""

from __future__ import annotations

import json
from pathlib import Path
from typing import TYPE_CHECKING

from calibrate.report.index_figures import index_figures
from calibrate.study.index_export import FORMAT, INDEX_FILE, curve_csv, index_json, trace_csv

if TYPE_CHECKING:
    from calibrate.study.one_situation import OneSituation


def index_files(found: OneSituation) -> dict[str, bytes]:
    """Return every file by its path within the folder."""
    files = {INDEX_FILE: f"{index_json(found)}\n".encode()}
    if found.analysis is not None:
        files["trace.csv"] = trace_csv(found)
    if found.curve is not None:
        files["curve.csv"] = curve_csv(found, found.curve)
    for name, figure in index_figures(found).items():
        files[f"figures/{name}.svg"] = figure.svg
        files[f"figures/{name}.png"] = figure.png
    return files


def holds_index(directory: Path) -> bool:
    """Whether a folder holds what ``calibrate index`` wrote."""
    try:
        content = json.loads((directory / INDEX_FILE).read_text(encoding="utf-8"))
    except (OSError, ValueError):
        return False
    return isinstance(content, dict) and content.get("format") == FORMAT
