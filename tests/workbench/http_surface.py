"""The workbench without a socket, and requests made of choices: what a hostile page, script or colleague can send it.

`tests/workbench/test_http_surface.py` lets hypothesis choose, `tests/benchmarks/fuzz.py http` a coverage-guided fuzzer. Routes
and their fields are taken from the application's own schema, so that a new one is attacked without a word here.
"""

from __future__ import annotations

import asyncio
import itertools
import json
import re
import shutil
from collections.abc import Iterator, Mapping, MutableMapping
from contextlib import ExitStack, contextmanager
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from typing import Any, Protocol
from urllib.parse import quote, unquote, urlencode

from identify.library.build import build_from_records
from identify.library.starter import starter_records
from identify.records import Source, SpectrumRecord
from identify.settings import Settings
from identify.workbench.app import build_app
from identify.workbench.case_rows import NewQuery
from identify.workbench.desk import Desk, open_desk
from identify.workbench.drawn_query import DrawnQuery, draw_result
from identify.workbench.guard import HEADERS, App
from identify.workbench.identifier import identify_record
from identify.workbench.job_list import add_job, finish_job
from identify.workbench.jobs import JobRunner
from identify.workbench.pages import Workbench
from identify.workbench.people import set_person
from identify.workbench.sessions import Person, Sessions

HOST = "127.0.0.1:8377"
COOKIE = "ionwitness-8377"
MARK = "<q-mark id=x>'\"&"
"""Sent in every kind of field; may never come back as markup."""
WHEN = datetime(2026, 1, 5, tzinfo=UTC)


class Choices(Protocol):
    """Where the decisions of a request come from."""

    def below(self, limit: int) -> int:
        """A whole number from 0 to below a limit."""

    def text(self) -> str:
        """Any text."""

    def data(self) -> bytes:
        """Any bytes."""


@dataclass(frozen=True)
class Field:
    """A field of a form, a query string or a path, by the application's schema."""

    name: str
    place: str
    """`path`, `query` or `form`."""
    is_file: bool = False
    values: tuple[str, ...] = ()


@dataclass(frozen=True)
class Route:
    """A route with its fields."""

    method: str
    path: str
    fields: tuple[Field, ...]
    is_multipart: bool


@dataclass(frozen=True)
class Asked:
    """A request as it arrives from the network."""

    method: str
    target: str
    headers: tuple[tuple[bytes, bytes], ...]
    body: bytes = b""


@dataclass(frozen=True)
class Answer:
    """What came back."""

    status: int
    headers: Mapping[str, str]
    body: bytes

    @property
    def text(self) -> str:
        """Body as text."""
        return self.body.decode("utf-8")


class InProcess:
    """Identifies and draws where it is asked, without a process of its own."""

    def __init__(self, desk: Desk) -> None:
        self._desk = desk

    def identify(self, record: SpectrumRecord, number: int, settings: Settings | None = None) -> dict[str, Any]:
        """See `identify.workbench.identifier_process.IdentifierProcess.identify`."""
        return identify_record(self._desk, record, number, settings or self._desk.settings)

    def draw(self, query_id: int, result_id: int) -> DrawnQuery:
        """See `identify.workbench.identifier_process.IdentifierProcess.draw`."""
        return draw_result(self._desk, query_id, result_id)


