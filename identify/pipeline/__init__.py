"""The whole job, wired once: files in, reports out.

`search` is the main path for spectra, `runs` the same for GC-MS runs. Commands and the workbench call these functions;
nothing else wires the rooms together.

Not for: any decision of its own. Each step is a function of the room that owns it.
"""

from identify.pipeline.files import search_files, search_pasted, search_to_json
from identify.pipeline.search import (
    SearchableLibrary,
    identify_query,
    identify_records,
    make_query,
    open_libraries,
)

__all__ = [
    "SearchableLibrary",
    "identify_query",
    "identify_records",
    "make_query",
    "open_libraries",
    "search_files",
    "search_pasted",
    "search_to_json",
]
