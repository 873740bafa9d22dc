"""Progress on a terminal; nothing where output is piped."""

from __future__ import annotations

from contextlib import contextmanager
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Iterator

    from identify.pipeline.search import Progress


@contextmanager
def progress_bar(label: str) -> Iterator[Progress | None]:
    """A progress callback that draws on a terminal; None when output is piped.

    Parameters
    ----------
    label : str

    Yields
    ------
    callable or None
    """
    from rich.console import Console
    from rich.progress import BarColumn, Progress, TextColumn, TimeElapsedColumn

    console = Console(stderr=True)
    if not console.is_terminal:
        yield None
        return
    columns = (TextColumn("{task.description}"), BarColumn(), TextColumn("{task.completed:.0f}"), TimeElapsedColumn())
    with Progress(*columns, console=console, transient=True) as bar:
        task = bar.add_task(label, total=None)
        yield lambda done, name: bar.update(task, completed=done, description=f"{label} {name[:40]}")
