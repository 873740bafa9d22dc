"""Why is a compound not the answer, in text that can be shown?"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from identify.pipeline import why_not
from identify.pipeline.search import SearchableLibrary
from identify.pipeline.why_not import WhyNot
from identify.records import Identification
from identify.report.words import visible_text
from identify.settings import Settings


def explain_absence(
    asked: str, found: Identification, libraries: Sequence[SearchableLibrary], settings: Settings
) -> tuple[WhyNot, ...]:
    """See `identify.pipeline.why_not.explain_absence`; control characters of foreign names are spelled out.

    Parameters
    ----------
    asked : str
    found : Identification
    libraries : sequence of SearchableLibrary
    settings : Settings

    Returns
    -------
    tuple of WhyNot
    """
    return tuple(
        replace(item, name=visible_text(item.name), reasons=tuple(visible_text(reason) for reason in item.reasons))
        for item in why_not.explain_absence(asked, found, libraries, settings)
    )
