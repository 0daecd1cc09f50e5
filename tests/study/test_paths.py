"""Where the project begins, what lies inside it, where results go."""

import os
from pathlib import Path

import pytest

from calibrate.errors import InputError
from calibrate.study import read_study
from calibrate.study.paths import default_output, output_name, project_folder, resolve_inside


@pytest.fixture
def tree(tmp_path):
    root = tmp_path.resolve() / "root"
    inner = root / "a" / "b"
    inner.mkdir(parents=True)
    (inner / "study.toml").write_text("")
    return root


def test_nearest_mark_wins(tree):
    study = tree / "a" / "b" / "study.toml"
    assert project_folder(study) == study.parent
    (tree / "pyproject.toml").write_text("")
    assert project_folder(study) == tree
    (tree / "a" / "studies").mkdir()
    assert project_folder(study) == tree / "a"
    (tree / "a" / "b" / ".git").mkdir()
    assert project_folder(study) == tree / "a" / "b"


def test_a_file_called_studies_is_no_mark(tree):
    (tree / "pyproject.toml").write_text("")
    (tree / "a" / "studies").write_text("")
    assert project_folder(tree / "a" / "b" / "study.toml") == tree


def test_git_may_be_a_file(tree):
    (tree / ".git").write_text("gitdir: elsewhere")
    assert project_folder(tree / "a" / "b" / "study.toml") == tree


def resolved(tree, text, *, allow_outside=False):
    return resolve_inside(text, tree / "a" / "b" / "study.toml", tree, allow_outside=allow_outside)


def test_inside(tree):
    (tree / "data.csv").write_text("x\n")
    assert resolved(tree, "../../data.csv") == tree / "data.csv"
    assert resolved(tree, "study.toml") == tree / "a" / "b" / "study.toml"
    assert resolved(tree, str(tree / "data.csv")) == tree / "data.csv"


def test_outside(tree):
    outside = tree.parent / "data.csv"
    outside.write_text("x\n")
    with pytest.raises(InputError, match="outside the project folder") as caught:
        resolved(tree, "../../../data.csv")
    assert f"leads to '{outside}'" in str(caught.value)
    assert f"the project is '{tree}'" in str(caught.value)
    assert resolved(tree, "../../../data.csv", allow_outside=True) == outside


def test_symlinks_are_followed_before_anything_is_decided(tree):
    outside = tree.parent / "data.csv"
    outside.write_text("x\n")
    (tree / "link.csv").symlink_to(outside)
    with pytest.raises(InputError, match="outside the project folder"):
        resolved(tree, "../../link.csv")
    (tree / "folder").symlink_to(tree.parent)
    with pytest.raises(InputError, match="outside the project folder"):
        resolved(tree, "../../folder/data.csv")
    (tree.parent / "back.csv").symlink_to(tree / "inside.csv")
    (tree / "inside.csv").write_text("x\n")
    assert resolved(tree, "../../../back.csv") == tree / "inside.csv"


def test_a_folder_whose_name_begins_like_the_project_is_outside(tree):
    sibling = tree.parent / "root-2"
    sibling.mkdir()
    (sibling / "data.csv").write_text("x\n")
    with pytest.raises(InputError, match="outside the project folder"):
        resolved(tree, "../../../root-2/data.csv")


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("", "the name of the file is empty"),
        ("  ", "the name of the file is empty"),
        ("..", "is a folder"),
        ("none.csv", "does not exist"),
        ("no/where/none.csv", "The folder '.*where' does not exist"),
        ("study.tom", "Did you mean 'study.toml'"),
        ("a\0b.csv", "cannot be read: embedded null byte"),
        ("x" * 5000, "cannot be read"),
        ("loop.csv", "cannot be read|does not exist"),
        ("pipe.csv", "not an ordinary file"),
    ],
)
def test_what_is_no_file(tree, text, message):
    (tree / "a" / "b" / "loop.csv").symlink_to(tree / "a" / "b" / "loop.csv")
    os.mkfifo(tree / "a" / "b" / "pipe.csv")
    with pytest.raises(InputError, match=message):
        resolved(tree, text)


@pytest.mark.parametrize(
    ("file", "name"),
    [("studies/wind/study.toml", "wind"), ("studies/wind/annual.toml", "annual"),
     ("wind.v2.toml", "wind.v2"), ("/study.toml", "study")],
)  # fmt: skip
def test_name_of_the_results(file, name):
    assert output_name(Path(file)) == name


# ----------------------------------------------------------------- through a study


