"""Progress on a terminal; nothing where output is piped."""

from __future__ import annotations

from collections.abc import Callable
from contextlib import contextmanager
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Iterator

    from identify.pipeline.search import Progress

DoneOfTotal = Callable[[int, int], None]


@contextmanager
def progress_bar(label: str) -> Iterator[Progress | None]:
    """A progress callback that draws on a terminal; None when output is piped.

    Parameters
    ----------
    label : str

    Yields
    ------
    callable or None
        Takes how many are done, and the name of the one in hand.
    """
    from rich.console import Console
    from rich.progress import BarColumn, Progress, TextColumn, TimeElapsedColumn

    console = Console(stderr=True)
    if not console.is_terminal:
        yield None
        return
    columns = (
        TextColumn("{task.description}", markup=False),  # names come from files
        BarColumn(),
        TextColumn("{task.completed:.0f}"),
        TimeElapsedColumn(),
    )
    with Progress(*columns, console=console, transient=True) as bar:
        task = bar.add_task(label, total=None)
        yield lambda done, name: bar.update(task, completed=done, description=f"{label} {name[:40]}")


@contextmanager
def page_bar(label: str) -> Iterator[DoneOfTotal | None]:
    """A callback that draws a share of a known whole on a terminal; None when output is piped.

    Parameters
    ----------
    label : str

    Yields
    ------
    callable or None
        Takes how much is done and how much there is.
    """
    from rich.console import Console
    from rich.progress import BarColumn, Progress, TaskProgressColumn, TextColumn, TimeElapsedColumn

    console = Console(stderr=True)
    if not console.is_terminal:
        yield None
        return
    columns = (TextColumn(label, markup=False), BarColumn(), TaskProgressColumn(), TimeElapsedColumn())
    with Progress(*columns, console=console, transient=True) as bar:
        task = bar.add_task(label, total=None)
        yield lambda done, total: bar.update(task, completed=done, total=total)