@dataclass
class Surface:
    """An application with two people signed in, three queries, a run and a proposed standard."""

    app: App
    desk: Desk
    loop: asyncio.AbstractEventLoop
    sessions: tuple[str, str]
    """An analyst's and a reviewer's."""
    routes: tuple[Route, ...] = ()

    def ask(self, asked: Asked) -> Answer:
        """Answer to a request; whatever the application raises comes through."""
        raw_path, _, query = asked.target.partition("?")
        scope: MutableMapping[str, Any] = {
            "type": "http", "asgi": {"version": "3.0", "spec_version": "2.3"}, "http_version": "1.1", "root_path": "",
            "server": ("127.0.0.1", 8377), "client": ("127.0.0.1", 1), "scheme": "http", "method": asked.method,
            "path": unquote(raw_path), "raw_path": raw_path.encode("ascii"), "query_string": query.encode("ascii"),
            "headers": list(asked.headers), "state": {},
        }  # fmt: skip
        parts = [asked.body[start : start + 700] for start in range(0, len(asked.body), 700)] or [b""]
        given = iter([*({"type": "http.request", "body": part, "more_body": True} for part in parts[:-1]),
                      {"type": "http.request", "body": parts[-1], "more_body": False}])  # fmt: skip
        said: list[MutableMapping[str, Any]] = []

        async def receive() -> MutableMapping[str, Any]:
            return next(given, {"type": "http.disconnect"})

        async def send(message: MutableMapping[str, Any]) -> None:
            said.append(message)

        self.loop.run_until_complete(self.app(scope, receive, send))
        start, *rest = said
        headers = {name.decode("latin-1").lower(): value.decode("latin-1") for name, value in start["headers"]}
        assert rest and not rest[-1].get("more_body", False), "an answer without an end"
        return Answer(start["status"], headers, b"".join(message.get("body", b"") for message in rest))


@contextmanager
def open_surface(folder: Path) -> Iterator[Surface]:
    """An application on a fresh library and case in a folder made by `make_folder`."""
    with ExitStack() as stack:
        desk = stack.enter_context(
            open_desk([folder / "lab.ionlib"], folder / "lab.ioncase", Settings(), clock=lambda: WHEN)
        )
        jobs, sessions = JobRunner(desk), Sessions()
        jobs.identifier = InProcess(desk)  # type: ignore[assignment]
        loop = asyncio.new_event_loop()
        stack.callback(loop.close)
        stack.callback(lambda: loop.run_until_complete(loop.shutdown_default_executor()))
        bench = Workbench(desk, jobs, sessions, COOKIE, False)
        people = (Person("Ada", "analyst"), Person("Eve", "reviewer"))
        surface = Surface(build_app(bench, [HOST]), desk, loop, (sessions.start(people[0]), sessions.start(people[1])))
        schema = json.loads(surface.ask(_plain("/api/openapi.json", surface.sessions[1])).text)
        surface.routes = tuple(_read_routes(schema))
        yield surface


def make_folder(folder: Path) -> None:
    """A library and a case to be attacked; copied, because requests change them."""
    folder.mkdir(parents=True, exist_ok=True)
    build_from_records(folder / "lab.ionlib", starter_records()[:8], origin="t", who="t", when=WHEN)
    with open_surface(folder) as surface:
        desk = surface.desk
        set_person(desk.case, "Eve", "reviewer", "a long enough password", desk.now())
        job = add_job(desk.case, "spectra", f"{MARK}.csv", "Ada", desk.now(), {"upload": "0" * 32})
        spectra = ([15.0, 43.0, 58.0], [43.0, 58.0, 59.0], [91.0, 92.0, 65.0])
        records = [
            SpectrumRecord(Source(f"{MARK}.csv", 1), sorted(mz), [30.0, 100.0, 25.0], title=f"{MARK} {number}")  # type: ignore[arg-type]
            for number, mz in enumerate(spectra)
        ]
        found = [identify_record(desk, record, n, Settings()) for n, record in enumerate(records, start=1)]
        new = [NewQuery(n, *both) for n, both in enumerate(zip(records, found, strict=True), start=1)]
        desk.case.add_queries(job, new[:2], who="Ada", at=desk.now(), run_id=None)
        run_job = add_job(desk.case, "run", f"{MARK}.cdf", "Ada", desk.now(), {"upload": "0" * 32})
        run = desk.case.add_run(run_job, f"{MARK}.cdf", desk.now(), _run())
        of_run = [NewQuery(1, records[2], found[2])]
        desk.case.add_queries(run_job, of_run, who="Ada", at=desk.now(), run_id=run)
        for number in (job, run_job):
            finish_job(desk.case, number, "done", MARK, desk.now())
        (desk.spool / ("0" * 32)).write_text("43 100\n58 30\n")
        propose = next(route for route in surface.routes if (route.method, route.path) == ("POST", "/api/standards"))
        answer = surface.ask(request_of(surface, propose, GOOD["/standards"], session=0))
        assert answer.status == 201, answer.text


