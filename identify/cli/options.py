"""What several commands share: kinds of parameters, who and when, text files, plain tables."""

from __future__ import annotations

import os
from datetime import UTC, datetime
from pathlib import Path
from typing import TYPE_CHECKING

import click

from identify.errors import InputError, IonwitnessError, UsageError

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Sequence

    from identify.library.events import Event

FILE = click.Path(path_type=Path, readable=False)
"""Any path: whether it can be read is found out by who reads it, so that one bad file does not stop the others."""
MAX_TEXT_BYTES = 16 * 2**20
"""No settings file, ladder or list is larger."""


def current_user() -> str:
    """Login name of whoever runs the command; `unknown` where the system does not say.

    Returns
    -------
    str
    """
    import getpass

    try:
        return getpass.getuser()
    except (KeyError, OSError):
        return "unknown"


def now() -> datetime:
    """The present, with time zone: the only place where commands read the clock.

    Returns
    -------
    datetime
    """
    return datetime.now(UTC)


WHO = click.option("--who", default=current_user, show_default="your login name", help="Name written into the event.")
WHY = click.option("--why", default="", help="Reason written into the event.")
WHY_REQUIRED = click.option("--why", required=True, help="Reason written into the event.")
LIBRARY = click.option("--library", "path", required=True, type=FILE, metavar="LIB", help="Library the entry is in.")
LIBRARIES = click.option(
    "--library", "libraries", multiple=True, required=True, type=FILE, help="Library to search; repeatable."
)
JSON = click.option("--json", "json_path", type=FILE, help="Write the full result as JSON.")
REPORT = click.option("--report", "html_path", type=FILE, help="Write a self-contained HTML report.")
SETTINGS = click.option("--settings", "settings_path", type=FILE, help="TOML file with settings.")
RECORD = click.option(
    "--record/--no-record", "is_recorded", default=None,
    help="Remember in the library which entries answered (default: when a result file is written and the library allows).",
)  # fmt: skip


def read_text(path: Path, what: str, kind: type[IonwitnessError] = InputError) -> str:
    """Text of a small file that the user names.

    Parameters
    ----------
    path : Path
    what : str
        What the file is meant to hold, for messages.
    kind : type of IonwitnessError
        Raised when it cannot be read; decides the exit code.

    Returns
    -------
    str

    Raises
    ------
    InputError, or what `kind` says
        If there is no such file, or it is a folder, may not be read, is too large or holds no UTF-8 text.
    """
    found = ""
    try:
        with path.open("rb") as stream:
            data = stream.read(MAX_TEXT_BYTES + 1)
        if len(data) <= MAX_TEXT_BYTES:
            return data.decode("utf-8-sig")
        found = f"more than {MAX_TEXT_BYTES // 2**20} MB"
    except OSError as error:
        found = describe_os_error(error)
    except UnicodeDecodeError:
        found = "bytes that are no UTF-8 text"
    raise kind(what, where=str(path), found=found, expected="a readable text file")


def read_settings(path: Path | None) -> str:
    """Text of a settings file; empty without a path.

    Parameters
    ----------
    path : Path or None

    Returns
    -------
    str

    Raises
    ------
    UsageError
        If the file cannot be read as text.
    """
    return "" if path is None else read_text(path, "settings", UsageError)


def describe_os_error(error: OSError) -> str:
    """What the system found at a path, in words.

    Parameters
    ----------
    error : OSError

    Returns
    -------
    str

    Examples
    --------
    >>> describe_os_error(FileNotFoundError(2, "No such file or directory"))
    'no file'
    """
    words: tuple[tuple[type[OSError], str], ...] = (
        (FileNotFoundError, "no file"),
        (IsADirectoryError, "a folder"),
        (NotADirectoryError, "a file where a folder should be"),
        (PermissionError, "no permission"),
    )
    return next((text for kind, text in words if isinstance(error, kind)), error.strerror or type(error).__name__)


def check_outputs(outputs: Sequence[Path | None], inputs: Sequence[Path]) -> None:
    """Nothing comes out; results will have a place to go, found out before the work is done.

    Parameters
    ----------
    outputs : sequence of Path or None
        Files that will be written.
    inputs : sequence of Path
        Files of this command that must not be overwritten.

    Raises
    ------
    UsageError
        If a folder is missing or cannot be written, or a file is named twice.
    """
    taken = {path.resolve(): "a file that this command reads" for path in inputs}
    for path in outputs:
        if path is None:
            continue
        found = taken.get(path.resolve(), "")
        if path.is_dir():
            found = "a folder of that name"
        elif not path.parent.is_dir():
            found = "no such folder"
        elif not os.access(path.parent, os.W_OK):
            found = "a folder without permission to write"
        if found:
            raise UsageError("output file", where=str(path), found=found, expected="a new file in a folder to write to")
        taken[path.resolve()] = "the same file twice"


def say(text: str) -> None:
    """Nothing comes out; one line is printed, with controls from files spelled out and its indentation kept.

    Parameters
    ----------
    text : str
    """
    from identify.report.words import visible_text

    margin = text[: len(text) - len(text.lstrip(" "))]
    click.echo(margin + visible_text(text, 4000))


def say_written(path: Path) -> None:
    """Nothing comes out; beside the answer it is said that a file was written.

    Parameters
    ----------
    path : Path
    """
    click.echo(f"Written: {path}", err=True)


def say_event(event: Event) -> None:
    """Nothing comes out; one line about an event is printed.

    Parameters
    ----------
    event : Event
    """
    reason = f": {event.reason}" if event.reason else ""
    at = event.at[:19].replace("T", " ")
    say(f"event {event.seq} · {at} UTC · {event.kind} by {event.who}{reason} · {event.hash[:16]}")


def say_table(heading: Sequence[str], rows: Iterable[Sequence[str]]) -> None:
    """Nothing comes out; left-aligned columns are printed, as wide as their longest cell.

    Parameters
    ----------
    heading : sequence of str
    rows : iterable of sequence of str
        As many cells as the heading.
    """
    from identify.report.words import visible_text

    table = [tuple(heading), *(tuple(visible_text(cell) for cell in row) for row in rows)]
    widths = [max(len(row[column]) for row in table) for column in range(len(heading))]
    for row in table:
        click.echo("  " + "  ".join(f"{cell:<{width}}" for cell, width in zip(row, widths, strict=True)).rstrip())


def show_and_exit(show: Callable[[], None]) -> Callable[[click.Context, click.Parameter, bool], None]:
    """Callback of an option like ``--list``, which prints something and ends the command.

    Parameters
    ----------
    show : callable

    Returns
    -------
    callable
    """

    def callback(context: click.Context, _parameter: click.Parameter, asked: bool) -> None:
        if asked and not context.resilient_parsing:
            show()
            context.exit()

    return callback
