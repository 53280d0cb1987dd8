"""Talk on stderr while work goes on: a bar with the time left on a terminal, one line a stage elsewhere, nothing when quiet."""

import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager

import click

_STAGES = {
    "kernels": "solving kernels",
    "choices": "solving choices",
    "patterns": "solving patterns",
    "sites": "values at sites",
    "series": "series and rates",
    "files": "writing files",
    "figures": "drawing figures",
}


@contextmanager
def progress(*, quiet: bool) -> Iterator[Callable[[str, int, int], None]]:
    """Give a callable (stage, done, total) that shows how far a study is."""
    if quiet:
        yield lambda stage, done, total: None
    elif sys.stderr.isatty():
        with _bars() as report:
            yield report
    else:
        yield _line


def _line(stage: str, done: int, total: int) -> None:
    if done == total:
        click.echo(f"{_STAGES.get(stage, stage)}: {total} of {total}", err=True)


@contextmanager
def _bars() -> Iterator[Callable[[str, int, int], None]]:
    from rich.console import Console  # noqa: PLC0415  only when a bar is drawn
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, TaskID, TextColumn, TimeRemainingColumn  # noqa: PLC0415

    columns = (TextColumn("{task.description:18}"), BarColumn(), MofNCompleteColumn(), TimeRemainingColumn())
    tasks: dict[str, TaskID] = {}
    with Progress(*columns, console=Console(stderr=True)) as bars:

        def report(stage: str, done: int, total: int) -> None:
            if stage not in tasks:
                tasks[stage] = bars.add_task(_STAGES.get(stage, stage), total=total)
            bars.update(tasks[stage], completed=done, total=total)

        yield report