def _run() -> dict[str, Any]:
    component = {
        "number": 1, "time_s": 61.0, "start_s": 60.0, "end_s": 62.0, "height": 5.0, "area": 9.0, "share_of_signal": 0.5,
        "signal_to_noise": 10.0, "shape_quality": 0.9, "purity": 0.9, "is_saturated": False, "kind": "compound",
        "note": MARK, "index": 900.0, "reason": MARK,
    }  # fmt: skip
    return {
        "title": MARK, "instrument": MARK, "acquired": "", "n_scans": 4, "notes": [MARK], "blank": "", "ladder": "",
        "column": MARK, "shares": {"in no component": 1.0}, "scale": "", "time_s": [60.0, 61.0, 62.0, 63.0],
        "intensity": [1.0, 5.0, 2.0, 1.0], "components": [component],
    }  # fmt: skip


@contextmanager
def fresh_surface(made: Path, folder: Path) -> Iterator[Surface]:
    """A surface on a copy of a made folder."""
    shutil.rmtree(folder, ignore_errors=True)
    shutil.copytree(made, folder)
    with open_surface(folder) as surface:
        yield surface


def _plain(path: str, session: str) -> Asked:
    return Asked("GET", path, ((b"host", HOST.encode()), (b"cookie", f"{COOKIE}={session}".encode())))


def _read_routes(schema: Mapping[str, Any]) -> Iterator[Route]:
    for (path, methods), prefix in itertools.product(schema["paths"].items(), ("/api", "")):
        for method, told in methods.items():
            content = told.get("requestBody", {}).get("content", {})
            kind = next(iter(content), "")
            form = content[kind]["schema"] if kind else {}
            form = schema["components"]["schemas"][form["$ref"].rpartition("/")[2]] if "$ref" in form else form
            fields = [
                Field(item["name"], item["in"], values=_values(item["schema"])) for item in told.get("parameters", ())
            ]
            fields += [
                Field(name, "form", "binary" in str(item) or "contentMediaType" in str(item), _values(item))
                for name, item in form.get("properties", {}).items()
            ]
            shown = path.removeprefix("/api") if not prefix else path
            yield Route(method.upper(), "/" if shown == "/work-list" else shown, tuple(fields), "multipart" in kind)
    for path in ("/sign-in", "/sign-out", "/open/{token}", "/static/{name}", "/nowhere"):
        names = re.findall(r"{(\w+)}", path)
        for method in ("GET", "POST", "PUT", "HEAD"):
            forms = [Field(name, "form") for name in ("name", "password")]
            yield Route(method, path, (*(Field(name, "path") for name in names), *forms), False)


def _values(schema: Mapping[str, Any]) -> tuple[str, ...]:
    return tuple(map(str, schema.get("enum", ()) or schema.get("const", ()) or ()))


