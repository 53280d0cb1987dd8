"""A whole folder or none."""

import os

import pytest

from massfingerprint.errors import FolderError, InputError
from massfingerprint.files.folders import replacing_folder


def names(folder):
    return sorted(p.name for p in folder.iterdir() if p.name != ".out.lock")


def test_a_new_folder_and_its_replacement(tmp_path):
    target = tmp_path / "out"
    with replacing_folder(target) as fresh:
        (fresh / "a").write_text("1")
        assert not target.exists()
    assert names(target) == ["a"]
    with replacing_folder(target, replace=True) as fresh:
        (fresh / "b").write_text("2")
        assert names(target) == ["a"]
    assert names(target) == ["b"]
    assert names(tmp_path) == ["out"]


def test_a_folder_that_is_there_is_refused_unless_empty(tmp_path):
    target = tmp_path / "out"
    target.mkdir()
    with replacing_folder(target) as fresh:
        (fresh / "a").write_text("1")
    with pytest.raises(FolderError, match=r"is there already. Use --replace"), replacing_folder(target):
        pass
    assert names(target) == ["a"]


@pytest.mark.parametrize(
    "failure", [OSError(28, "No space left on device"), KeyboardInterrupt(), InputError("x: bad.")]
)
def test_a_failure_leaves_the_old_folder_and_nothing_else(tmp_path, failure):
    target = tmp_path / "out"
    target.mkdir()
    (target / "old").write_text("0")
    expected = FolderError if isinstance(failure, OSError) else type(failure)

    def fail():
        with replacing_folder(target, replace=True) as fresh:
            (fresh / "half").write_text("1")
            raise failure

    with pytest.raises(expected) as caught:
        fail()
    assert names(target) == ["old"]
    assert names(tmp_path) == ["out"]
    if isinstance(failure, OSError):
        assert "No space left on device" in str(caught.value)
        assert "unchanged" in str(caught.value)


def test_a_second_run_into_the_same_folder_is_refused(tmp_path):
    with replacing_folder(tmp_path / "out") as fresh:
        with pytest.raises(FolderError, match="another run is writing it"), replacing_folder(tmp_path / "out"):
            pass
        (fresh / "a").write_text("1")
    assert names(tmp_path / "out") == ["a"]


def test_what_a_killed_run_left_is_put_right(tmp_path):
    """Killed between the two renames: the old folder stands aside; it comes back before anything else happens."""
    (tmp_path / ".out.old").mkdir()
    (tmp_path / ".out.old" / "old").write_text("0")
    (tmp_path / ".out.new-abc").mkdir()
    with pytest.raises(FolderError, match="is there already"), replacing_folder(tmp_path / "out"):
        pass
    assert names(tmp_path) == ["out"]
    assert names(tmp_path / "out") == ["old"]


def test_a_swap_that_fails_half_way_is_undone(tmp_path, monkeypatch):
    target = tmp_path / "out"
    target.mkdir()
    (target / "old").write_text("0")
    real, count = os.rename, []

    def rename(self, goal):
        count.append(goal)
        if len(count) == 2:
            raise KeyboardInterrupt
        real(self, goal)
        return goal

    monkeypatch.setattr("pathlib.Path.rename", rename)
    with pytest.raises(KeyboardInterrupt), replacing_folder(target, replace=True):
        pass
    assert names(target) == ["old"]
    assert names(tmp_path) == ["out"]


def test_a_place_that_cannot_hold_it(tmp_path, monkeypatch):
    (tmp_path / "file").write_text("")
    with pytest.raises(FolderError, match="is a file, not a folder"), replacing_folder(tmp_path / "file"):
        pass
    with (
        pytest.raises(FolderError, match=r"there is no folder .*nowhere"),
        replacing_folder(tmp_path / "nowhere" / "out"),
    ):
        pass

    def refuse(*_, **__):
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr("tempfile.mkdtemp", refuse)
    with (
        pytest.raises(FolderError, match="cannot be written \\(Permission denied\\)"),
        replacing_folder(tmp_path / "out"),
    ):
        pass
    monkeypatch.setattr("filelock.FileLock.acquire", refuse)
    with (
        pytest.raises(FolderError, match="cannot be written \\(Permission denied\\)"),
        replacing_folder(tmp_path / "out"),
    ):
        pass
