"""Progress on a terminal; nothing where output is piped."""

from __future__ import annotations

from collections.abc import Callable
from contextlib import contextmanager
from functools import partial
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
    with _bar(label, "{task.completed:.0f}") as update:
        yield update and (lambda done, name: update(completed=done, description=f"{label} {name[:40]}"))


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
    with _bar(label, "{task.percentage:.0f} %") as update:
        yield update and (lambda done, total: update(completed=done, total=total))


@contextmanager
def _bar(label: str, amount: str) -> Iterator[Callable[..., None] | None]:
    from rich.console import Console
    from rich.progress import BarColumn, Progress, TextColumn, TimeElapsedColumn

    console = Console(stderr=True)
    if not console.is_terminal:
        yield None
        return
    words = TextColumn("{task.description}", markup=False)  # names come from files
    with Progress(words, BarColumn(), TextColumn(amount), TimeElapsedColumn(), console=console, transient=True) as bar:
        yield partial(bar.update, bar.add_task(label, total=None))