GOOD: Mapping[str, Mapping[str, str]] = {
    "/queries/{query_id}/decisions": {
        "kind": "accept",
        "level": "class",
        "candidate": "1",
        "note": MARK,
        "result": "1",
        "seen": "0",
    },
    "/queries/{query_id}/cleaning": {"noise": "true"},
    "/standards": {"query": "1", "name": "acetone", "supplier": MARK, "lot": "1", "formula": "C3H6O", "note": MARK},
    "/library/{library_number}/entries/{entry_id}/review": {"verdict": "accept", "reason": MARK, "entry_id": "9"},
    "/library/{library_number}/entries/{entry_id}/withdrawal": {"reason": MARK},
    "/pasted": {"peaks": "43 100, 58 30", "name": MARK},
    "/uploads": {"files": "43 100\n58 30\n", "ladder": "C10 8.0\nC11 9.0\nC12 10.2", "column": MARK},
    "/sign-in": {"name": "Eve", "password": "a long enough password"},
}
"""Fields of requests that are accepted, by path without ``/api``; numbers in paths are 1."""
ODD = (
    "", "0", "1", "2", "3", "-1", "9", "1e3", "1.5", "nan", "inf", "true", "on", "None", "null", "9" * 20, "2" * 400, "x",
     " ", "\0", "\n", "\r\nset-cookie: a=b", MARK, "../../etc/passwd", "a" * 300, "b" * 5000, "é", "٣", "\u202e", "\ud800",
    "\U0001f9ea", "C3H6O", "C9999999", "CC(C)=O", "C1CC", "[Xx]", "43 100", "43,100;58:30", "m/z", "91 92", "58", "n TMS",
    "accept", "refuse", "reject", "reopen", "note", "follow-up", "confirmed", "class", "supported", "claimed", "all", "run",
    "C10 8.0", "C10 8.0\nC10 8.0", "acetone", "toluene", "STARTER-000001", "%00", "%", "_", "'; DROP TABLE query; --", "{{7*7}}",
)  # fmt: skip


def request_of(surface: Surface, route: Route, fields: Mapping[str, str], session: int = 1) -> Asked:
    """A request as our own page sends it."""
    cookie = f"{COOKIE}={surface.sessions[session]}".encode()
    heads = ((b"host", HOST.encode()), (b"origin", f"http://{HOST}".encode()), (b"cookie", cookie))
    return _build(route, list(fields.items()), heads)


def choose_request(surface: Surface, choices: Choices) -> Asked:
    """A request near one that is accepted, with odd values, fields, heads and bodies here and there."""
    route = surface.routes[choices.below(len(surface.routes))]
    good = {f.name: "1" for f in route.fields if f.place == "path"} | dict(
        GOOD.get(route.path.removeprefix("/api"), {})
    )
    values = [(name, value) for name, value in good.items()]
    for _ in range(choices.below(5)):
        chosen = route.fields[choices.below(len(route.fields))].name if route.fields else choices.text()
        value = _odd_value(route, chosen, choices)
        action = choices.below(8)
        if action == 0 and values:
            del values[choices.below(len(values))]
        elif action == 1:
            values.append((chosen, value))
        elif action == 2:
            values.append((choices.text(), value))
        else:
            values = [(n, v) for n, v in values if n != chosen] + [(chosen, value)]
    asked = _build(route, values, _heads(surface, choices))
    twist = choices.below(24)
    if twist == 0:
        asked = Asked(asked.method, asked.target, asked.headers, choices.data())
    elif twist == 1:
        asked = Asked(asked.method, asked.target, asked.headers, asked.body[: choices.below(len(asked.body) + 1)])
    elif twist == 2:
        method = ("GET", "POST", "HEAD", "PUT", "DELETE", "OPTIONS", "PATCH")[choices.below(7)]
        asked = Asked(method, asked.target, asked.headers, asked.body)
    elif twist == 3:
        asked = Asked(asked.method, "/" + quote(choices.data()), asked.headers, asked.body)
    elif twist == 4:
        own = tuple(head for head in asked.headers if head[0] not in (b"content-type", b"content-length"))
        kinds = (b"application/json", b"multipart/form-data", b"multipart/form-data; boundary=", b"text/plain", b"\xff")
        kind = (kinds[choices.below(5)], choices.data()[:40].translate(None, b"\0\r\n"))[choices.below(2)]
        length = str(len(asked.body)).encode()
        asked = Asked(
            asked.method, asked.target, (*own, (b"content-type", kind), (b"content-length", length)), asked.body
        )
    return asked


def _odd_value(route: Route, name: str, choices: Choices) -> str:
    known = next((f.values for f in route.fields if f.name == name), ())
    which = choices.below(8)
    if which == 0 and known:
        return known[choices.below(len(known))]
    return choices.text() if which == 1 else ODD[choices.below(len(ODD))]


