"""What is open while the workbench runs: libraries, the case file, settings, and the folder for uploads."""

from __future__ import annotations

import secrets
import threading
from collections import OrderedDict
from collections.abc import Callable, Iterator, Sequence
from contextlib import ExitStack, contextmanager
from dataclasses import dataclass, field, replace
from datetime import UTC, datetime
from pathlib import Path
from typing import Any, TypeVar

from identify.errors import IonwitnessError, LibraryError
from identify.library.cache import load_index
from identify.library.events import format_time
from identify.library.store import Library, open_library
from identify.pipeline.search import SearchableLibrary, open_libraries
from identify.records import Entry, EntryStatus
from identify.settings import Settings
from identify.workbench.case_file import CaseFile, open_case
from identify.workbench.decisions import find_fault
from identify.workbench.stored import Rebuilt, rebuild

MAX_REBUILT, MAX_DRAWN = 200, 400
"""Results kept ready as records (about a quarter of a megabyte each) and as drawn pages (about a tenth)."""


Drawn = TypeVar("Drawn")


class NotFound(IonwitnessError):
    """There is no such page."""


class Forbidden(IonwitnessError):
    """The person may not do this."""


@dataclass(slots=True)
class Desk:
    """Everything the pages work on; made by `open_desk`."""

    case: CaseFile
    settings: Settings
    spool: Path
    """Folder of uploads; names in it are ours, never the browser's."""
    clock: Callable[[], datetime]
    _searchable: tuple[SearchableLibrary, ...]
    _lock: threading.Lock = field(default_factory=threading.Lock)
    _rebuilt: OrderedDict[tuple[int, str], Rebuilt] = field(default_factory=OrderedDict)
    _standing: dict[tuple[int, EntryStatus], tuple[str, list[int]]] = field(default_factory=dict)
    _drawn: OrderedDict[tuple[int, str], Any] = field(default_factory=OrderedDict)
    _checked: tuple[tuple[object, ...], str] = ((), "")

    def now(self) -> str:
        """UTC text of the present time."""
        return format_time(self.clock())

    def searchable(self) -> tuple[SearchableLibrary, ...]:
        """The libraries with indexes and states that know every event committed so far."""
        with self._lock:
            fresh = []
            for item in self._searchable:
                if item.library.fingerprint != item.state.fingerprint:
                    index = load_index(item.library, self.settings.weighting)
                    item = replace(item, index=index, state=item.library.state())
                fresh.append(item)
            self._searchable = tuple(fresh)
            return self._searchable

    @property
    def libraries(self) -> tuple[Library, ...]:
        """The libraries, in the order given."""
        return tuple(item.library for item in self._searchable)

    def library(self, number: int) -> Library:
        """Library by its number from 1.

        Raises
        ------
        NotFound
            If there is none.
        """
        if not 1 <= number <= len(self._searchable):
            raise NotFound("library", found=str(number), expected=f"a number from 1 to {len(self._searchable)}")
        return self._searchable[number - 1].library

    @contextmanager
    def writable(self, number: int = 1) -> Iterator[Library]:
        """A library open for writing, for one change.

        Raises
        ------
        NotFound, LibraryError
            See `library` and `identify.library.store.open_library`.
        """
        with open_library(self.library(number).path, writable=True) as library:
            yield library

    def shown_result(self, query_id: int, result_id: int) -> Rebuilt:
        """A stored result ready to show.

        Raises
        ------
        LibraryError
            If it belongs to libraries that are not open, or there is none.
        """
        key = (result_id, self._state())
        with self._lock:
            if key in self._rebuilt:
                self._rebuilt.move_to_end(key)
                return self._rebuilt[key]
        made = rebuild(self.case.document(result_id), self.case.record(query_id), self.libraries)
        with self._lock:
            self._rebuilt[key] = made
            while len(self._rebuilt) > MAX_REBUILT:
                self._rebuilt.popitem(last=False)
        return made

    def keep_drawn(self, result_id: int, make: Callable[[], Drawn]) -> Drawn:
        """What `make` made of a result, kept until a library changes."""
        key = (result_id, self._state())
        with self._lock:
            if key in self._drawn:
                self._drawn.move_to_end(key)
                kept: Drawn = self._drawn[key]
                return kept
        made = make()
        with self._lock:
            self._drawn[key] = made
            while len(self._drawn) > MAX_DRAWN:
                self._drawn.popitem(last=False)
        return made

    def entries_with(self, number: int, status: EntryStatus) -> list[Entry]:
        """Entries of one standing in a library; which they are is looked up once for each state of the library."""
        library = self.library(number)
        fingerprint = library.fingerprint
        known, ids = self._standing.get((number, status), ("", []))
        if known != fingerprint:
            ids = library.entry_ids({status})
            self._standing[number, status] = (fingerprint, ids)
        return library.get_entries(ids)

    def find_fault(self) -> str:
        """See `identify.workbench.decisions.find_fault`; every hash is computed again only when the case file has changed."""
        state = self.case.state()
        if self._checked[0] != state:
            self._checked = (state, find_fault(self.case))
        return self._checked[1]

    def _state(self) -> str:
        return ",".join(library.fingerprint for library in self.libraries)

    def new_upload(self) -> Path:
        """Path of a file for an upload, with a name nobody can guess or choose."""
        return self.spool / secrets.token_hex(16)

    def upload(self, name: str) -> Path:
        """Path of an upload kept earlier.

        Raises
        ------
        LibraryError
            If it is not there any more.
        """
        path = self.spool / name
        if len(name) != 32 or not set(name) <= set("0123456789abcdef") or not path.is_file():
            raise LibraryError("upload", found="a file that is not kept any more", expected="an upload of this case")
        return path


@contextmanager
def open_desk(
    libraries: Sequence[Path],
    case_path: Path,
    settings: Settings,
    *,
    clock: Callable[[], datetime] = lambda: datetime.now(UTC),
) -> Iterator[Desk]:
    """An open desk, closed on leaving the block.

    Parameters
    ----------
    libraries : sequence of Path
    case_path : Path
        Made when there is none; uploads are kept in a folder beside it.
    settings : Settings
    clock : callable

    Yields
    ------
    Desk

    Raises
    ------
    UsageError, LibraryError
        If a library or the case file cannot be opened.
    """
    with ExitStack() as stack:
        searchable = stack.enter_context(open_libraries(libraries, settings))
        case = stack.enter_context(open_case(case_path))
        spool = case_path.with_name(case_path.name + "-uploads")
        spool.mkdir(mode=0o700, exist_ok=True)
        yield Desk(case, settings, spool, clock, searchable)
