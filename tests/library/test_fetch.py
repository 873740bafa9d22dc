"""A download is continued after a cut, checked by what arrives, and never leaves a library that is not what was expected."""

from __future__ import annotations

import hashlib
import io
import threading
import zipfile
from collections.abc import Iterator
from http.server import BaseHTTPRequestHandler, ThreadingHTTPServer
from pathlib import Path

import pytest
from library_builders import WHEN, WHO

from identify.errors import FetchError, UsageError
from identify.library import fetch
from identify.library.fetch import download, fetch_library
from identify.library.recipe import Recipe, read_recipe
from identify.library.store import open_library

RECORD = """ACCESSION: INVENTED-{number}
RECORD_TITLE: Toluene; {kind}; MS
LICENSE: CC BY
CH$NAME: Toluene
CH$FORMULA: C7H8
AC$INSTRUMENT_TYPE: {kind}
AC$MASS_SPECTROMETRY: MS_TYPE MS
AC$MASS_SPECTROMETRY: ION_MODE POSITIVE
PK$NUM_PEAK: 2
PK$PEAK: m/z int. rel.int.
  91 100 999
  92 60 599
//
"""


def build_archive(n_ei: int = 3, n_ci: int = 2) -> bytes:
    stream = io.BytesIO()
    with zipfile.ZipFile(stream, "w") as archive:
        for number in range(n_ei + n_ci):
            kind = "GC-EI-Q" if number < n_ei else "CI-B"
            archive.writestr(f"release/{number}.txt", RECORD.format(number=number, kind=kind))
    return stream.getvalue()


class Server:
    """A local release server that can be told to misbehave."""

    def __init__(self) -> None:
        self.content = build_archive()
        self.etag = '"one"'
        self.cuts: list[int] = []
        """For each answer to come: after how many bytes the connection is cut."""
        self.requests: list[dict[str, str]] = []
        self.status = 200
        self.location = ""
        self.understands_range = True
        outer = self

        class Handler(BaseHTTPRequestHandler):
            def log_message(self, *arguments: object) -> None:
                pass

            def do_GET(self) -> None:
                outer.answer(self)

        self.http = ThreadingHTTPServer(("127.0.0.1", 0), Handler)
        self.thread = threading.Thread(target=self.http.serve_forever, kwargs={"poll_interval": 0.01})
        self.thread.start()

    @property
    def url(self) -> str:
        return f"http://127.0.0.1:{self.http.server_port}/release.zip"

    def answer(self, handler: BaseHTTPRequestHandler) -> None:
        self.requests.append(dict(handler.headers))
        if self.status != 200:
            handler.send_response(self.status)
            if self.location:
                handler.send_header("Location", self.location)
            handler.send_header("Content-Length", "0")
            handler.end_headers()
            return
        start = 0
        asked = handler.headers.get("Range")
        if asked and self.understands_range and handler.headers.get("If-Range", self.etag) == self.etag:
            start = int(asked.removeprefix("bytes=").removesuffix("-"))
        body = self.content[start:]
        if start >= len(self.content):
            handler.send_response(416)
            handler.send_header("Content-Length", "0")
            handler.end_headers()
            return
        handler.send_response(206 if start else 200)
        if start:
            handler.send_header("Content-Range", f"bytes {start}-{len(self.content) - 1}/{len(self.content)}")
        handler.send_header("Content-Length", str(len(body)))
        if self.etag:
            handler.send_header("ETag", self.etag)
        handler.end_headers()
        cut = self.cuts.pop(0) if self.cuts else len(body)
        handler.wfile.write(body[:cut])
        handler.wfile.flush()
        handler.close_connection = True

    def close(self) -> None:
        self.http.shutdown()
        self.thread.join()
        self.http.server_close()


@pytest.fixture
def server(monkeypatch: pytest.MonkeyPatch) -> Iterator[Server]:
    monkeypatch.setattr(fetch, "PAUSE_S", 0.0)
    found = Server()
    yield found
    found.close()


