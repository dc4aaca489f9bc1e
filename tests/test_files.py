"""Files that appear whole or not at all."""

import errno
import os
import stat
from pathlib import Path

import pytest

from livelag.errors import FileError
from livelag.files import WholeFiles, WholeFolder, cannot_write


def test_files_appear_together_at_the_end(tmp_path):
    with WholeFiles() as files:
        for name in ("a.wav", "b.csv"):
            temporary = files.temporary(tmp_path / name)
            assert temporary.parent == tmp_path
            assert temporary.suffix == Path(name).suffix
            assert temporary.name.startswith(".")
            temporary.write_text(name)
        assert not (tmp_path / "a.wav").exists()
    assert {path.name: path.read_text() for path in tmp_path.iterdir()} == {
        "a.wav": "a.wav",
        "b.csv": "b.csv",
    }


def test_a_file_has_the_rights_of_any_new_file(tmp_path):
    (tmp_path / "plain").touch()
    with WholeFiles() as files:
        files.temporary(tmp_path / "x.wav").write_text("x")
    modes = {stat.S_IMODE(path.stat().st_mode) for path in tmp_path.iterdir()}
    assert len(modes) == 1


@pytest.mark.parametrize("kind", [ValueError, KeyboardInterrupt, SystemExit, FileError])
def test_nothing_is_left_after_any_exception_and_older_files_stay(tmp_path, kind):
    (tmp_path / "a.wav").write_text("older")
    with pytest.raises(kind, match="stop"), WholeFiles() as files:  # noqa: PT012
        files.temporary(tmp_path / "a.wav").write_text("new")
        files.temporary(tmp_path / "b.csv").write_text("new")
        raise kind("stop")
    assert [path.name for path in tmp_path.iterdir()] == ["a.wav"]
    assert (tmp_path / "a.wav").read_text() == "older"


def test_a_failure_names_the_file_that_it_was_about(tmp_path):
    with pytest.raises(FileError) as caught, WholeFiles() as files:  # noqa: PT012
        files.temporary(tmp_path / "a.wav")
        second = files.temporary(tmp_path / "b.csv")
        raise OSError(errno.ENOSPC, "No space left on device", str(second))
    assert str(caught.value) == f"{tmp_path / 'b.csv'}: cannot be written: No space left on device"
    assert not any(tmp_path.iterdir())


def test_a_failure_without_a_name_is_about_the_first_file(tmp_path):
    with pytest.raises(FileError, match=r"a\.wav: cannot be written: gone"), WholeFiles() as files:  # noqa: PT012
        files.temporary(tmp_path / "a.wav")
        files.temporary(tmp_path / "b.csv")
        raise OSError("gone")


def test_a_temporary_that_vanished_is_one_line(tmp_path):
    with pytest.raises(FileError, match=r"b\.csv: cannot be written"), WholeFiles() as files:
        files.temporary(tmp_path / "b.csv").unlink()
    assert not any(tmp_path.iterdir())


@pytest.mark.skipif(not hasattr(os, "mkfifo"), reason="needs named pipes")
def test_a_pipe_stays_a_pipe(tmp_path):
    pipe = tmp_path / "pipe.csv"
    os.mkfifo(pipe)
    with pytest.raises(FileError, match=r"pipe\.csv: is a device or pipe"), WholeFiles() as files:
        files.temporary(pipe).write_text("new")
    assert pipe.is_fifo()
    assert list(tmp_path.iterdir()) == [pipe]


@pytest.mark.parametrize(
    ("name", "message"),
    [
        ("none/x.wav", "does not exist; make it first"),
        ("file/x.wav", "does not exist; make it first"),
        ("folder", "is a folder; name a file"),
        ("n" * 300, "cannot be written: File name too long"),
    ],
)
def test_places_that_cannot_hold_a_file(tmp_path, name, message):
    (tmp_path / "file").touch()
    (tmp_path / "folder").mkdir()
    with pytest.raises(FileError) as caught, WholeFiles() as files:
        files.temporary(tmp_path / name)
    assert str(caught.value).startswith(f"{tmp_path / name}: ")
    assert message in str(caught.value)
    assert {path.name for path in tmp_path.iterdir()} == {"file", "folder"}


def test_the_second_place_may_be_the_wrong_one(tmp_path):
    with pytest.raises(FileError, match="does not exist"), WholeFiles() as files:  # noqa: PT012
        files.temporary(tmp_path / "a.wav")
        files.temporary(tmp_path / "none" / "b.csv")
    assert not any(tmp_path.iterdir())


# --- folders ----------------------------------------------------------------------------------


def held(folder):
    return {path.name: path.read_text() for path in folder.iterdir()}


