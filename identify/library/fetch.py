"""Download the open records a recipe names, then build a library of them.

The download is streamed into ``<file>.part`` and can be continued after a cut: the bytes that are there stay, and the
server is asked for the rest, if it still offers the very same file (ETag). What arrives is checked by size and SHA-256
where the recipe states them, by the SPLASH of every record, and by the numbers of records.
"""

from __future__ import annotations

import hashlib
import json
import time
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path
from typing import TYPE_CHECKING
from urllib.parse import urljoin

from identify import __version__
from identify.errors import FetchError, UsageError
from identify.library.build import BuildReport, build_library
from identify.library.drafts import NOT_POSITIVE, OTHER_FILE
from identify.library.intake import Progress
from identify.library.recipe import Recipe, check_address, read_recipe
from identify.readers.fault_reports import NOT_EI, NOT_MS1
from identify.spectra.splash import MISMATCH

if TYPE_CHECKING:
    from requests import Response, Session

Download = Callable[[int, int], None]
"""Called with the bytes that are there and the bytes expected (0 when the server does not say)."""

TIMEOUT_S = (15.0, 60.0)
"""For connecting, and between two pieces."""
N_TRIES = 4
PAUSE_S = 2.0
CHUNK_BYTES = 256 * 1024
MAX_REDIRECTS = 5
_REDIRECTS = frozenset({301, 302, 303, 307, 308})


@dataclass(frozen=True, slots=True)
class FetchReport:
    """What was downloaded and what was built of it."""

    build: BuildReport
    archive: str
    """Where the download is kept; it may be deleted."""
    n_bytes: int
    was_resumed: bool


def fetch_library(
    path: Path | str,
    recipe: Path | str,
    *,
    licences: str | Sequence[str] = "free",
    replace: bool = False,
    downloading: Download | None = None,
    progress: Progress | None = None,
    folder: Path | None = None,
    who: str,
    when: datetime,
    reason: str = "",
) -> FetchReport:
    """Report on a library built of the records that a recipe names.

    Parameters
    ----------
    path : Path or str
        Final name of the library.
    recipe : Path or str
        A recipe file, or the name of a shipped one.
    licences, replace, progress, who, when, reason
        As for `identify.library.build.build_library`.
    downloading : callable, optional
    folder : Path, optional
        Where the download is kept; the user's cache folder by default.

    Returns
    -------
    FetchReport

    Raises
    ------
    UsageError
        For a recipe that cannot be used.
    FetchError
        If the download fails, or what arrived is not what the recipe expects. Nothing appears at `path` then.
    InputError, LibraryError
        As `build_library`.
    """
    wanted = read_recipe(recipe)
    archive, resumed = download(wanted, folder or _default_folder(), downloading)
    build = build_library(
        path, [archive], licences=licences, replace=replace, progress=progress, who=who, when=when,
        reason=reason or wanted.name, accept=lambda report: check_counts(report, wanted),
    )  # fmt: skip
    return FetchReport(build, str(archive), archive.stat().st_size, resumed)


def check_counts(report: BuildReport, recipe: Recipe) -> None:
    """Compare what was read with what the recipe expects.

    Raises
    ------
    FetchError
        If there are fewer records, fewer electron-ionization records or more SPLASH mismatches than expected.
    """
    of_other_kind = sum(report.n_rejected.get(reason, 0) for reason in (NOT_EI, NOT_MS1, NOT_POSITIVE, OTHER_FILE))
    facts = (
        (report.n_read, recipe.records_at_least, "records"),
        (report.n_read - of_other_kind, recipe.electron_ionization_at_least, "electron-ionization records"),
    )
    for found, least, what in facts:
        if found < least:
            raise FetchError(
                "release", where=recipe.url, found=f"{found:,} {what}", expected=f"at least {least:,}",
                hint="The release has changed or the download is not whole; nothing was built.",
            )  # fmt: skip
    mismatches = report.n_rejected.get(MISMATCH, 0)
    if mismatches > recipe.splash_mismatches_at_most:
        raise FetchError(
            "release", where=recipe.url, found=f"{mismatches:,} records whose peaks do not fit their SPLASH",
            expected=f"at most {recipe.splash_mismatches_at_most:,}", hint="Nothing was built.",
        )  # fmt: skip


def _default_folder() -> Path:
    import platformdirs

    return Path(platformdirs.user_cache_dir("ionwitness", appauthor=False)) / "downloads"


def download(recipe: Recipe, folder: Path, progress: Download | None = None) -> tuple[Path, bool]:
    """The downloaded file, whole and checked, and whether an earlier try was continued.

    Parameters
    ----------
    recipe : Recipe
    folder : Path
        Created if missing.
    progress : callable, optional

    Returns
    -------
    path : Path
    was_resumed : bool

    Raises
    ------
    FetchError
        If it cannot be downloaded or is not what the recipe expects.
    """
    try:
        return _download(recipe, folder, progress)
    except OSError as error:
        raise FetchError(
            "download", where=str(folder), found=error.strerror or str(error), expected="a folder to write to"
        ) from None


def _download(recipe: Recipe, folder: Path, progress: Download | None) -> tuple[Path, bool]:
    import requests

    folder.mkdir(parents=True, exist_ok=True)
    target, part = folder / recipe.file, folder / f"{recipe.file}.part"
    if target.exists() and not _find_fault(target, recipe):
        return target, False
    resumed = part.exists() and part.stat().st_size > 0
    problem = ""
    with requests.Session() as session:
        for attempt in range(N_TRIES):
            if attempt:
                time.sleep(PAUSE_S * attempt)
            try:
                _continue_download(session, recipe, part, progress)
            except (requests.ConnectionError, requests.Timeout, requests.exceptions.ChunkedEncodingError) as error:
                problem = _shorten(error)
                continue
            except requests.RequestException as error:
                raise _fetch_error(recipe, _shorten(error), part) from None
            break
        else:
            raise _fetch_error(recipe, problem, part)
    fault = _find_fault(part, recipe)
    if fault:
        part.unlink()
        raise FetchError("download", where=recipe.url, found=fault, expected="the file the recipe describes")
    part.replace(target)
    _notes(part).unlink(missing_ok=True)
    return target, resumed