def test_default_output(project):
    assert default_output(project.read()) == project.folder.resolve() / "reports" / "connectors"


def test_a_study_may_name_files_outside_if_allowed(project, example, change):
    elsewhere = project.folder.parent / "elsewhere.csv"
    elsewhere.write_text("f_u\n500\n510\n520\n")
    text = change(example, ("../../datasets/connectors/bar-strength.csv", "../../../elsewhere.csv"))
    path = project.write(text)
    with pytest.raises(InputError, match="allow it with --allow-outside"):
        read_study(path)
    study = read_study(path, allow_outside=True)
    assert study.records["bar_strength"].n == 3


def test_a_link_to_a_study_is_the_study(project, tmp_path):
    link = tmp_path / "link.toml"
    project.read()
    link.symlink_to(project.study_file)
    study = read_study(link)
    assert study.file == "studies/connectors/study.toml"
    assert study.shown == str(link)


@pytest.mark.parametrize(
    ("make", "message"),
    [
        (lambda p: p / "none.toml", "none.toml: no such file. TOML files in that folder: study.toml."),
        (lambda p: p / "no" / "none.toml", "does not exist either"),
        (lambda p: p, "this is a folder; a study is one TOML file. Did you mean '.*study.toml'?"),
        (lambda p: p / "pipe", "this is not an ordinary file"),
        (lambda p: Path("a\0b"), "cannot be read: embedded null byte"),
    ],
)
def test_what_is_no_study_file(project, make, message):
    project.read()
    os.mkfifo(project.study_file.parent / "pipe")
    with pytest.raises(InputError, match=message) as caught:
        read_study(make(project.study_file.parent))
    assert caught.value.problems[0].line is None


def test_not_utf8(project, example):
    project.study_file.write_bytes(example.replace("balcony", "balc\xf6ny").encode("latin-1"))
    with pytest.raises(InputError, match=r"study.toml:4: the file is not UTF-8 text \(byte 0xf6\)"):
        read_study(project.study_file)


def test_too_large(project, example):
    project.study_file.write_text(example + "#" * 2_000_000)
    with pytest.raises(InputError, match="larger than 2 MB"):
        read_study(project.study_file)


@pytest.mark.parametrize(
    ("old", "new", "line", "pieces"),
    [
        ("beta = 3.8", "beta 3.8", 10, ["not valid TOML", "a key must be followed by '='", "column 6"]),
        ("beta = 3.8", "beta = 3,8", 10, ["not valid TOML", "something follows a complete value"]),
        ("beta = 3.8", "beta = .8", 10, ["not valid TOML", "this is not a value", "0.5, not .5 or 0,5"]),
        ("beta = 3.8", "beta =", 10, ["not valid TOML", "this is not a value"]),
        ('P = "100 kN"', "P = 100 kN", 19, ["something follows a complete value"]),
        ('P = "100 kN"', 'P = "100 kN', 19, ["a text is not closed on its line"]),
        ('P = "100 kN"', 'P = "C:\\data"', 19, ["backslash"]),
        ("[target]", "[target", 9, ["a section header is not closed"]),
        ("count = 8 }", "count = 8", 44, ["inline table is not closed"]),
        ("[objective]", "x = [1, 2", None, ["an array is not closed"]),
        ("[objective]", 'x = """', 67, ["a text is not closed"]),
        ("beta = 3.8", "beta = 3.8\nbeta = 4", 11, ["'target.beta' is set twice: in lines 10 and 11"]),
        ("[target]", "[study]", 9, ["'study' is set twice: in lines 3 and 9"]),
        ("chi = { from = 0.1,", "chi = { from = 0.1, from = 0.2,", 44, ["set twice"]),
        ("[study]", "study = 1\n[study]", 4, ["set twice"]),
        ("beta = 3.8", "γ = 3.8", 10, ["a key or a section header", "letters A to Z"]),
        ("beta = 3.8", f"beta = 1{'0' * 5000}", None, ["a whole number in this file is too long"]),
        ("beta = 3.8", "beta = " + "[" * 5000, None, ["nested too deeply"]),
        ("beta = 3.8", "beta = 3.8 \x00", 10, ["not valid TOML"]),
    ],
)  # fmt: skip
def test_not_toml(project, old, new, line, pieces):
    problems = project.problems((old, new))
    assert len(problems) == 1
    told = str(problems[0])
    assert problems[0].file == str(project.study_file)
    if line is not None:
        assert problems[0].line == line, told
    for piece in pieces:
        assert piece in told
