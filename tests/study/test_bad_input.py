"""Each slip in the example is told once, at its line, with the value, what is allowed and what to try.

The slips are in slips.txt: a title; lines that begin with ``-`` are replaced by
those with ``+``; the problem must stand in the line that holds the text after
``@`` (without it: in line 1); its message must hold each text after ``=``.
"""

from dataclasses import dataclass
from pathlib import Path

import pytest


@dataclass(frozen=True)
class Slip:
    name: str
    old: str
    new: str
    at: str | None
    pieces: tuple[str, ...]


def slips():
    text = Path(__file__).with_name("slips.txt").read_text(encoding="utf-8")
    for block in text.split("\n## ")[1:]:
        name, *lines = block.split("\n")
        marked = {mark: [line[2:] for line in lines if line.startswith(f"{mark} ")] for mark in "-+@="}
        assert marked["-"], name
        assert marked["="], name
        at = marked["@"][0] if marked["@"] else None
        yield Slip(name, "\n".join(marked["-"]), "\n".join(marked["+"]), at, tuple(marked["="]))


SLIPS = list(slips())


def test_there_are_enough_and_each_has_its_own_name():
    assert len({s.name for s in SLIPS}) == len(SLIPS) > 140


@pytest.mark.parametrize("slip", SLIPS, ids=lambda slip: slip.name)
def test_one_slip_one_problem(project, example, change, slip):
    problems = project.problems((slip.old, slip.new))
    told = "\n".join(str(p) for p in problems)
    assert len(problems) == 1, told
    (problem,) = problems
    assert problem.file == str(project.study_file)
    text = change(example, (slip.old, slip.new))
    line = 1 if slip.at is None else text[: text.index(slip.at)].count("\n") + 1
    assert problem.line == line, told
    for piece in slip.pieces:
        assert piece in told
    assert "Input should" not in told
    assert all(c.isprintable() or c == "\n" for c in told)
    assert problem.message.count("\n") <= 2
