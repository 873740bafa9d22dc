"""The process that identifies, so that the process that answers browsers never waits for it.

Run as ``python -m identify.workbench.identifier`` by `identify.workbench.identifier_process`. It has a desk of its own on the
same libraries and case file, gives way to everything else on the computer, and answers one JSON line for each line of orders:
``{"record": …, "number": …, "settings": …}`` with ``{"document": …}``, ``{"draw": [query, result]}`` with ``{"drawn": …}``,
either with ``{"fault": …}`` when it cannot be done. It only reads. It ends when its orders end, that is with the server.
"""

from __future__ import annotations

import json
import os
import sys
from collections.abc import Mapping
from dataclasses import asdict
from pathlib import Path
from typing import Any

from identify import __version__
from identify.errors import IonwitnessError
from identify.pipeline.search import identify_query, make_query
from identify.records import SpectrumRecord
from identify.settings import Settings, resolve
from identify.workbench.desk import Desk, open_desk
from identify.workbench.drawn_query import draw_result
from identify.workbench.intake import NICENESS
from identify.workbench.record_json import record_from_dict
from identify.workbench.stored import result_document


def main() -> int:
    """Exit code: 0 when the orders ended."""
    os.nice(NICENESS)
    orders = json.loads(sys.stdin.readline())
    # What others print must not become a line of ours.
    stream, sys.stdout = sys.stdout, sys.stderr
    settings = resolve(orders["settings"], where="settings of the workbench")
    with open_desk([Path(path) for path in orders["libraries"]], Path(orders["case"]), settings) as desk:
        for line in sys.stdin:
            stream.write(json.dumps(_answer(desk, json.loads(line)), separators=(",", ":"), allow_nan=False) + "\n")
            stream.flush()
    return 0


def _answer(desk: Desk, order: Mapping[str, Any]) -> dict[str, Any]:
    try:
        if "draw" in order:
            return {"drawn": asdict(draw_result(desk, *order["draw"]))}
        settings = resolve(order["settings"], where="settings of the query") if order["settings"] else desk.settings
        return {"document": identify_record(desk, record_from_dict(order["record"]), order["number"], settings)}
    except IonwitnessError as error:
        fields = {name: getattr(error, name) for name in ("what", "where", "found", "expected", "hint")}
        return {"fault": {"kind": type(error).__name__, **fields}}


def identify_record(desk: Desk, record: SpectrumRecord, number: int, settings: Settings) -> dict[str, Any]:
    """The result contract of one record against the libraries as they are now.

    Parameters
    ----------
    desk : Desk
    record : SpectrumRecord
    number : int
    settings : Settings

    Returns
    -------
    dict

    Raises
    ------
    SpectrumError
        If the spectrum cannot be searched.
    """
    query = make_query(record, number, settings)
    searchable = desk.searchable()
    found = identify_query(query, searchable, settings)
    return result_document(found, settings, [item.state for item in searchable], __version__)


if __name__ == "__main__":
    sys.exit(main())
