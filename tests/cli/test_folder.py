"""Where results go: the folder appears whole or not at all, and never replaces what is not a result."""

import shutil

import pytest


@pytest.fixture
def made(finished, study, tmp_path, monkeypatch):
    """A project with a finished result in ``out``, in whose working directory the test runs."""
    shutil.copytree(finished[1], tmp_path / "out")
    monkeypatch.chdir(tmp_path)
    return tmp_path / "out"


def contents(folder):
    return {str(p.relative_to(folder)): p.read_bytes() for p in folder.rglob("*") if p.is_file()}


def hidden(folder):
    return [p.name for p in folder.iterdir() if p.name.startswith(".")]


def test_a_result_is_replaced_whole(made, study, calibrate, light):
    (made / "figures" / "old.svg").write_text("old")
    assert calibrate("run", study, "--out", "out", "--quiet").code == 0
    assert set(contents(made)) == light
    assert hidden(made.parent) == []


def test_an_empty_folder_is_used(study, calibrate, light, tmp_path):
    (tmp_path / "empty").mkdir()
    assert calibrate("run", study, "--out", tmp_path / "empty", "--quiet").code == 0
    assert "result.json" in contents(tmp_path / "empty")


def test_out_is_relative_to_the_working_directory_and_parents_are_made(
    study, calibrate, light, tmp_path, monkeypatch
):
    monkeypatch.chdir(tmp_path)
    ended = calibrate("run", study, "--out", "a/b/c")
    assert ended.code == 0
    assert "result.json" in contents(tmp_path / "a" / "b" / "c")
    assert "Report: a/b/c/report.html" in ended.out


@pytest.mark.parametrize(("file", "name"), [("study.toml", "rods"), ("second.toml", "second")])
def test_without_out_it_goes_to_the_reports_of_the_project(
    study, calibrate, light, tmp_path, monkeypatch, file, name
):
    monkeypatch.chdir(tmp_path)
    path = study.rename(study.with_name(file))
    assert calibrate("run", path, "--quiet").code == 0
    assert "result.json" in contents(study.parents[2] / "reports" / name)


OTHER = [("mine.txt", "mine"), ("result.json", '{"format": "other/1"}'), ("result.json", "[]")]


@pytest.mark.parametrize(("name", "text"), OTHER)
def test_other_content_is_refused_before_any_work_unless_forced(
    study, calibrate, light, tmp_path, monkeypatch, name, text
):
    out = tmp_path / "out"
    out.mkdir()
    (out / name).write_text(text)
    before = contents(out)
    with monkeypatch.context() as patch:
        patch.setattr("calibrate.study.run", lambda *a, **k: pytest.fail("the work was begun"))
        ended = calibrate("run", study, "--out", out)
    assert (ended.code, ended.out) == (2, "")
    assert f"The folder {out} is not empty and does not hold a result of this tool." in ended.err
    assert "--force" in ended.err
    assert contents(out) == before
    assert calibrate("run", study, "--out", out, "--quiet", "--force").code == 0
    assert set(contents(out)) == light


def test_wrong_input_leaves_an_old_result_and_nothing_else(made, study, calibrate, change):
    change('family = "gumbel"', 'family = "gumble"')
    before = contents(made)
    for options in (["--out", "out"], ["--out", "new", "--force"], []):
        ended = calibrate("run", study, *options)
        assert (ended.code, ended.out) == (2, "")
    assert contents(made) == before
    assert sorted(p.name for p in made.parent.iterdir()) == ["out", "project"]
    assert not (study.parents[2] / "reports").exists()


def test_a_failure_while_writing_keeps_the_old_result(made, study, calibrate, light, monkeypatch):
    before = contents(made)

    def fails(self, content):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("pathlib.Path.write_bytes", fails)
    ended = calibrate("run", study, "--out", "out")
    assert ended.code == 2
    assert "The folder out cannot be written: No space left on device." in ended.err
    assert contents(made) == before
    assert hidden(made.parent) == []


def test_an_interruption_while_writing_keeps_the_old_result(made, study, calibrate, light, monkeypatch):
    before = contents(made)

    def interrupted(self, content):
        raise KeyboardInterrupt

    monkeypatch.setattr("pathlib.Path.write_bytes", interrupted)
    assert calibrate("run", study, "--out", "out").code == 130
    assert contents(made) == before
    assert hidden(made.parent) == []


@pytest.mark.parametrize("out", [".", "..", "project", "project/studies/rods"])
def test_what_holds_the_inputs_or_the_working_directory_is_never_replaced(
    made, study, calibrate, light, monkeypatch, out
):
    (made.parent / "work").mkdir()
    monkeypatch.chdir(made.parent / "work" if out == ".." else made.parent)
    before = contents(made.parent)
    ended = calibrate("run", study, "--out", out, "--force")
    assert ended.code == 2
    assert "results cannot replace it" in ended.err
    assert contents(made.parent) == before


def test_files_and_links_are_refused(study, calibrate, light, tmp_path):
    (tmp_path / "file").write_text("mine")
    (tmp_path / "target").mkdir()
    (tmp_path / "link").symlink_to(tmp_path / "target")
    for name, message in (
        ("file", "is a file"),
        ("link", "is a symbolic link"),
        ("file/below", "cannot be written"),
    ):
        ended = calibrate("run", study, "--out", tmp_path / name, "--force")
        assert ended.code == 2
        assert message in ended.err