def write_recipe(folder: Path, url: str, **more: object) -> Path:
    expected = {key: more.pop(key) for key in list(more) if key.endswith(("at_least", "at_most"))}
    lines = ['name = "invented release"', f'url = "{url}"', 'file = "release.zip"']
    lines += [f'{key} = "{value}"' if isinstance(value, str) else f"{key} = {value}" for key, value in more.items()]
    lines += ["[expected]", *(f"{key} = {value}" for key, value in expected.items())]
    path = folder / "recipe.toml"
    path.write_text("\n".join(lines))
    return path


def run(tmp_path: Path, server: Server, **more: object):
    recipe = write_recipe(tmp_path, server.url, **more)
    return fetch_library(tmp_path / "a.ionlib", recipe, folder=tmp_path / "downloads", who=WHO, when=WHEN)


def test_a_release_becomes_a_library(tmp_path: Path, server: Server) -> None:
    report = run(tmp_path, server, records_at_least=5, electron_ionization_at_least=3)
    assert (report.build.n_accepted, report.build.n_rejected) == (3, {"not electron ionization": 2})
    assert (report.n_bytes, report.was_resumed) == (len(server.content), False)
    with open_library(tmp_path / "a.ionlib") as library:
        assert library.events()[1].reason == "invented release"
        assert library.events()[1].details["sha256"] == hashlib.sha256(server.content).hexdigest()


def test_a_cut_connection_is_continued_where_it_stopped(tmp_path: Path, server: Server) -> None:
    server.cuts = [700, 300]
    report = run(tmp_path, server)
    assert report.build.n_accepted == 3
    assert [request.get("Range") for request in server.requests] == [None, "bytes=700-", "bytes=1000-"]
    assert Path(report.archive).read_bytes() == server.content


def test_a_later_command_continues_an_earlier_one(tmp_path: Path, server: Server) -> None:
    server.cuts = [400, 0, 0, 0]
    with pytest.raises(FetchError, match=r"after 400 bytes, expected the release\. Run the command again to continue"):
        run(tmp_path, server)
    assert not (tmp_path / "a.ionlib").exists()
    report = run(tmp_path, server)
    assert report.was_resumed
    assert server.requests[-1]["Range"] == "bytes=400-"
    assert Path(report.archive).read_bytes() == server.content


def test_a_file_changed_at_the_server_is_downloaded_anew(tmp_path: Path, server: Server) -> None:
    server.cuts = [400, 0, 0, 0]
    with pytest.raises(FetchError):
        run(tmp_path, server)
    server.content, server.etag = build_archive(4, 0), '"two"'
    report = run(tmp_path, server)
    assert report.build.n_accepted == 4
    assert Path(report.archive).read_bytes() == server.content


@pytest.mark.parametrize("fault", ["no range", "weak tag", "no tag"])
def test_a_server_that_cannot_continue_is_asked_for_the_whole(tmp_path: Path, server: Server, fault: str) -> None:
    server.understands_range = fault != "no range"
    server.etag = {"no range": '"one"', "weak tag": 'W/"one"', "no tag": ""}[fault]
    server.cuts = [400]
    report = run(tmp_path, server)
    assert Path(report.archive).read_bytes() == server.content


def test_a_finished_download_is_not_repeated(tmp_path: Path, server: Server) -> None:
    run(tmp_path, server)
    (tmp_path / "a.ionlib").unlink()
    run(tmp_path, server)
    assert len(server.requests) == 1


@pytest.mark.parametrize(
    ("more", "message"),
    [
        ({"records_at_least": 6}, "found 5 records, expected at least 6"),
        ({"electron_ionization_at_least": 4}, "found 3 electron-ionization records, expected at least 4"),
        ({"size_bytes": 7}, "bytes instead of 7"),
        ({"sha256": "0" * 64}, "found SHA-256 "),
        ({"maximum_bytes": 100}, "The recipe allows 100"),
    ],
)
def test_what_is_not_expected_gives_no_library(
    tmp_path: Path, server: Server, more: dict[str, object], message: str
) -> None:
    with pytest.raises(FetchError, match=message):
        run(tmp_path, server, **more)
    assert sorted(found.name for found in tmp_path.iterdir()) == ["downloads", "recipe.toml"]


