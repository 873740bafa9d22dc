"""Library → search index: loaded from a memory-mapped cache file where there is one, else built and kept.

The library is the truth; the cache can be deleted at any time. A cache names the event up to which it knows the library.
Entries never change, so a cache of an earlier or later state of the same chain stays useful: entries it lacks are added in
memory, entries it should not show are hidden. Anything else (another library, a truncated file, a changed bit,
another format) means: build anew.

File layout, all little-endian::

    8 bytes   magic "IONWIDX" + format version
    8 bytes   length of the header; 4 bytes CRC-32 of the header; 4 bytes zero
    header    JSON: library, event, weighting, segments → arrays (name, type, count, offset, CRC-32)
    arrays    each at a multiple of 64 bytes from the start of the file
"""

from __future__ import annotations

import contextlib
import json
import mmap
import re
import secrets
import struct
import zlib
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from identify.errors import IndexDamaged
from identify.index.search import SearchIndex, add_entries, build_index, hide_entries, merge_index
from identify.index.segment import Segment, segment_from_arrays
from identify.library.store import Library
from identify.settings import Weighting

FORMAT = 1
_MAGIC = b"IONWIDX" + bytes([FORMAT])
_HEAD = struct.Struct("<8sQII")
_ALIGN = 64
_MAX_HEADER = 2**20
_TYPES = frozenset({"<i8", "<i4", "<u4", "<u2", "|u1", "<f4", "<f8"})
LEFT_BEHIND_S = 600.0
"""A temporary file not written to for so long has no writer any more: an index of a million entries is written in seconds."""
MERGE_AT = 1000
"""Entries added or hidden in memory before they are merged and the cache file is written anew."""


def load_index(library: Library, weighting: Weighting, *, save: bool = True) -> SearchIndex:
    """Index over the searchable entries of a library, in its present state (or that of its `as_of`).

    Parameters
    ----------
    library : Library
    weighting : Weighting
    save : bool
        Whether a cache file is written when one is missing or far behind.

    Returns
    -------
    SearchIndex
        Exactly what a fresh build would find, whatever cache was used.

    Raises
    ------
    LibraryDamaged, LibraryError
        If the library cannot be read. A cache that cannot be used or written is never an error.
    """
    # Before anything else is read: what another process adds meanwhile must not count as known to the cache.
    now = library.search_fingerprint
    for path in cache_paths(library, weighting):
        try:
            index, event = read_index(path, _library_id(library), weighting)
        except IndexDamaged:
            continue
        current = _bring_up_to_date(library, index, event)
        if current is None:
            continue
        if save and library.as_of is None and _is_far_behind(current):
            current = merge_index(current)
            save_index(library, current, now)
        return current
    index = build_index(library.iter_peaks(library.entry_ids()), weighting)
    if save and library.as_of is None:
        save_index(library, index, now)
    return index


def _is_far_behind(index: SearchIndex) -> bool:
    n_added = sum(segment.n_entries for segment in index.segments[1:])
    n_hidden = sum(int(mask.sum()) for mask in index.hidden if mask is not None)
    return n_added + n_hidden >= MERGE_AT


def save_index(library: Library, index: SearchIndex, event: str) -> Path | None:
    """Where the cache of a freshly built index was written; None where nothing could be.

    Parameters
    ----------
    library : Library
    index : SearchIndex
        Without hidden entries.
    event : str
        `Library.search_fingerprint` as it was before the entries of the index were read: entries that came meanwhile may
        be in the index, none that came before is missing.

    Returns
    -------
    Path or None
    """
    library_id = _library_id(library)
    for path in cache_paths(library, index.weighting):
        try:
            path.parent.mkdir(parents=True, exist_ok=True)
            write_index(path, index, library_id, event)
        except OSError:
            continue
        return path
    return None


def cache_paths(library: Library, weighting: Weighting) -> tuple[Path, Path]:
    """Where a cache may lie: beside the library, else in the user's cache folder."""
    import platformdirs

    suffix = f"index-{weighting.mz_power:g}-{weighting.intensity_power:g}"
    user = Path(platformdirs.user_cache_dir("ionwitness", appauthor=False))
    beside = library.path.with_name(f"{library.path.name}-{suffix}")
    return beside, user / f"{_library_id(library)[:24]}-{suffix}"


def _library_id(library: Library) -> str:
    """Hash of the library's first event: no two libraries share it unless one is a copy of the other."""
    with library.reading() as connection:
        row = connection.execute("SELECT hash FROM event WHERE seq = 1").fetchone()
    return str(row[0]) if row else ""


def _bring_up_to_date(library: Library, index: SearchIndex, event: str) -> SearchIndex | None:
    if event == library.search_fingerprint:
        return index
    with library.reading() as connection:
        if connection.execute("SELECT 1 FROM event WHERE hash = ?", (event,)).fetchone() is None:
            return None  # a restored backup went another way from here: ids may mean other entries
    wanted = np.array(library.entry_ids(), dtype=np.int64)
    held = np.concatenate([segment.ids for segment in index.segments])
    missing = np.setdiff1d(wanted, held, assume_unique=True)
    surplus = np.setdiff1d(held, wanted, assume_unique=True)
    if missing.size:
        index = add_entries(index, library.iter_peaks(missing.tolist()))
    return hide_entries(index, surplus.tolist()) if surplus.size else index


