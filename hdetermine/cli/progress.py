"""Progress on the error stream, while something takes its time."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import contextmanager

Progress = Callable[[str, int, int], None]


@contextmanager
def working(title: str) -> Iterator[Progress]:
    """Show a bar that is gone when the work is done; nothing where nobody watches.

    Yields
    ------
    callable
        ``progress(stage, done, total)``.
    """
    from rich.console import Console
    from rich.progress import BarColumn, Progress, TextColumn, TimeElapsedColumn

    console = Console(stderr=True)
    columns = (TextColumn("{task.description}"), BarColumn(), TimeElapsedColumn())
    if not console.is_terminal:
        # Even a disabled bar may end with an empty line in a file or a pipe.
        yield lambda _stage, _done, _total: None
        return
    with Progress(*columns, console=console, transient=True) as bar:
        task = bar.add_task(title, total=None)

        def report(stage: str, done: int, total: int) -> None:
            bar.update(task, description=f"{title}: {stage}", completed=done, total=max(total, 1))

        yield report