def _fetch_error(recipe: Recipe, problem: str, part: Path) -> FetchError:
    n_bytes = part.stat().st_size if part.exists() else 0
    again = "Run the command again to continue, or download" if n_bytes else "Without a network, download"
    return FetchError(
        "download", where=recipe.url, found=f"no connection ({problem}) after {n_bytes:,} bytes",
        expected="the release",
        hint=f"{again} {recipe.url} by other means and run `ionwitness library build LIB {recipe.file}`.",
    )  # fmt: skip


def _shorten(error: Exception) -> str:
    text = " ".join(str(error).split())
    return type(error).__name__ if len(text) > 90 or not text else text


def _find_fault(path: Path, recipe: Recipe) -> str:
    size = path.stat().st_size
    if recipe.size_bytes is not None and size != recipe.size_bytes:
        return f"{size:,} bytes instead of {recipe.size_bytes:,}"
    if recipe.sha256:
        with path.open("rb") as stream:
            found = hashlib.file_digest(stream, "sha256").hexdigest()
        if found != recipe.sha256:
            return f"SHA-256 {found}"
    return "" if size else "an empty file"


def _notes(part: Path) -> Path:
    return part.with_name(part.name + ".json")


def _continue_download(session: Session, recipe: Recipe, part: Path, progress: Download | None) -> None:
    have = part.stat().st_size if part.exists() else 0
    headers = {"Accept-Encoding": "identity", "User-Agent": f"ionwitness/{__version__}"}
    known = _read_notes(part, recipe)
    if have and known:
        headers |= {"Range": f"bytes={have}-", "If-Range": known}
    elif have and recipe.sha256:  # the whole will be checked, whatever the server promises
        headers |= {"Range": f"bytes={have}-"}
    else:
        have = 0
    response = _get(session, recipe, headers)
    with response:
        if response.status_code == 416:  # what is there is already the whole file, or longer than it
            part.unlink()
            raise _http_error(recipe, "a partial download longer than the file", "Run the command again.")
        have = have if response.status_code == 206 else 0
        if have and not response.headers.get("Content-Range", "").startswith(f"bytes {have}-"):
            part.unlink()
            raise _http_error(recipe, "another part of the file than asked for", "Run the command again.")
        _save_notes(part, recipe, response.headers)
        _store(response, recipe, part, have, progress)


def _store(response: Response, recipe: Recipe, part: Path, have: int, progress: Download | None) -> None:
    import requests
    import urllib3

    length = response.headers.get("Content-Length", "")
    total = have + int(length) if length.isdecimal() else 0
    if total > recipe.maximum_bytes:
        raise _http_error(recipe, f"{total:,} bytes", f"The recipe allows {recipe.maximum_bytes:,}.")
    with part.open("ab" if have else "wb") as stream:
        try:
            for piece in response.raw.stream(CHUNK_BYTES, decode_content=False):
                have += len(piece)
                if have > recipe.maximum_bytes:
                    raise _http_error(recipe, f"more than {recipe.maximum_bytes:,} bytes", "The recipe allows no more.")
                stream.write(piece)
                if progress:
                    progress(have, total)
        except urllib3.exceptions.HTTPError as error:
            raise requests.ConnectionError(_shorten(error)) from None
    if total and have != total:
        raise requests.ConnectionError(f"{have:,} of {total:,} bytes")


def _get(session: Session, recipe: Recipe, headers: Mapping[str, str]) -> Response:
    url = recipe.url
    for _ in range(MAX_REDIRECTS + 1):
        response = session.get(url, headers=dict(headers), stream=True, timeout=TIMEOUT_S, allow_redirects=False)
        if response.status_code in (200, 206, 416):
            return response
        target = response.headers.get("Location", "")
        response.close()
        if response.status_code not in _REDIRECTS or not target:
            hint = (
                f"Check the address in the recipe, or build from a copy: `ionwitness library build LIB {recipe.file}`."
            )
            raise _http_error(recipe, f"answer {response.status_code} {response.reason}", hint)
        url = urljoin(url, target)
        try:
            check_address(url, recipe.url)
        except UsageError:
            raise _http_error(recipe, "a redirect away from https", "The download was refused.") from None
    raise _http_error(recipe, f"more than {MAX_REDIRECTS} redirects", "Check the address in the recipe.")


def _http_error(recipe: Recipe, found: str, hint: str) -> FetchError:
    return FetchError("download", where=recipe.url, found=found, expected="the release", hint=hint)


def _read_notes(part: Path, recipe: Recipe) -> str:
    """ETag under which the partial download began; empty when it cannot be continued."""
    try:
        notes = json.loads(_notes(part).read_text("utf-8"))
    except (OSError, ValueError):
        return ""
    same = isinstance(notes, dict) and notes.get("url") == recipe.url
    return str(notes.get("etag", "")) if same else ""


def _save_notes(part: Path, recipe: Recipe, headers: Mapping[str, str]) -> None:
    tag = headers.get("ETag", "")
    if tag.startswith("W/"):  # a weak tag does not promise equal bytes
        tag = ""
    _notes(part).write_text(json.dumps({"url": recipe.url, "etag": tag or headers.get("Last-Modified", "")}), "utf-8")
