"""Templates of the workbench and of the report, one environment."""

from __future__ import annotations

from functools import cache
from typing import TYPE_CHECKING

from identify.report.html import open_templates
from identify.report.words import visible_text

if TYPE_CHECKING:
    import jinja2


@cache
def environment() -> jinja2.Environment:
    """Templates of the workbench, which may use those of the report."""
    made = open_templates("identify.workbench", "identify.report")
    made.filters["visible"] = visible_text
    made.filters["day"] = lambda text: text[:16].replace("T", " ") if text else ""
    return made
