"""The report as one HTML file that needs nothing else: no network, no fonts, no scripts but a few lines of convenience."""

from __future__ import annotations

import base64
import hashlib
from functools import cache
from importlib import resources
from pathlib import Path
from typing import TYPE_CHECKING

from identify.records import Report
from identify.report.context import build_page
from identify.writers.files import write_atomically

if TYPE_CHECKING:
    import jinja2


def render_html(report: Report, *, date: str = "") -> str:
    """HTML text of a report, complete in itself.

    Parameters
    ----------
    report : Report
    date : str
        Shown in the head when given; without it the same report is the same text.

    Returns
    -------
    str
        A document that loads nothing: its content security policy forbids every request and every script but its own.
    """
    script = read_template("details.js") + read_template("page.js")
    return (
        open_templates("identify.report")
        .get_template("page.html")
        .render(
            page=build_page(report, date=date),
            style=read_template("page.css") + read_template("plots.css"),
            script=script,
            script_digest=script_digest(script),
        )
    )


def write_html(path: Path, report: Report, *, date: str = "") -> None:
    """Nothing comes out; afterwards `path` holds the report as one HTML file, whole or not at all.

    Parameters
    ----------
    path : Path
    report : Report
    date : str
        Shown in the head when given.

    Raises
    ------
    UsageError
        If the file cannot be written.
    """
    write_atomically(path, render_html(report, date=date).encode("utf-8"))


@cache
def open_templates(*packages: str) -> jinja2.Environment:
    """Templates of packages, the first that has a name wins; what they print is escaped.

    Parameters
    ----------
    *packages : str
        Each with a folder ``templates``.

    Returns
    -------
    jinja2.Environment
    """
    import jinja2

    return jinja2.Environment(
        loader=jinja2.ChoiceLoader([jinja2.PackageLoader(package, "templates") for package in packages]),
        autoescape=True,
        undefined=jinja2.StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )


def read_template(name: str) -> str:
    """Text of a file of this room's templates, as it stands.

    Parameters
    ----------
    name : str

    Returns
    -------
    str
    """
    return (resources.files("identify.report") / "templates" / name).read_text("utf-8")


def script_digest(script: str) -> str:
    """What a content security policy names a script by.

    Parameters
    ----------
    script : str

    Returns
    -------
    str
    """
    return base64.b64encode(hashlib.sha256(script.encode()).digest()).decode()