def test_a_record_that_does_not_fit_its_splash_stops_the_build(tmp_path: Path, server: Server) -> None:
    stream = io.BytesIO()
    wrong = RECORD.format(number=1, kind="GC-EI-Q").replace(
        "PK$NUM_PEAK", "PK$SPLASH: splash10-0006-0900000000-b112e4e059e1ecf98c5f\nPK$NUM_PEAK"
    )
    with zipfile.ZipFile(stream, "w") as archive:
        archive.writestr("1.txt", wrong)
        archive.writestr("2.txt", RECORD.format(number=2, kind="GC-EI-Q"))
    server.content = stream.getvalue()
    with pytest.raises(FetchError, match="found 1 records whose peaks do not fit their SPLASH, expected at most 0"):
        run(tmp_path, server)


def test_offline_one_sentence_says_what_to_do(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(fetch, "PAUSE_S", 0.0)
    recipe = Recipe("x", "http://127.0.0.1:9/release.zip", "release.zip", 10**6)
    with pytest.raises(FetchError) as caught:
        download(recipe, tmp_path)
    message = str(caught.value)
    assert message.startswith("download in http://127.0.0.1:9/release.zip: found no connection (")
    assert message.endswith(
        "after 0 bytes, expected the release. Without a network, download http://127.0.0.1:9/release.zip by other means"
        " and run `ionwitness library build LIB release.zip`."
    )


def test_a_missing_release_and_a_redirect_to_plain_http_are_refused(tmp_path: Path, server: Server) -> None:
    server.status = 404
    with pytest.raises(FetchError, match="found answer 404 Not Found, expected the release"):
        run(tmp_path, server)
    server.status, server.location = 302, "http://example.org/release.zip"
    with pytest.raises(FetchError, match="a redirect away from https"):
        run(tmp_path, server)
    server.location = server.url
    with pytest.raises(FetchError, match="more than 5 redirects"):
        run(tmp_path, server)


@pytest.mark.parametrize(
    ("line", "message"),
    [
        ('url = "http://example.org/a.zip"', "expected an https address"),
        ('url = "https://user@example.org/a.zip"', "expected an https address"),
        ('url = "file:///etc/passwd"', "expected an https address"),
        ('file = "../a.zip"', "expected a plain file name"),
        ('file = ".hidden"', "expected a plain file name"),
        ("maximum_bytes = true", "expected a int"),
        ('colour = "red"', "expected one of name, url"),
        ('sha256 = "abc"', "expected 64 hexadecimal digits"),
    ],
)
def test_a_recipe_that_asks_for_anything_else_is_refused(tmp_path: Path, line: str, message: str) -> None:
    lines = {"name": 'name = "x"', "url": 'url = "https://example.org/a.zip"', "file": 'file = "a.zip"'}
    lines[line.split(" ")[0]] = line
    path = tmp_path / "r.toml"
    path.write_text("\n".join(lines.values()))
    with pytest.raises(UsageError, match=message):
        read_recipe(path)


def test_the_shipped_recipe_can_be_read_by_name() -> None:
    recipe = read_recipe("open-ei")
    assert recipe.url.startswith("https://")
    assert recipe.records_at_least >= 14_155
    with pytest.raises(UsageError, match="no file 'nothing'"):
        read_recipe("nothing")


def test_a_folder_that_cannot_be_written_is_said(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("in the way")
    recipe = Recipe("invented", "https://localhost/a.zip", "a.zip", 1000)
    with pytest.raises(FetchError, match=r"download in .*file.*found .*, expected a folder to write to"):
        download(recipe, tmp_path / "file" / "below")