def write_index(path: Path, index: SearchIndex, library_id: str, event: str) -> None:
    """Write an index atomically.

    Parameters
    ----------
    path : Path
    index : SearchIndex
        Without hidden entries.
    library_id, event : str
        Hash of the library's first event, and of the last one the index takes into account.

    Raises
    ------
    OSError
        If it cannot be written.
    """
    segments, blocks, offset = [], [], 0
    for segment in index.segments:
        described = []
        for name, array in segment.to_arrays().items():
            data = np.ascontiguousarray(array, dtype=array.dtype.newbyteorder("<"))
            described.append([name, data.dtype.str, data.size, offset, zlib.crc32(data.data.cast("B"))])
            blocks.append((offset, data))
            offset += -(-data.nbytes // _ALIGN) * _ALIGN
        segments.append(described)
    weighting = [index.weighting.mz_power, index.weighting.intensity_power]
    header = json.dumps(
        {"library": library_id, "event": event, "weighting": weighting, "segments": segments, "bytes": offset}
    ).encode()
    start = -(-(_HEAD.size + len(header)) // _ALIGN) * _ALIGN
    temporary = path.with_name(f".{path.name}.{secrets.token_hex(6)}")
    try:
        with temporary.open("wb") as stream:
            stream.write(_HEAD.pack(_MAGIC, len(header), zlib.crc32(header), 0))
            stream.write(header)
            for at, data in blocks:
                stream.seek(start + at)
                stream.write(data.data)
            stream.truncate(start + offset)
        written_s = temporary.stat().st_mtime
        temporary.replace(path)
    finally:
        temporary.unlink(missing_ok=True)
    _drop_left_behind(path, written_s)


def _drop_left_behind(path: Path, written_s: float) -> None:
    """Remove the temporary files of writers that were killed: of our own pattern, and long before the file just written."""
    pattern = re.compile(re.escape(f".{path.name}.") + r"[0-9a-f]{12}")
    for other in path.parent.iterdir():
        if pattern.fullmatch(other.name):
            with contextlib.suppress(OSError):  # another process may do the same
                if other.stat().st_mtime < written_s - LEFT_BEHIND_S:
                    other.unlink()


def read_index(path: Path, library_id: str, weighting: Weighting) -> tuple[SearchIndex, str]:
    """Index of a cache file, memory-mapped, and the event up to which it knows the library.

    Parameters
    ----------
    path : Path
    library_id : str
    weighting : Weighting

    Returns
    -------
    index : SearchIndex
    event : str

    Raises
    ------
    IndexDamaged
        If the file is missing, truncated, changed, of another format, library or weighting.
    """
    try:
        with path.open("rb") as stream:
            mapped = memoryview(mmap.mmap(stream.fileno(), 0, access=mmap.ACCESS_READ))
    except (OSError, ValueError) as error:
        raise IndexDamaged("search index", where=str(path), found=str(error), expected="a cache file") from None
    header, start = _read_header(mapped, path)
    expected = [library_id, [weighting.mz_power, weighting.intensity_power]]
    if [header.get("library"), header.get("weighting")] != expected:
        raise IndexDamaged("search index", where=str(path), found="another library", expected="this one")
    if header["bytes"] != len(mapped) - start:
        raise IndexDamaged("search index", where=str(path), found=f"{len(mapped)} bytes", expected="a whole file")
    segments = tuple(_read_segment(mapped[start:], described, path) for described in header["segments"])
    return SearchIndex(weighting, segments), str(header["event"])


def _read_header(mapped: memoryview, path: Path) -> tuple[dict[str, Any], int]:
    damaged = IndexDamaged("search index", where=str(path), found="a damaged header", expected=f"format {FORMAT}")
    if len(mapped) < _HEAD.size:
        raise damaged
    magic, length, checksum, _ = _HEAD.unpack_from(mapped)
    if magic != _MAGIC or length > min(_MAX_HEADER, len(mapped)):
        raise damaged
    text = bytes(mapped[_HEAD.size : _HEAD.size + length])
    if zlib.crc32(text) != checksum:
        raise damaged
    header = json.loads(text)
    return header, -(-(_HEAD.size + length) // _ALIGN) * _ALIGN


def _read_segment(data: memoryview, described: list[list[Any]], path: Path) -> Segment:
    arrays: dict[str, NDArray[Any]] = {}
    for name, kind, count, offset, checksum in described:
        end = offset + count * np.dtype(kind).itemsize if kind in _TYPES else -1
        if not 0 <= offset <= end <= len(data) or zlib.crc32(data[offset:end]) != checksum:
            raise IndexDamaged(
                "search index", where=str(path), found=f"a damaged array {name}", expected="an intact one"
            )
        arrays[name] = np.frombuffer(data, dtype=kind, count=count, offset=offset)
    return segment_from_arrays(arrays)
