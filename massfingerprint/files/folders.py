"""Whole folders or none: build beside the target, then swap; one run at a time; what a killed run left is put right."""

import os
import shutil
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from filelock import FileLock, Timeout

from massfingerprint.errors import FolderError, MassFingerprintError


def _beside(target: Path, word: str) -> Path:
    return target.parent / f".{target.name}.{word}"


@contextmanager
def replacing_folder(target: str | os.PathLike[str], *, replace: bool = False) -> Iterator[Path]:
    """Give an empty folder beside the target; swap it in at the end, remove it on any failure.

    Parameters
    ----------
    target : path
        The folder to be; its parent must exist.
    replace : bool
        Whether a folder that is there already may be replaced; it stays as it is until the new one is complete.

    Yields
    ------
    Path
        Where to write.

    Raises
    ------
    FolderError
        If the target exists and may not be replaced, another run is writing it, or the disk refuses; the old folder is kept.
    """
    goal = Path(os.path.abspath(target))
    if not goal.parent.is_dir():
        raise FolderError(f"{goal}: there is no folder {goal.parent} to hold it. Create it first.")
    lock = FileLock(_beside(goal, "lock"))
    try:
        lock.acquire(timeout=0)
    except Timeout as error:
        raise FolderError(f"{goal}: another run is writing it. Wait for its end, or choose another folder.") from error
    except OSError as error:
        raise FolderError(f"{goal}: cannot be written ({error.strerror or error}). Choose another folder.") from error
    try:
        _put_right(goal)
        check_target(goal, replace=replace)
        with _new_folder(goal) as fresh:
            yield fresh
            _swap(fresh, goal)
    finally:
        lock.release()


def check_target(target: str | os.PathLike[str], *, replace: bool) -> None:
    """Refuse a target that is there already, unless it may be replaced; a file is never replaced."""
    goal = Path(target)
    if goal.exists() and not goal.is_dir():
        raise FolderError(f"{goal}: is a file, not a folder. Choose another name.")
    if goal.is_dir() and any(goal.iterdir()) and not replace:
        raise FolderError(f"{goal}: is there already. Use --replace (replace=True) or choose another folder.")


@contextmanager
def _new_folder(goal: Path) -> Iterator[Path]:
    try:
        fresh = Path(tempfile.mkdtemp(dir=goal.parent, prefix=f".{goal.name}.new-"))
        fresh.chmod(0o755)
    except OSError as error:
        raise FolderError(f"{goal}: cannot be written ({error.strerror or error}). Choose another folder.") from error
    try:
        yield fresh
    except OSError as error:
        if isinstance(error, MassFingerprintError):
            raise
        raise FolderError(
            f"{goal}: could not be written ({error.strerror or error}). What was there before is unchanged."
        ) from error
    finally:
        shutil.rmtree(fresh, ignore_errors=True)


def _swap(fresh: Path, goal: Path) -> None:
    old = _beside(goal, "old")
    if not goal.exists():
        fresh.rename(goal)
        return
    goal.rename(old)
    try:
        fresh.rename(goal)
    except BaseException:
        old.rename(goal)
        raise
    shutil.rmtree(old)


def _put_right(goal: Path) -> None:
    """What a killed run left: the old folder back in its place if it was moved aside, half-written ones removed."""
    old = _beside(goal, "old")
    if old.is_dir() and not goal.exists():
        old.rename(goal)
    shutil.rmtree(old, ignore_errors=True)
    for left in goal.parent.glob(f".{goal.name}.new-*"):
        shutil.rmtree(left, ignore_errors=True)
