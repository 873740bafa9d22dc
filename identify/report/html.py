"""The report as one HTML file that needs nothing else: no network, no fonts, no scripts but a few lines of convenience."""

from __future__ import annotations

import base64
import hashlib
from functools import cache
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
    environment = _environment()
    script = _source("page.js")
    digest = base64.b64encode(hashlib.sha256(script.encode()).digest()).decode()
    return environment.get_template("page.html").render(
        page=build_page(report, date=date),
        style=_source("page.css") + _source("plots.css"),
        script=script,
        script_digest=digest,
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
def _environment() -> jinja2.Environment:
    import jinja2

    return jinja2.Environment(
        loader=jinja2.PackageLoader("identify.report", "templates"),
        autoescape=True,
        undefined=jinja2.StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )


def _source(name: str) -> str:
    environment = _environment()
    assert environment.loader is not None
    return environment.loader.get_source(environment, name)[0]
