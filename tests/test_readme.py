"""What the README shows is what the tool does: excerpts, the summary, the Python example, its links."""

import re
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[1]
README = (ROOT / "README.md").read_text(encoding="utf-8")
STUDY = ROOT / "studies" / "facade_bracket" / "study.toml"


def blocks(language):
    return re.findall(rf"```{language}\n(.*?)```", README, flags=re.DOTALL)


def squeezed(text):
    return [" ".join(line.split()) for line in text.splitlines() if line.strip()]


@pytest.mark.parametrize("excerpt", blocks("toml"))
def test_excerpts_stand_in_the_study(excerpt):
    missing = set(squeezed(excerpt)) - set(squeezed(STUDY.read_text(encoding="utf-8")))
    assert missing == set()


def test_summary_is_what_the_run_prints(tmp_path):
    shown = re.search(r"<!-- summary of the demonstration -->\n```\n(.*?)```", README, flags=re.DOTALL).group(
        1
    )
    command = [
        sys.executable,
        "-m",
        "calibrate",
        "run",
        str(STUDY),
        "--out",
        str(tmp_path / "report"),
    ]
    run = subprocess.run(command, capture_output=True, text=True, check=True, cwd=ROOT)
    assert set(squeezed(shown)) - set(squeezed(run.stdout)) == set()
    for name in (
        "report.html",
        "result.json",
        "situations.csv",
        "required_factors.csv",
        "factors.csv",
        "units.json",
    ):
        assert (tmp_path / "report" / name).stat().st_size > 0
        assert f"`{name}`" in README


def test_python_example_runs(monkeypatch):
    monkeypatch.chdir(ROOT)
    (code,) = blocks("python")
    exec(compile(code, "README.md", "exec"), {})


def test_links_lead_somewhere():
    links = re.findall(r"\]\(([^)#]+)", README)
    assert links
    assert [link for link in links if not (ROOT / link).exists()] == []