def _heads(surface: Surface, choices: Choices) -> tuple[tuple[bytes, bytes], ...]:
    host, origin, cookie = (
        HOST.encode(),
        f"http://{HOST}".encode(),
        f"{COOKIE}={surface.sessions[choices.below(2)]}".encode(),
    )
    twist = choices.below(40)
    odd = choices.data()[:60].translate(None, b"\0\r\n") if twist < 6 else b""
    own = ((b"host", host), (b"origin", origin))
    signed = (*own, (b"cookie", cookie))
    if twist == 0:
        return (*own, (b"cookie", odd))
    if twist == 1:
        return ((b"host", host), (b"origin", odd), (b"cookie", cookie))
    if twist == 2:
        return ((b"host", odd), (b"origin", origin), (b"cookie", cookie))
    if twist == 3:
        return (*signed, (b"sec-fetch-site", odd), (b"sec-fetch-mode", b"no-cors"))
    if twist == 4:
        return (*signed, (b"accept", odd), (b"range", odd), (b"if-none-match", odd))
    if twist == 5:
        return (*own, (b"cookie", cookie + b"; " + odd), (b"cookie", odd), (b"expect", odd))
    return own if twist == 6 else signed


def _build(route: Route, values: list[tuple[str, str]], heads: tuple[tuple[bytes, bytes], ...]) -> Asked:
    places = {item.name: item for item in route.fields}
    path = route.path
    query, form = [], []
    for name, value in values:
        place = places[name].place if name in places else "query" if route.method == "GET" else "form"
        if place == "path":
            path = path.replace("{" + name + "}", quote(value, safe="", errors="replace"), 1)
        else:
            (query if place == "query" else form).append((name, value))
    target = path + ("?" + urlencode(query, errors="replace") if query else "")
    target = re.sub(r"[{}]", "", target)
    if route.method in ("GET", "HEAD") or not form:
        kind, body = b"", b""
    elif route.is_multipart:
        kind, body = b"multipart/form-data; boundary=edge", _multipart(places, form)
    else:
        kind, body = b"application/x-www-form-urlencoded", urlencode(form, errors="replace").encode()
    if route.method not in ("GET", "HEAD"):
        heads = (*heads, (b"content-length", str(len(body)).encode()))
    return Asked(route.method, target, (*heads, (b"content-type", kind)) if kind else heads, body)


def _multipart(places: Mapping[str, Field], form: list[tuple[str, str]]) -> bytes:
    parts = []
    for name, value in form:
        shown = name.encode("utf-8", "replace").replace(b'"', b"%22")
        is_file = name in places and places[name].is_file
        more = b'; filename="' + value[:20].encode("utf-8", "replace") + b'"' if is_file else b""
        head = b'Content-Disposition: form-data; name="' + shown + b'"' + more
        parts.append(b"--edge\r\n" + head + b"\r\n\r\n" + value.encode("utf-8", "replace") + b"\r\n")
    return b"".join(parts) + b"--edge--\r\n"


def check_answer(surface: Surface, asked: Asked, answer: Answer) -> None:
    """What must hold for every answer to anything."""
    assert answer.status < 500, (asked, answer.text)
    for name, value in HEADERS.items():
        assert answer.headers.get(name) == value, (asked, name)
    assert set(answer.headers) <= {
        *HEADERS, "content-type", "content-length", "location", "set-cookie", "allow", "connection"
    }, answer.headers  # fmt: skip
    location = answer.headers.get("location", "/")
    assert location.startswith("/") and not location.startswith("//"), (asked, location)
    kind = answer.headers.get("content-type", "")
    if kind.startswith("text/html"):
        assert "<q-mark" not in answer.text, asked
    if kind == "application/json" and answer.status >= 400:
        told = json.loads(answer.text)["error"]
        assert told["what"] and told["found"] and told["expected"], asked
    cookies = [value for name, value in asked.headers if name == b"cookie"]
    if not any(session.encode() in cookie for session in surface.sessions for cookie in cookies):
        assert "acetone" not in answer.text and "Ada" not in answer.text, "shown to nobody in particular"