def test_a_new_folder_appears_with_all_its_files(tmp_path):
    with WholeFolder(tmp_path / "set") as work:
        (work / "a").write_text("new")
        (work / "b").write_text("new")
        assert not (tmp_path / "set").exists()
    assert held(tmp_path / "set") == {"a": "new", "b": "new"}
    (tmp_path / "plain").mkdir()
    modes = {stat.S_IMODE(path.stat().st_mode) for path in tmp_path.iterdir()}
    assert len(modes) == 1
    assert len(list(tmp_path.iterdir())) == 2


def older_folder(tmp_path):
    folder = tmp_path / "set"
    folder.mkdir()
    for name in ("a", "gone", "mine"):
        (folder / name).write_text(f"older {name}")
    return folder


def test_files_of_an_older_set_are_replaced_or_go_and_others_stay(tmp_path):
    folder = older_folder(tmp_path)
    with WholeFolder(folder, outdated=("gone", "never there")) as work:
        (work / "a").write_text("new")
        (work / "b").write_text("new")
    assert held(folder) == {"a": "new", "b": "new", "mine": "older mine"}


@pytest.mark.parametrize("kind", [ValueError, KeyboardInterrupt, SystemExit, FileError])
@pytest.mark.parametrize("there", [True, False])
def test_no_exception_changes_a_folder(tmp_path, kind, there):
    folder = older_folder(tmp_path) if there else tmp_path / "set"
    before = held(folder) if there else None
    with pytest.raises(kind, match="stop"), WholeFolder(folder, outdated=("gone",)) as work:  # noqa: PT012
        (work / "a").write_text("new")
        raise kind("stop")
    assert (held(folder) if there else None) == before
    assert [path.name for path in tmp_path.iterdir()] == (["set"] if there else [])


@pytest.mark.parametrize("number", range(1, 6))
@pytest.mark.parametrize("kind", [OSError, KeyboardInterrupt])
def test_a_move_that_fails_is_taken_back(tmp_path, monkeypatch, number, kind):
    folder = older_folder(tmp_path)
    before = held(folder)
    replace = Path.replace
    calls = []

    def fail(self, target):
        calls.append(target)
        if len(calls) == number:
            raise kind("stop")
        return replace(self, target)

    with pytest.raises((FileError, KeyboardInterrupt)), WholeFolder(folder, ("gone",)) as work:  # noqa: PT012
        for name in ("a", "b", "c"):
            (work / name).write_text("new")
        monkeypatch.setattr(Path, "replace", fail)
    assert len(calls) >= number
    assert held(folder) == before
    assert [path.name for path in tmp_path.iterdir()] == ["set"]


def test_a_folder_in_the_way_of_a_file_stays(tmp_path):
    folder = older_folder(tmp_path)
    (folder / "b").mkdir()
    (folder / "b" / "precious").write_text("mine")
    with pytest.raises(FileError, match="b: is a folder"), WholeFolder(folder) as work:  # noqa: PT012
        for name in ("a", "b"):
            (work / name).write_text("new")
    assert (folder / "b" / "precious").read_text() == "mine"
    assert (folder / "a").read_text() == "older a"


@pytest.mark.parametrize(
    ("name", "message"),
    [
        ("none/set", "does not exist; make it first"),
        ("file/set", "does not exist; make it first"),
        ("file", "is a file; name a folder"),
        ("n" * 300, "cannot be written: File name too long"),
    ],
)
def test_places_that_cannot_hold_a_folder(tmp_path, name, message):
    (tmp_path / "file").touch()
    with pytest.raises(FileError) as caught, WholeFolder(tmp_path / name):
        pass
    assert str(caught.value).startswith(f"{tmp_path / name}: ")
    assert message in str(caught.value)
    assert [path.name for path in tmp_path.iterdir()] == ["file"]


def test_cannot_write_says_why():
    assert str(cannot_write(Path("x"), OSError(errno.EACCES, "Permission denied"))) == (
        "x: cannot be written: Permission denied"
    )
    assert str(cannot_write(Path("x"), OSError("odd"))) == "x: cannot be written: odd"


def test_an_interrupt_right_after_a_rename_loses_nothing(tmp_path, monkeypatch):
    folder = tmp_path / "set"
    folder.mkdir()
    (folder / "01.wav").write_text("older")
    rename = Path.replace

    def rename_and_interrupt(self, target):
        monkeypatch.undo()
        rename(self, target)
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt), WholeFolder(folder) as work:  # noqa: PT012
        (work / "01.wav").write_text("new")
        monkeypatch.setattr(Path, "replace", rename_and_interrupt)
    assert [path.name for path in folder.iterdir()] == ["01.wav"]
    assert (folder / "01.wav").read_text() == "older"
