"""Figures drawn by this process and, where there are two processors, by a second one beside it.

The second is a fresh interpreter that reads its jobs from a pipe, so that a user's script needs no guard round its main part; it
ends with the pipe or with its parent.
"""

import os
import pickle
import subprocess
import sys
import threading
from collections.abc import Callable, Iterator
from contextlib import contextmanager, suppress
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from massfingerprint import options
from massfingerprint.errors import FolderError
from massfingerprint.files.atomic import write_binary
from massfingerprint.study.patterns import Progress

_FEW = 8  # figures that are not worth a second process
_SHARE = 0.45  # of the second process, which must load the libraries first
_DONE = b"."


@dataclass(frozen=True)
class Job:
    """One figure: which function draws it, from what, and where its files go (path without ending)."""

    draw: Callable[..., Any]
    arguments: dict[str, Any]
    path: Path
    kinds: tuple[str, ...]

    def run(self) -> None:
        """Draw the figure and write it in every format."""
        from massfingerprint.figures import look  # noqa: PLC0415  plotting only where it is asked for

        with look.style():
            figure = self.draw(**self.arguments)
        for kind in self.kinds:
            write_binary(look.file_content(figure, kind), self.path.parent / f"{self.path.name}.{kind}")


def draw_all(jobs: list[Job], *, progress: Progress) -> None:
    """Draw every job; the folders of their paths are made.

    Parameters
    ----------
    jobs : list of Job
        In any order; each stands for itself.
    progress : callable
        Told ("figures", done, total).

    Raises
    ------
    FolderError
        If the second process could not finish; its last words are in the message.
    """
    for folder in {job.path.parent for job in jobs}:
        folder.mkdir(parents=True, exist_ok=True)
    count = round(_SHARE * len(jobs)) if options.threads() > 1 and len(jobs) >= _FEW else 0
    # taken evenly from the list, so that both get figures of every kind
    theirs = {round((n + 0.5) * len(jobs) / count) for n in range(count)} if count else set()
    done = 0
    with _second([job for n, job in enumerate(jobs) if n in theirs]) as finished:
        for job in (job for n, job in enumerate(jobs) if n not in theirs):
            job.run()
            done += 1
            progress("figures", done, len(jobs))
        for _ in finished:
            done += 1
            progress("figures", done, len(jobs))


@contextmanager
def _second(jobs: list[Job]) -> Iterator[Iterator[bytes]]:
    """Let a second process draw jobs; gives an iterator with one item for each that is done."""
    if not jobs:
        yield iter(())
        return
    code = "from massfingerprint.study.drawing import serve; serve()"
    # the child finds the package as its parent does
    environment = {**os.environ, "PYTHONPATH": os.pathsep.join(part for part in sys.path if part)}
    pipe = subprocess.PIPE
    with subprocess.Popen([sys.executable, "-c", code], stdin=pipe, stdout=pipe, stderr=pipe, env=environment) as child:  # noqa: S603
        feeding = threading.Thread(target=_feed, args=(child, pickle.dumps((os.getpid(), jobs))), daemon=True)
        feeding.start()
        try:
            yield _finished(child)
        finally:
            child.kill()
            feeding.join()


def _feed(child: "subprocess.Popen[bytes]", content: bytes) -> None:
    """Send the jobs; a child that ended early takes none, and says why at its end."""
    with suppress(BrokenPipeError), child.stdin as stream:  # type: ignore[union-attr]
        stream.write(content)


def _finished(child: "subprocess.Popen[bytes]") -> Iterator[bytes]:
    while mark := child.stdout.read(1):  # type: ignore[union-attr]
        yield mark
    if child.wait() != 0:
        words = child.stderr.read().decode(errors="replace").strip().splitlines() or ["no words"]  # type: ignore[union-attr]
        raise FolderError(f"figures: the process that draws them ended early ({words[-1]}).")


def serve() -> None:
    """Draw the jobs that come on standard input; one mark on standard output for each that is done."""
    parent, jobs = pickle.load(sys.stdin.buffer)  # noqa: S301  from the process that started this one
    for job in jobs:
        if os.getppid() != parent:
            return
        job.run()
        sys.stdout.buffer.write(_DONE)
        sys.stdout.buffer.flush()
