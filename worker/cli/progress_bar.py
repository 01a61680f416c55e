"""A progress bar on standard error, so that standard output stays clean."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import contextmanager

from rich.console import Console
from rich.progress import BarColumn, Progress, TaskID, TextColumn, TimeElapsedColumn


@contextmanager
def progress_bar(console: Console, begin: str) -> Iterator[Callable[[float, str], None]]:
    """Show a bar while the context lasts; yields what moves it to a fraction with a word."""
    columns = (TextColumn("{task.description}", markup=False), BarColumn(), TimeElapsedColumn())
    with Progress(*columns, console=console, transient=True) as bar:
        task: TaskID = bar.add_task(begin, total=1.0)

        def show(fraction: float, word: str) -> None:
            bar.update(task, completed=fraction, description=word)

        yield show
